"""What each terminal of an element carries for a current into its own bus: entries of the survey.

A terminal's current is its row of the element's stamp times the potentials of the nodes that the
element joins, and all of these are neighbours on the union pattern. The order of terminals is that of
the answers to faults: lines (from, then to), winding sets side by side, sources, capacitances.
"""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.model.elements import Complex, Ints, Model, WindingSets
from seqfault.model.windings import incidence
from seqfault.networks.survey import Survey


class _Rows(msgspec.Struct, frozen=True, eq=False):
    """Stamp entries: ``terminal`` at node ``own`` sees node ``other`` through ``value``."""

    terminal: Ints
    own: Ints
    other: Ints
    value: Complex


def terminal_shares(model: Model, survey: Survey) -> Complex:
    """Current (3, t) from its bus into each terminal for a unit current into that bus, nothing elsewhere.

    Zero at a terminal without a node. Over the terminals of one node they add to 1, except where no
    path to earth takes the current.
    """
    lines = model.lines
    standing = np.flatnonzero((lines.nodes >= 0).all(axis=0))
    find = survey.pattern.find
    (i, j), diagonal = lines.nodes[:, standing], survey.pattern.diagonal
    forth, back = find(i, j), find(j, i)
    m = len(lines.names)
    terminals = 2 * m + sum(s.bus.size for s in model.winding_sets)
    terminals += len(model.sources.names) + len(model.capacitances.names)
    out = np.zeros((3, terminals), complex)
    for s, (share, above, whole) in enumerate(zip(out, survey.above, survey.impedance, strict=True)):
        own = above[diagonal]
        y = 1 / lines.series[s, standing]
        if s == 0 and lines.coupled:
            alone = np.ones(m, bool)
            alone[np.concatenate([group.line for group in lines.coupled])] = False
            y[~alone[standing]] = 0
        share[standing] = y * (own[i] - above[back])
        share[m + standing] = y * (own[j] - above[forth])
        for end, nodes in enumerate(lines.nodes):
            known = np.flatnonzero(nodes >= 0)
            share[end * m + known] += lines.shunt[s, known] * whole[nodes[known]]
        rows = [_coupled_rows(model)] if s == 0 and lines.coupled else []
        start = 2 * m
        for sets in model.winding_sets:
            rows.append(_winding_rows(model, sets, s, start))
            start += sets.bus.size
        for shunts, potential in ((model.sources, own), (model.capacitances, whole)):
            end = start + len(shunts.names)
            share[start:end] = shunts.admittance[s] * potential[shunts.node]
            start = end
        for each in rows:
            apart = np.flatnonzero(each.own != each.other)
            w = own[each.own]
            w[apart] = above[find(each.other[apart], each.own[apart])]
            np.add.at(share, each.terminal, each.value * w)
    return out


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
