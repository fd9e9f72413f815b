"""Currents of closed bus couplers: by balance, where that is unique."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqfault.equations.symmetrical import to_sequence
from seqfault.errors import quoted
from seqfault.faults.solution import Terminals
from seqfault.model.elements import Complex, Model


def with_ties(model: Model, leaving: Sequence[tuple[int, Complex]], terminals: Terminals) -> Terminals:
    """``terminals`` and those of the closed ties; ``leaving`` gives buses and what leaves there, (3,) A.

    A tie has no impedance; what it carries is what the buses on its far side of the cut draw.
    """
    if not model.ties.names:
        return terminals
    drawn = np.zeros((3, len(model.buses)), complex)
    np.add.at(drawn.T, terminals.bus_index, terminals.sequence.T)
    for place, phases in leaving:
        drawn[:, place] += to_sequence(phases)
    element, side, bus, current = [], [], [], []
    for k, name in enumerate(model.ties.names):
        near = model.ties.side[k]
        if near is None:
            continue
        into = -drawn[:, near].sum(axis=1)
        for end, (label, flow) in enumerate((("from", into), ("to", -into))):
            element.append(name)
            side.append(label)
            bus.append(int(model.ties.ends[end, k]))
            current.append(flow)
    if not element:
        return terminals
    return terminals.extended(
        tuple(element), "tie", tuple(side), np.array(bus, np.int64), model.buses, np.array(current).T
    )


def tie_notes(model: Model) -> tuple[str, ...]:
    """A sentence on ties whose current nothing fixes."""
    loose = [quoted(n) for n, s in zip(model.ties.names, model.ties.side, strict=True) if s is None]
    if not loose:
        return ()
    return (
        f"the currents of the closed ties {', '.join(loose)} are not unique: they close a loop without"
        " impedance",
    )
