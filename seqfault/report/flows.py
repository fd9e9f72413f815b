"""Currents of elements: who feeds the fault, what flows elsewhere, and components."""

from __future__ import annotations

import numpy as np

from seqfault.equations.symmetrical import to_sequence
from seqfault.faults.solution import FaultSolution, FaultState
from seqfault.model.elements import Complex
from seqfault.report.numbers import angle, counted, quiet
from seqfault.report.tables import AMPERE, ANGLE, KILOVOLT, Block, Cell, Group, Row, Table

NOTHING: tuple[tuple[Cell, ...], ...] = ((),) * 4
SMALL = 0.01
"""Share of the fault current below which a flow is left out unless asked for."""


def _cells(values: Complex, top: float) -> tuple[tuple[Cell, ...], ...]:
    return tuple((abs(v), angle(v)) for v in (quiet(complex(x), top) for x in values))


def _with_residual(phases: Complex) -> Complex:
    return np.append(phases, phases.sum())


def _top(s: FaultSolution) -> float:
    return max(s.largest, float(np.abs(s.terminals.phases).max(initial=0.0)))


def feeding(s: FaultSolution, state: FaultState) -> Block:
    """Currents towards one of the faults of all that is connected to its bus, greatest first."""
    t, top = s.terminals, _top(s)
    phases = -t.phases
    here = [k for k, bus in enumerate(t.bus) if bus == state.bus]
    here.sort(key=lambda k: -float(np.abs(phases[:, k]).max()))
    twice = {t.element[k] for k in here if sum(t.element[j] == t.element[k] for j in here) > 1}
    rows: list[Row] = []
    for k in here:
        told = t.element[k] in twice or t.side[k].startswith("from ")
        name = f"{t.element[k]} {t.side[k]}" if told else t.element[k]
        rows += _with_one(name, phases[:, k], int(t.count[k]), top)
    rest = sum(f.current for f in s.faults if f.bus == state.bus) - phases[:, here].sum(axis=1)
    if state.through is not None:
        rest = 0 * rest  # what comes through the poles of a break
    if float(np.abs(rest).max()) > 1e-6 * top:
        rows.append(Row("capacitances here", _cells(_with_residual(rest), top)))
    what = "it" if len(s.faults) == 1 else state.fault.place
    return Block(f"Who feeds {what}: ampere towards the fault, degrees", (AMPERE, ANGLE), tuple(rows))


def carried(s: FaultSolution, every: bool) -> tuple[Block, int]:
    """Currents from the bus into each element, and how many small ones are left out."""
    t, top = s.terminals, _top(s)
    phases = t.phases
    limit = SMALL * s.largest
    faulted = {state.bus for state in s.faults if state.through is None}
    earlier = s.terminals_before
    at: dict[str, list[Row]] = {}
    left_out = 0
    for k, element in enumerate(t.element):
        if t.bus[k] in faulted and not every:
            continue
        stirred = phases[:, k] if earlier is None else phases[:, k] - earlier.phases[:, k]
        if not every and float(np.abs(stirred).max()) <= limit:
            left_out += 1
            continue
        own = at.setdefault(t.bus[k], [])
        name = f"{element} {t.side[k]}" if t.side[k].startswith("from ") else element
        own.extend(_with_one(f"  {name}", phases[:, k], int(t.count[k]), top))
        if earlier is not None:
            stood = earlier.phases[:, k]
            own.append(Row("  - before", _cells(_with_residual(stood), top)))
            own.append(Row("  - by the fault", _cells(_with_residual(phases[:, k] - stood), top)))
    rows: list[Row] = []
    for bus in (name for name in s.buses if name in at):
        rows += [Row(f"at {bus}", NOTHING), *at[bus]]
    where = "In every element" if every else "Elsewhere"
    heading = f"{where}: ampere from the bus into the element, degrees"
    return Block(heading, (AMPERE, ANGLE), tuple(rows)), left_out


def leftover(count: int) -> tuple[str, ...]:
    """The sentence that says what is not shown."""
    if not count:
        return ()
    what = counted(count, "terminal")
    return (f"{what} below 1 % of the fault current left out; --flows shows all.",)


def _with_one(label: str, phases: Complex, count: int, top: float) -> list[Row]:
    rows = [Row(label, _cells(_with_residual(phases), top))]
    indent = label[: len(label) - len(label.lstrip(" "))]
    if count > 1:
        rows.append(Row(f"{indent}- one of {count}", _cells(_with_residual(phases / count), top)))
    return rows


def components(s: FaultSolution) -> Table:
    """Components 0, 1, 2 of the fault, of every bus and of every terminal."""
    t, top = s.terminals, _top(s)
    current = tuple(
        Row("fault" if len(s.faults) == 1 else f.fault.place, _cells(f.current_sequence, top))
        for f in s.faults
        if f.through is None or f.fault.fallen
    )
    volts = []
    for k, bus in enumerate(s.buses):
        values = s.voltage_sequence[:, k] / 1000
        cells = _cells(values, max(abs(complex(s.before[k])) / 1000, float(np.abs(values).max())))
        volts.append(Row(bus, (("undefined", ""), *cells[1:]) if s.undefined[k] else cells))
    flows = []
    for k, element in enumerate(t.element):
        inner = f" {t.side[k]}" if t.side[k].startswith("from ") else ""
        flows.append(Row(f"{element}{inner} at {t.bus[k]}", _cells(t.sequence[:, k], top)))
    through = tuple(
        Row(f"through {f.fault.place}", _cells(to_sequence(f.through), top))
        for f in s.faults
        if f.through is not None
    )
    return Table(
        tuple(Group((f"{name} sequence",)) for name in ("zero", "positive", "negative")),
        (
            Block(
                "Components into the fault, or through a break: ampere, degrees",
                (AMPERE, ANGLE),
                (*current, *through),
            ),
            Block("Components of the voltages: kilovolt, degrees", (KILOVOLT, ANGLE), tuple(volts)),
            Block("Components into each element: ampere, degrees", (AMPERE, ANGLE), tuple(flows)),
        ),
    )
