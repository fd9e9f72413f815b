"""Steps of an evolving fault side by side, as a page, a tree and rows."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

import numpy as np

from seqfault.faults.kinds import Fault
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.report.data import Quantity, fault_rows, fault_tree, header
from seqfault.report.facts import after, circumstances, impedance_words
from seqfault.report.fault import described
from seqfault.report.flows import SMALL
from seqfault.report.numbers import quiet
from seqfault.report.tables import (
    AMPERE,
    PERCENT,
    Block,
    Cell,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
    greatest,
    once,
)
from seqfault.studies.steps import Evolution

ACROSS = 4
"""Steps side by side in one table."""


def steps_page(network: Network, evolution: Evolution) -> Page:
    """The page of ``evolution``."""
    first = evolution.solutions[0]
    title = Title(network.model.title, "step by step", circumstances(first))
    told = []
    for number, (name, s) in enumerate(zip(evolution.titles, evolution.solutions, strict=True), 1):
        stands = "; ".join(_stands(f.fault) for f in s.faults)
        told.append(f"{number}  {name + ': ' if name else ''}{stands}")
    parts: list[Part] = [title, Sentences("What stands at each step", tuple(told))]
    for start in range(0, len(evolution.solutions), ACROSS):
        rows = evolution.solutions[start : start + ACROSS]
        groups = tuple(Group((f"step {start + k + 1}",)) for k in range(len(rows)))
        blocks = [_into(rows), _home(rows), _left(rows), _residuals(rows), _through(rows)]
        parts.append(Table(groups, tuple(block for block in blocks if block.rows)))
    return Page(
        (*parts, *after(evolution.solutions, [f"step {k + 1}" for k in range(len(evolution.solutions))]))
    )


def _stands(fault: Fault) -> str:
    how = impedance_words(fault)
    return f"{fault.place} {described(fault)}" + (f", {how}" if how and how != "bolted" else "")


def _row(label: str, values: list[float | None]) -> Row:
    cells: list[tuple[Cell, ...]] = [("-" if v is None else v,) for v in values]
    return Row(label, tuple(cells), greatest(values))


def _into(solutions: tuple[FaultSolution, ...]) -> Block:
    places = once(f.fault.place for s in solutions for f in s.faults if f.fault.earth or f.through is None)
    rows = []
    for place in places:
        at = [[f for f in s.faults if f.fault.place == place] for s in solutions]
        for k, phase in enumerate("abc"):
            values = [
                abs(quiet(sum(complex(f.current[k]) for f in fs), s.largest)) if fs else None
                for fs, s in zip(at, solutions, strict=True)
            ]
            if any(values):
                rows.append(_row(f"{place}  phase {phase}", values))
        earth = [
            abs(quiet(sum(f.residual for f in fs), s.largest)) if fs else None
            for fs, s in zip(at, solutions, strict=True)
        ]
        rows.append(_row(f"{place}  to earth", earth))
    return Block("Into the faults: ampere", (AMPERE,), tuple(rows))


def _home(solutions: tuple[FaultSolution, ...]) -> Block:
    names = once(path.path for s in solutions for path in s.home)
    rows = []
    for name in names:
        values = [
            abs(quiet(sum(p.current for p in s.home if p.path == name), s.largest)) if s.home else None
            for s in solutions
        ]
        rows.append(_row(name, values))
    return Block("How earth current gets home: ampere", (AMPERE,), tuple(rows))


def _left(solutions: tuple[FaultSolution, ...]) -> Block:
    buses = once(f.bus for s in solutions for f in s.faults)
    rows = []
    for bus in buses:
        for k, phase in enumerate("abc"):
            values: list[float | None] = []
            for s in solutions:
                at = s.index.get(bus)
                known = at is not None and not s.undefined[at] and abs(s.before[at]) > 0
                values.append(100 * float(abs(s.voltage[k, at]) / abs(s.before[at])) if known else None)
            rows.append(_row(f"{bus}  phase {phase}", [None if v is None else _clean(v) for v in values]))
    return Block("Left at the places: per cent of the phase voltage before", (PERCENT,), tuple(rows))


def _clean(percent: float) -> float:
    return 0.0 if percent < 1e-7 else percent


def _terminals(
    solutions: tuple[FaultSolution, ...], size: Callable[[FaultSolution], Any], heading: str
) -> Block:
    """What terminals of the case carry, those that carry next to nothing in every step left out."""
    seen: dict[tuple[str, str], list[float | None]] = {}
    largest = max((s.largest for s in solutions), default=0.0)
    for step, s in enumerate(solutions):
        values = size(s)
        for k, (element, bus, side) in enumerate(
            zip(s.terminals.element, s.terminals.bus, s.terminals.side, strict=True)
        ):
            if side.startswith("from "):
                continue
            row = seen.setdefault((element, bus), [None] * len(solutions))
            row[step] = float(values[k]) if values[k] > 1e-9 * max(s.largest, 1e-300) else 0.0
    rows = [
        _row(f"{element} at {bus}", values)
        for (element, bus), values in seen.items()
        if max(v or 0.0 for v in values) > SMALL * largest
    ]
    return Block(heading, (AMPERE,), tuple(rows))


def _residuals(solutions: tuple[FaultSolution, ...]) -> Block:
    heading = "Residual current 3I0 at terminals: ampere"
    return _terminals(solutions, lambda s: np.abs(s.terminals.residual), heading)


def _through(solutions: tuple[FaultSolution, ...]) -> Block:
    heading = "Largest phase current at terminals: ampere"
    return _terminals(solutions, lambda s: np.abs(s.terminals.phases).max(axis=0), heading)


def steps_tree(network: Network, evolution: Evolution) -> dict[str, Any]:
    """``evolution`` as plain values: each step as one fault."""
    shared = header(network)
    steps = []
    for name, s in zip(evolution.titles, evolution.solutions, strict=True):
        own = {key: value for key, value in fault_tree(network, s).items() if key not in shared}
        steps.append({"title": name, **own})
    return {**shared, "steps": steps}


def steps_rows(evolution: Evolution) -> Iterator[Quantity]:
    """``evolution`` in long form; the place begins with the number of the step."""
    from msgspec.structs import replace

    for number, s in enumerate(evolution.solutions, 1):
        for row in fault_rows(s):
            yield replace(row, place=f"step {number}: {row.place}")
