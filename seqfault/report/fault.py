"""One fault in full, as a page."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Complex
from seqfault.report.facts import after, conditions, impedances, x_over_r
from seqfault.report.flows import carried, components, feeding, leftover
from seqfault.report.numbers import angle, figures, fixed, kilovolt, ohms, quiet
from seqfault.report.tables import (
    AMPERE,
    ANGLE,
    KILOVOLT,
    PERCENT,
    Block,
    Cell,
    Fact,
    Facts,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
)

PHASES = (Group(("phase a",)), Group(("phase b",)), Group(("phase c",)), Group(("3I0, 3V0",)))


def fault_page(
    network: Network, solution: FaultSolution, *, every_flow: bool = False, sequence: bool = False
) -> Page:
    """The page of ``solution``, solved on ``network``.

    ``every_flow`` lists elements that carry next to nothing too, ``sequence`` adds components.
    """
    s = solution
    phases = f"phase{'s' if len(s.fault.phases) > 1 else ''} {' '.join(s.fault.phases)}"
    title = Title(
        network.model.title,
        f"{s.fault.place}  {kilovolt(s.nominal)}",
        f"{s.fault.kind.name} ({s.fault.kind.symbol}), {phases}, {conditions([s])}",
    )
    parts: list[Part] = [title, Table(PHASES, (_into(s),))]
    if s.home:
        parts.append(home_table(s))
    parts.append(Table(PHASES, _voltages(s)))
    flows, left_out = carried(s, every_flow)
    blocks = [block for block in (feeding(s), flows) if block.rows]
    if blocks:
        parts.append(Table(PHASES, tuple(blocks)))
    parts.append(Sentences("", leftover(left_out)))
    parts += _star_points(network, s)
    parts += _deltas(s)
    parts += _earthed_lines(s)
    if sequence:
        parts.append(components(s))
    parts += [impedances(s), Facts(tuple(_facts(s))), *after([s])]
    return Page(tuple(parts))


def phasors(values: Sequence[complex] | Complex, top: float) -> tuple[tuple[Cell, ...], ...]:
    """Size and angle of each of ``values``, rounding beside ``top`` as 0."""
    return tuple((abs(v), angle(v)) for v in (quiet(complex(x), top) for x in values))


def _into(s: FaultSolution) -> Block:
    top = float(np.abs(s.current).max())
    values = np.append(s.current, s.residual)
    row = Row("fault current", phasors(values, top))
    return Block("Into the fault: ampere, degrees", (AMPERE, ANGLE), (row,))


def home_table(s: FaultSolution) -> Table:
    """How the earth current of one fault gets home: each path, and its share of 3I0."""
    total = abs(s.residual)
    top = max([total, *(abs(path.current) for path in s.home)])
    rows = []
    for path in s.home:
        current = quiet(path.current, top)
        share = fixed(abs(current) / total, 3) if total and current else "-"
        rows.append(Row(path.path, ((abs(current), angle(current)), (share,))))
    whole = "1.000" if total else "-"
    rows.append(Row("together (3I0)", (*phasors([s.residual], top), (whole,))))
    return Table(
        (Group(("from earth",)), Group(("share of", "3I0"))),
        (Block("", (AMPERE, ANGLE), tuple(rows)),),
        heading="How that earth current gets home: ampere, degrees",
    )


def _voltages(s: FaultSolution) -> tuple[Block, ...]:
    percent, kilovolts = [], []
    phases = s.voltage
    for k, bus in enumerate(s.buses):
        before = abs(complex(s.before[k]))
        label = f"{bus}  {kilovolt(float(s.bus_nominal[k]))}"
        values = np.append(phases[:, k], 3 * s.voltage_sequence[0, k]).tolist()
        if s.undefined[k]:
            percent.append(Row(label, (("undefined",),) * 4))
            kilovolts.append(Row(bus, (("undefined",),) * 4))
            continue
        top = max(before, float(np.abs(values).max()))
        cells: list[tuple[Cell, ...]] = [
            (100 * abs(quiet(v, top)) / before if before else "dead",) for v in values
        ]
        percent.append(Row(label, tuple(cells)))
        kilovolts.append(Row(bus, phasors([v / 1000 for v in values], top / 1000)))
    return (
        Block(
            "Left at the buses: per cent of the phase voltage to earth before the fault",
            (PERCENT,),
            tuple(percent),
        ),
        Block("The same in kilovolt, degrees", (KILOVOLT, ANGLE), tuple(kilovolts)),
    )


def _star_points(network: Network, s: FaultSolution) -> list[Part]:
    if not s.star_points:
        return []
    top = max([float(np.abs(s.current).max()), *(abs(p.current) for p in s.star_points)])
    rows = []
    stars = network.model.stars
    impedance = dict(zip(stars.names, stars.impedance.tolist(), strict=True))
    for point in s.star_points:
        current = quiet(point.current, top)
        nominal = float(s.bus_nominal[s.index[point.bus]])
        voltage: tuple[Cell, ...] = ("undefined", "")
        if point.voltage is not None:
            volt = quiet(point.voltage, nominal)
            voltage = (abs(volt), angle(volt))
        how = earthed(point.kind, impedance[point.name])
        rows.append(Row(point.name, ((abs(current), angle(current)), voltage, (how,))))
    groups = (Group(("to earth, A",)), Group(("voltage, V",)), Group(("earthed",), left=True))
    table = Table(
        groups,
        (Block("", (AMPERE, ANGLE), tuple(rows)),),
        heading="Star points: current from star point to earth, voltage to earth",
    )
    return [table]


def earthed(kind: str, impedance: complex) -> str:
    """How a star point is earthed: solid, isolated, or its ohms."""
    if kind != "neutral":
        return kind
    return ohms(impedance, 4) if np.isfinite(impedance) else "its neutral is out"


def _deltas(s: FaultSolution) -> list[Part]:
    top = max([float(np.abs(s.current).max()), *(abs(d.current) for d in s.deltas)])
    rows = [
        Row(f"{d.element} {d.side}", ((abs(current), angle(current)), (d.bus,)))
        for d in s.deltas
        if (current := quiet(d.current, top))
    ]
    if not rows:
        return []
    return [
        Table(
            (Group(("ampere",)), Group(("at bus",), left=True)),
            (Block("", (AMPERE, ANGLE), tuple(rows)),),
            heading="Current round the deltas, in the windings",
        )
    ]


def _earthed_lines(s: FaultSolution) -> list[Part]:
    rows = tuple(Row(line.name, ((abs(line.residual), angle(line.residual)),)) for line in s.earthed_lines)
    if not rows:
        return []
    return [
        Table(
            (Group(("3I0, ampere",)),),
            (Block("", (AMPERE, ANGLE), rows),),
            heading="Coupled into lines that are out of service and earthed at both ends",
        )
    ]


def _facts(s: FaultSolution) -> Iterator[Fact]:
    top = float(np.abs(s.current).max())
    phase = "abc"[int(np.abs(s.current).argmax())]
    of = "" if len(s.fault.phases) == 3 else f"phase {phase}"
    yield Fact("Fault current", f"{figures(top)} A", of)
    ratio = x_over_r(s)
    if ratio != "-":
        text = ratio if isinstance(ratio, str) else figures(float(ratio or 0), 3, 3)
        yield Fact("X/R", text, "of the loop that limits the current")
    factors = s.earth_fault_factor
    if factors is None:
        return
    here = float(factors[s.index[s.fault.place]])
    if np.isfinite(here):
        yield Fact("Earth-fault factor", f"{here:.2f}", "at the faulted bus")
    elsewhere = np.where(s.joined & np.isfinite(factors), factors, -1)
    k = int(elsewhere.argmax())
    if elsewhere[k] > here * (1 + 1e-9):
        yield Fact("Highest factor", f"{elsewhere[k]:.2f}", f"at {s.buses[k]}")
