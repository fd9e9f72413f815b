"""One fault in full, as a page."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from seqfault.faults.kinds import Fault
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Complex
from seqfault.report.facts import after, circumstances, conditions, impedance_words, impedances, x_over_r
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
    parts: list[Part] = [fault_title(network, s), Table(PHASES, tuple(_into(s)))]
    if s.home:
        parts.append(home_table(s))
    parts.append(Table(PHASES, _voltages(s)))
    flows, left_out = carried(s, every_flow)
    fed = [feeding(s, state) for state in s.faults if state.fault.earth or state.through is None]
    blocks = [block for block in (*fed, flows) if block.rows]
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


def fault_title(network: Network, s: FaultSolution) -> Title:
    """The place and its kind of fault, or all that stand at once."""
    if len(s.faults) == 1:
        name = f"{s.fault.place}  {kilovolt(s.nominal)}"
        return Title(network.model.title, name, f"{described(s.fault)}, {conditions([s])}")
    names = " and ".join(f"{f.fault.place}  {kilovolt(f.nominal)}" for f in s.faults)
    each = [(f.fault.place, (described(f.fault), impedance_words(f.fault))) for f in s.faults]
    told = "; ".join(f"{place}: {', '.join(filter(None, words))}" for place, words in each)
    return Title(network.model.title, names, f"at once: {told}; {circumstances(s)}")


def described(fault: Fault) -> str:
    """``line-ground (k1), phase a``: the kind and its phases, and where a conductor lies."""
    symbol = f" ({fault.kind.symbol})" if fault.kind.symbol else ""
    phases = f"phase{'s' if len(fault.phases) > 1 else ''} {' '.join(fault.phases)}"
    lying = f", fallen to earth on the side of {fault.fallen}" if fault.fallen else ""
    if fault.fallen in ("source", "load"):
        lying = f", fallen to earth on the {fault.fallen} side"
    return f"{fault.kind.name}{symbol}, {phases}{lying}"


def phasors(values: Sequence[complex] | Complex, top: float) -> tuple[tuple[Cell, ...], ...]:
    """Size and angle of each of ``values``, rounding beside ``top`` as 0."""
    return tuple((abs(v), angle(v)) for v in (quiet(complex(x), top) for x in values))


def _into(s: FaultSolution) -> Iterator[Block]:
    top = s.largest
    shorted = [f for f in s.faults if f.through is None or f.fault.fallen]
    rows = tuple(
        Row(
            "fault current" if len(shorted) == 1 else f.fault.place,
            phasors(np.append(f.current, f.residual), top),
        )
        for f in shorted
    )
    if len(shorted) > 1:
        whole = sum(f.residual for f in shorted)
        rows += (Row("together to earth", ((), (), (), phasors([whole], top)[0])),)
    if rows:
        where = "the fault" if len(shorted) == 1 else "each fault"
        yield Block(f"Into {where}: ampere, degrees", (AMPERE, ANGLE), rows)
    for f in s.faults:
        if f.through is None or f.across is None or f.through_before is None:
            continue
        at = f" {f.fault.place}" if len(s.faults) > 1 else ""
        passing = [Row("through the poles", phasors(np.append(f.through, f.through.sum()), top))]
        if s.loaded:
            stood = np.append(f.through_before, f.through_before.sum())
            passing.append(Row("before the fault", phasors(stood, top)))
        yield Block(f"Through the break{at}: ampere, degrees", (AMPERE, ANGLE), tuple(passing))
        across = (*f.across.tolist(), complex(f.across.sum()))
        gap = Row("between its sides", phasors([v / 1000 for v in across], f.nominal / 1000))
        yield Block(f"Across the break{at}: kilovolt, degrees", (KILOVOLT, ANGLE), (gap,))


def home_table(s: FaultSolution) -> Table:
    """How the earth current of the faults gets home: each path, and its share of 3I0."""
    earthed = [f.residual for f in s.faults if f.fault.earth]
    sent = sum(earthed, 0j)
    total = abs(sent)
    if total < 1e-9 * max(map(abs, earthed)):  # out at one fault, back at the other
        sent, total = 0j, 0.0
    top = max([s.largest, *(abs(path.current) for path in s.home)])
    total = abs(quiet(total, top))
    worth = total > 0.05 * max(map(abs, earthed))  # else what comes home is all but nothing
    rows = []
    for path in s.home:
        current = quiet(path.current, top)
        share = fixed(abs(current) / total, 3) if worth and current else "-"
        rows.append(Row(path.path, ((abs(current), angle(current)), (share,))))
    whole = "1.000" if worth else "-"
    rows.append(Row("together (3I0)", (*phasors([sent], top), (whole,))))
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
        *(_before(s) if s.loaded else ()),
        Block("The same in kilovolt, degrees", (KILOVOLT, ANGLE), tuple(kilovolts)),
    )


def _before(s: FaultSolution) -> tuple[Block]:
    """Phase a of every bus before the fault, in the loaded state."""
    rows = []
    for bus, volt, nominal in zip(s.buses, s.before.tolist(), s.bus_nominal.tolist(), strict=True):
        share = f"{abs(volt) / nominal * np.sqrt(3):.3f} pu"
        rows.append(Row(bus, (*phasors([volt / 1000], nominal), (share,), (), ())))
    heading = "Before the fault: phase a to earth in kilovolt, degrees, and of nominal"
    return (Block(heading, (KILOVOLT, ANGLE), tuple(rows)),)


def _star_points(network: Network, s: FaultSolution) -> list[Part]:
    if not s.star_points:
        return []
    top = max([s.largest, *(abs(p.current) for p in s.star_points)])
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
    top = max([s.largest, *(abs(d.current) for d in s.deltas)])
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
    for f in s.faults:
        if f.through is not None and not f.fault.fallen:
            continue
        top = float(np.abs(f.current).max())
        phase = "abc"[int(np.abs(f.current).argmax())]
        of = [] if len(f.fault.phases) == 3 else [f"phase {phase}"]
        of += [f"at {f.fault.place}"] if len(s.faults) > 1 else []
        yield Fact("Fault current", f"{figures(top)} A", ", ".join(of))
    ratio = x_over_r(s)
    if ratio != "-":
        text = ratio if isinstance(ratio, str) else figures(float(ratio or 0), 3, 3)
        yield Fact("X/R", text, "of the loop that limits the current")
    factors = s.earth_fault_factor
    if factors is None:
        return
    here = float(factors[s.index[s.faults[0].bus]])
    if np.isfinite(here):
        where = "the faulted bus" if s.faults[0].bus == s.fault.place else s.faults[0].bus
        yield Fact("Earth-fault factor", f"{here:.2f}", f"at {where}")
    elsewhere = np.where(s.joined & np.isfinite(factors), factors, -1)
    k = int(elsewhere.argmax())
    if elsewhere[k] > here * (1 + 1e-9):
        yield Fact("Highest factor", f"{elsewhere[k]:.2f}", f"at {s.buses[k]}")
