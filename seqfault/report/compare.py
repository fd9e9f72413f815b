"""Kinds of fault side by side, as a page, a tree and rows."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.report.facts import after, conditions, impedances, x_over_r
from seqfault.report.numbers import figures, kilovolt, quiet
from seqfault.report.tables import (
    AMPERE,
    MARKED,
    PERCENT,
    SHARE,
    WORDS,
    Block,
    Cell,
    Column,
    Fact,
    Facts,
    Group,
    Page,
    Row,
    Sentences,
    Table,
    Title,
    greatest,
)
from seqfault.studies.compare import Comparison, Extreme

FEW = 0.0005
"""Paths home below this share of 3I0 in every kind are told together."""


def compare_page(network: Network, comparison: Comparison) -> Page:
    """The page of ``comparison``, a comparison made on ``network``."""
    solutions = comparison.solutions
    first = solutions[0]
    groups = tuple(Group(_heading(s.fault.kind.name)) for s in solutions)
    blocks = [_symbols(solutions), _into(comparison)]
    if any(s.home for s in solutions):
        blocks.append(_home(solutions))
    blocks += [_left(comparison), *_seen(comparison), _ratio(solutions)]
    title = Title(
        network.model.title, f"{comparison.place}  {kilovolt(first.nominal)}", conditions(solutions)
    )
    return Page(
        (
            title,
            Table(groups, tuple(blocks)),
            impedances(first),
            Facts(tuple(_facts(comparison))),
            Sentences("", (MARKED,), quiet=True),
            *after(solutions),
        )
    )


def _heading(kind: str) -> tuple[str, ...]:
    if len(kind) <= 12:
        return ("", kind)
    cut = kind.rindex("-") + 1
    return (kind[:cut], kind[cut:])


def _symbols(solutions: tuple[FaultSolution, ...]) -> Block:
    return Block(
        "",
        (WORDS,),
        (
            Row("standard symbol", tuple((s.fault.kind.symbol,) for s in solutions)),
            Row("faulted phases", tuple((" ".join(s.fault.phases),) for s in solutions)),
        ),
    )


def _row(label: str, values: list[float], references: list[float | None]) -> Row:
    cells: list[tuple[Cell, ...]] = []
    for value, reference in zip(values, references, strict=True):
        share: Cell = value / reference if value and reference else "-"
        cells.append((value, share))
    return Row(label, tuple(cells), greatest(values))


def _into(comparison: Comparison) -> Block:
    solutions = comparison.solutions
    reference = comparison.reference
    tops = [float(np.abs(s.current).max()) for s in solutions]
    rows = []
    for k, phase in enumerate("abc"):
        values = [abs(quiet(s.current[k], top)) for s, top in zip(solutions, tops, strict=True)]
        rows.append(_row(f"phase {phase}", values, [reference] * len(values)))
    earth = [abs(quiet(s.residual, top)) for s, top in zip(solutions, tops, strict=True)]
    rows.append(_row("to earth (3I0)", earth, [reference] * len(earth)))
    share = ", and as a share of the three-phase current" if reference else ""
    return Block(f"Into the fault: ampere{share}", (AMPERE, SHARE), tuple(rows))


def _home(solutions: tuple[FaultSolution, ...]) -> Block:
    names = list(dict.fromkeys(path.path for s in solutions for path in s.home))
    carried = [{path.path: path.current for path in s.home} for s in solutions]
    earth = [abs(s.residual) if s.home else 0.0 for s in solutions]
    tops = [max([top, *map(abs, own.values())]) for top, own in zip(earth, carried, strict=True)]

    def row(label: str, paths: list[str]) -> Row:
        sums = [sum(own.get(path, 0j) for path in paths) for own in carried]
        values = [abs(quiet(i, top)) for i, top in zip(sums, tops, strict=True)]
        return _row(label, values, [e or None for e in earth])

    few = [
        name
        for name in names
        if all(abs(own.get(name, 0)) <= FEW * top for own, top in zip(carried, tops, strict=True))
    ]
    rows = [row(name, [name]) for name in names if name not in few]
    if len(few) == 1:
        rows.append(row(few[0], few))
    elif few:
        rows.append(row(f"{len(few)} more below {FEW:g}", few))
    heading = "How that earth current gets home: ampere, shares of the 3I0 above (phasors)"
    return Block(heading, (AMPERE, SHARE), tuple(rows))


def _left(comparison: Comparison) -> Block:
    solutions = comparison.solutions
    k = solutions[0].index[solutions[0].faults[0].bus]
    before = [abs(complex(s.before[k])) for s in solutions]

    def cells(label: str, volts: list[float]) -> Row:
        values: list[float | None] = []
        made: list[tuple[Cell, ...]] = []
        for s, volt, reference in zip(solutions, volts, before, strict=True):
            if s.undefined[k] or not reference:
                values.append(None)
                made.append(("undefined" if reference else "dead",))
                continue
            percent = 100 * volt / reference
            values.append(0.0 if percent < 1e-7 else percent)
            made.append((values[-1],))
        return Row(label, tuple(made), greatest(values))

    rows = [
        cells(f"phase {phase} to earth", [abs(complex(s.voltage[p, k])) for s in solutions])
        for p, phase in enumerate("abc")
    ]
    rows.append(
        cells("displacement (3V0)", [3 * abs(complex(s.voltage_sequence[0, k])) for s in solutions])
    )
    return Block("Left on the bus: per cent of the phase voltage before the fault", (PERCENT,), tuple(rows))


def _seen(comparison: Comparison) -> Iterator[Block]:
    """What the terminal asked for carries in each kind: phases, residual, components."""
    if not comparison.seen:
        return
    tops = [
        max(s.largest, float(np.abs(s.terminals.phases).max(initial=0.0))) for s in comparison.solutions
    ]

    def row(label: str, values: list[complex]) -> Row:
        sizes = [abs(quiet(v, top)) for v, top in zip(values, tops, strict=True)]
        return Row(label, tuple((size,) for size in sizes), greatest(sizes))

    rows = [row(f"phase {p}", [complex(x.phases[k]) for x in comparison.seen]) for k, p in enumerate("abc")]
    rows.append(row("residual (3I0)", [complex(3 * x.sequence[0]) for x in comparison.seen]))
    rows.append(row("positive sequence", [complex(x.sequence[1]) for x in comparison.seen]))
    rows.append(row("negative sequence", [complex(x.sequence[2]) for x in comparison.seen]))
    yield Block(f"Seen at {comparison.at}: ampere from the bus into the element", (AMPERE,), tuple(rows))


def _ratio(solutions: tuple[FaultSolution, ...]) -> Block:
    row = Row("X/R", tuple((x_over_r(s),) for s in solutions))
    return Block("What limits the current: X/R of its loop", (Column("", 3, 3),), (row,))


def _facts(comparison: Comparison) -> Iterator[Fact]:
    top, least, clear = comparison.greatest, comparison.least, comparison.least_clear_of_earth
    if top.value == 0:
        yield Fact("Greatest current", "0 A", "nothing feeds this bus in this state")
        return
    yield Fact("Greatest current", f"{figures(top.value)} A", _of(top))
    text = _of(least)
    if clear is not None and clear.kind != least.kind:
        text += f"; without earth: {figures(clear.value)} A, {_of(clear)}"
    yield Fact("Least current", f"{figures(_quieted(least.value, top.value))} A", text)
    factor = comparison.earth_fault_factor
    if factor is not None:
        of = f"{factor.kind}, phase {factor.phase}"
        yield Fact("Earth-fault factor", f"{factor.value:.2f}", of)


def _quieted(value: float, top: float) -> float:
    return abs(quiet(value, top))


def _of(extreme: Extreme) -> str:
    if extreme.kind in ("line-line-ground",):
        return f"{extreme.kind}, phase {extreme.phase}"
    return extreme.kind
