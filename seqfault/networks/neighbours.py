"""What each terminal of an element carries for a current into its own bus: entries of the survey.

A terminal's current is its row of the element's stamp times the potentials of the nodes that the
element joins, and all of these are neighbours on the union pattern. The order of terminals is that of
the answers to faults: lines (from, then to), winding sets side by side, sources, capacitances.
"""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.model.elements import Bools, Complex, Ints, Model, WindingSets
from seqfault.model.windings import incidence
from seqfault.networks.survey import Survey


class _Rows(msgspec.Struct, frozen=True, eq=False):
    """Stamp entries: ``terminal`` at node ``own`` sees node ``other`` through ``value``."""

    terminal: Ints
    own: Ints
    other: Ints
    value: Complex


def terminal_shares(model: Model, survey: Survey, sequence: int) -> Complex:
    """Current (t,) from its bus into each terminal for a unit current into that bus, nothing elsewhere.

    Zero at a terminal without a node. Over the terminals of one node they add to 1, except where no
    path to earth takes the current.
    """
    lines = model.lines
    m = len(lines.names)
    whole = survey.impedance[sequence]
    above = survey.above[sequence]
    own = above[survey.pattern.diagonal]
    i, j = lines.nodes
    standing = (lines.nodes >= 0).all(axis=0)
    single: Bools = np.asarray(standing)
    for group in lines.coupled if sequence == 0 else ():
        single[group.line] = False
    at = np.flatnonzero(single)
    here, there = i[at], j[at]
    forth, back = _between(survey, here, there, above)
    y = 1 / lines.series[sequence, at]
    out = np.zeros((2, m), complex)
    out[0, at] = y * (own[here] - back)
    out[1, at] = y * (own[there] - forth)
    for end, nodes in enumerate(lines.nodes):
        known = nodes >= 0
        out[end, known] += lines.shunt[sequence, known] * whole[nodes[known]]
    flat = [out.ravel()]
    rows = [_coupled_rows(model)] if sequence == 0 and lines.coupled else []
    start = 2 * m
    for sets in model.winding_sets:
        rows.append(_winding_rows(model, sets, sequence, start))
        start += sets.bus.size
        flat.append(np.zeros(sets.bus.size, complex))
    for shunts, potential in ((model.sources, own), (model.capacitances, whole)):
        flat.append(shunts.admittance[sequence] * potential[shunts.node])
    shares = np.concatenate(flat)
    for each in rows:
        apart = each.own != each.other
        w = own[each.own]
        w[apart] = above[survey.pattern.find(each.other[apart], each.own[apart])]
        shares += _summed(each.terminal, each.value * w, len(shares))
    return shares


def _summed(at: Ints, value: Complex, size: int) -> Complex:
    real = np.bincount(at, weights=value.real, minlength=size)
    return np.asarray(real + 1j * np.bincount(at, weights=value.imag, minlength=size))


def _between(survey: Survey, here: Ints, there: Ints, above: Complex) -> tuple[Complex, Complex]:
    """Potentials of ``here`` for a current into ``there``, and the other way."""
    find = survey.pattern.find
    return above[find(here, there)], above[find(there, here)]


def _coupled_rows(model: Model) -> _Rows:
    """Terminals of coupled lines see both ends of every line of their group."""
    lines = model.lines
    m = len(lines.names)
    terminal, own, other, value = [], [], [], []
    for group in lines.coupled:
        ends = lines.nodes[:, group.line]
        for end, sign in ((0, 1.0), (1, -1.0)):
            for far, against in ((0, 1.0), (1, -1.0)):
                a, b = np.nonzero((ends[end] >= 0)[:, None] & (ends[far] >= 0)[None, :])
                terminal.append(end * m + group.line[a])
                own.append(ends[end, a])
                other.append(ends[far, b])
                value.append(sign * against * group.admittance[a, b])
    return _Rows(*map(np.concatenate, (terminal, own, other, value)))


def _winding_rows(model: Model, sets: WindingSets, sequence: int, start: int) -> _Rows:
    """Terminals of a winding set see the nodes of all its windings, and star points."""
    inc = incidence(sets, sequence, model.stars.node)
    m = len(sets.names)
    y = inc.weight[:, :, 0, None, None] * inc.admittance[:, :, :, None] * inc.weight[:, None, :, :]
    other = np.broadcast_to(inc.node[:, None, :, :], y.shape)
    own = np.broadcast_to(inc.node[:, :, 0, None, None], y.shape)
    unit, winding, second, side = np.nonzero((y != 0) & (own >= 0) & (other >= 0))
    place = (unit, winding, second, side)
    return _Rows(start + winding * m + unit, own[place], other[place], y[place])
