"""Flows of the three sequences as answers show them: terminals, star points, deltas, earthed lines."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqfault.equations.symmetrical import turn_sequence
from seqfault.faults.flows import SequenceFlows, TerminalMap, star_current_base
from seqfault.faults.solution import DeltaCurrent, EarthedLine, StarPointState, Terminals
from seqfault.model.elements import DELTA, Bools, Complex, Floats, Ints, Model


def shown_terminals(
    model: Model,
    terminals: TerminalMap,
    flows: Sequence[Complex],
    clock: Ints,
    base_i: Floats,
) -> Terminals:
    """Each element's terminals side by side; a machine's capacitance flows through its terminal."""
    at, bus = terminals.shown, terminals.bus[terminals.shown]
    shown = at.tolist()
    placed = (terminals.row >= 0) & terminals.closed  # an open end passes nothing, to the last bit
    sequence = np.zeros((3, len(at)), complex)
    for s, flow in enumerate(flows):
        np.add.at(sequence[s], terminals.row[placed], flow[placed])
    return Terminals(
        element=tuple(map(terminals.element.__getitem__, shown)),
        kind=tuple(map(terminals.kind.__getitem__, shown)),
        side=tuple(map(terminals.side.__getitem__, shown)),
        bus=tuple(map(model.buses.__getitem__, bus.tolist())),
        bus_index=bus,
        count=terminals.count[at],
        sequence=turn_sequence(sequence, clock[bus]) * base_i[bus],
    )


def star_point_states(model: Model, flows: SequenceFlows, undefined: Bools) -> tuple[StarPointState, ...]:
    """Current and voltage of every star point."""
    stars = model.stars
    current = flows.star * star_current_base(model)
    voltage = flows.star_voltage * stars.base / np.sqrt(3)
    return tuple(
        StarPointState(
            name,
            stars.kinds[k],
            complex(current[k]),
            None if undefined[k] else complex(voltage[k]),
            model.buses[stars.bus[k]],
        )
        for k, name in enumerate(stars.names)
    )


def earthed_lines(model: Model, flows: SequenceFlows) -> tuple[EarthedLine, ...]:
    """Zero-sequence current coupled into lines that are out of service and earthed at both ends."""
    lines = model.lines
    ampere = np.sqrt(3) * model.base_power / lines.voltage
    return tuple(
        EarthedLine(lines.names[k], complex(flows.terminal[k] * ampere[k]))
        for k in np.flatnonzero(lines.earthed).tolist()
    )


def delta_currents(model: Model, flows: SequenceFlows) -> tuple[DeltaCurrent, ...]:
    """The current round every delta."""
    out = []
    for sets, winding in zip(model.winding_sets, flows.delta, strict=True):
        at = np.nonzero(sets.kind == DELTA)
        ampere = winding[at] * sets.sense[at] * model.base_power / (3 * sets.rated[at])
        columns = (array.tolist() for array in (*at, sets.bus[at], ampere))
        for unit, w, bus, current in zip(*columns, strict=True):
            out.append(DeltaCurrent(sets.names[unit], sets.sides[w], model.buses[bus], current))
    return tuple(out)
