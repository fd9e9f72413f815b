"""Parts of a sequence network that no strong element ties to earth.

The free space of a network is what all its strong elements leave free: potentials that draw no current
in any of them. It is a structural fact, taken from the elements and never from pivots of the matrix.
Each part has one free vector (equal per-unit potential) or several (loops of star-star windings).
"""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.model.elements import DELTA, STAR, Complex, Floats, Ints, Model, WindingSets
from seqfault.model.windings import incidence
from seqfault.model.zones import components
from seqfault.networks.null_space import Conditions, null_space, scaled

NONE: Ints = np.zeros(0, np.int64)

LEAST = 1e-4
"""Weight of a node without a weak branch where references are chosen; the heaviest has 1."""


class FreeSpace(msgspec.Struct, frozen=True, eq=False):
    """Free vectors by part: a part is what strong elements join, so that parts do not see each other.

    ``part`` (n,) number of the part a node belongs to, −1 where a part leaves nothing free;
    ``basis`` (n, k) its free vectors, zero at nodes that are tied to earth; ``dimension`` (parts,) how
    many each part has; ``reference`` nodes held at zero, one a free vector.
    """

    part: Ints
    basis: Floats
    dimension: Ints
    reference: Ints


def free_space(model: Model, sequence: int, weak: Complex) -> FreeSpace:
    """The free space of sequence 0, 1 or 2 of ``model``.

    References go where ``weak`` (n,), what joins each node to earth, is large: a node held at zero
    takes its weak branch out of the grounded network, where it would drown the others.
    """
    n = model.nodes if sequence == 0 else model.common
    standing = (model.lines.nodes >= 0).all(axis=0)
    group = components(n, *model.lines.nodes[:, standing])
    size = int(group.max()) + 1 if n else 0
    tied = np.zeros(size, bool)
    grounded = model.sources.admittance[sequence] != 0
    tied[group[model.sources.node[grounded]]] = True
    vectors, alone = null_space(_conditions(model, sequence, group), tied)
    return _spread(vectors, alone, group, joined_parts(model, sequence, group, size), np.abs(weak))


def connected(model: Model, near: Ints = NONE, far: Ints = NONE) -> Ints:
    """Labels (n,) of what lines and transformers join, and each node of ``near`` with one of ``far``."""
    through = (model.lines.nodes >= 0).all(axis=0)
    first, second = [model.lines.nodes[0, through], near], [model.lines.nodes[1, through], far]
    for sets in model.winding_sets:
        first += [sets.node[:, 0]] * (sets.node.shape[1] - 1)
        second += list(sets.node[:, 1:].T)
    return components(model.common, np.concatenate(first), np.concatenate(second))


def joined_parts(model: Model, sequence: int, group: Ints, size: int) -> Ints:
    """Labels (size,) of the merged nodes that strong elements join."""
    first, second = [], []
    for sets in model.winding_sets:
        inc = incidence(sets, sequence, model.stars.node)
        m, w = inc.node.shape[:2]
        carries = (inc.admittance != 0).any(axis=2)[:, :, None]
        node = np.where((inc.weight != 0) & carries, inc.node, -1).reshape(m, 2 * w)
        head = node.max(axis=1, initial=-1)[:, None]
        unit, place = np.nonzero((node >= 0) & (node != head))
        first.append(group[head[unit, 0]])
        second.append(group[node[unit, place]])
    for coupled in model.lines.coupled if sequence == 0 else ():
        ends = model.lines.nodes[:, coupled.line].ravel()
        ends = group[ends[ends >= 0]]
        first.append(ends[1:])
        second.append(ends[:-1])
    return components(size, np.concatenate(first), np.concatenate(second))


def _conditions(model: Model, sequence: int, group: Ints) -> Conditions:
    """What strong elements ask of a potential without current, nodes merged by ``group``.

    One row for each independent condition of each winding set.
    """
    rows, nodes, weights = [], [], []
    start = 0
    for sets in model.winding_sets:
        if not len(sets.names):
            continue
        inc = incidence(sets, sequence, model.stars.node)
        for unit, first, second in held_windings(sets, sequence):
            number = start + np.arange(len(unit))
            start += len(unit)
            for winding, factor in ((first, 1.0), (second, -1.0)):
                if winding is None:
                    continue
                for side in (0, 1):
                    node, weight = (
                        inc.node[unit, winding, side],
                        factor * inc.weight[unit, winding, side],
                    )
                    keep = (node >= 0) & (weight != 0)
                    rows.append(number[keep])
                    nodes.append(group[node[keep]])
                    weights.append(weight[keep])
    if not rows:
        empty = np.zeros(0, np.int64)
        return Conditions(empty, empty, np.zeros(0), 0)
    return Conditions(np.concatenate(rows), np.concatenate(nodes), np.concatenate(weights), start)


def held_windings(sets: WindingSets, sequence: int) -> list[tuple[Ints, int, int | None]]:
    """(units, winding, other winding): the winding's voltage is zero, or equals the other's.

    A leakage matrix leaves exactly equal winding voltages free. A delta holds its winding's
    zero-sequence voltage at zero, and with it that of every other winding on the core; so does a
    magnetising branch.
    """
    m, w = sets.bus.shape
    out: list[tuple[Ints, int, int | None]] = []
    if sequence:
        present = np.ones((m, w), bool)
        held = np.zeros(m, bool)
    else:
        present = sets.kind == STAR
        held = (sets.kind == DELTA).any(axis=1) | sets.magnetised
    if w == 1:
        return [(np.flatnonzero(present[:, 0] & (sets.leakage[sequence, :, 0, 0] != 0)), 0, None)]
    for winding in range(w):
        out.append((np.flatnonzero(present[:, winding] & held), winding, None))
        for other in range(winding):
            between = ~present[:, other + 1 : winding].any(axis=1)
            pair = present[:, winding] & present[:, other] & between & ~held
            out.append((np.flatnonzero(pair), winding, other))
    return [(unit, first, second) for unit, first, second in out if len(unit)]


def _spread(
    vectors: list[tuple[Ints, Floats]], alone: Ints, group: Ints, label: Ints, weak: Floats
) -> FreeSpace:
    """From merged nodes back to all nodes, vectors gathered by part, with their reference nodes."""
    size = len(label)
    filled = np.zeros(size, np.int64)  # free vectors of each part, by its label
    np.add.at(filled, label[alone], 1)
    for members, free in vectors:
        filled[label[members[0]]] += free.shape[1]
    floating = np.flatnonzero(filled)
    number = np.full(size, -1, np.int64)
    number[floating] = np.arange(len(floating))
    dimension = filled[floating]
    basis = np.zeros((size, int(dimension.max(initial=1))))
    at = np.zeros(size, np.int64)
    for members, free in vectors:
        here = label[members[0]]
        basis[members, at[here] : at[here] + free.shape[1]] = free
        at[here] += free.shape[1]
    order = alone[np.argsort(label[alone], kind="stable")]
    rank = np.arange(len(order)) - np.searchsorted(label[order], label[order])
    basis[order, at[label[order]] + rank] = 1.0
    part, full = number[label[group]], basis[group]
    for p in np.flatnonzero(dimension > 1).tolist():
        nodes = np.flatnonzero(part == p)
        full[nodes, : dimension[p]] = _apart(full[nodes, : dimension[p]], weak[nodes])
    return FreeSpace(part, full, dimension, _references(part, full, dimension, weak))


def _apart(basis: Floats, weak: Floats) -> Floats:
    """The free vectors (n, k) of a part told apart by what ties them to earth.

    Where a neutral binds one free potential and capacitances the other, a Fᵀ S F that mixes them loses
    the capacitances. Elimination with complete pivoting on √|S| F leaves each vector with exact zeros
    at the ties of those before it.
    """
    basis, root = basis.copy(), np.sqrt(weak)[:, None]
    free = list(range(basis.shape[1]))
    while len(free) > 1:
        size = root * np.abs(basis[:, free])
        node, at = np.unravel_index(int(size.argmax()), size.shape)
        if size[node, at] == 0:
            break
        pivot = free.pop(int(at))
        for other in free:
            basis[:, other] -= basis[node, other] / basis[node, pivot] * basis[:, pivot]
            basis[node, other] = 0
    return scaled(basis)


def _references(part: Ints, basis: Floats, dimension: Ints, weak: Floats) -> Ints:
    """A node for each free vector, such that holding them at zero leaves none."""
    inside = np.flatnonzero(part >= 0)
    most = np.zeros(len(dimension))
    np.maximum.at(most, part[inside], weak[inside])
    weight = np.full(len(part), LEAST)
    held = inside[weak[inside] > 0]
    weight[held] = np.maximum(np.sqrt(weak[held] / most[part[held]]), LEAST)
    basis = basis * weight[:, None]
    order = inside[np.lexsort((-np.abs(basis[inside, 0]), part[inside]))]
    bounds = np.searchsorted(part[order], np.arange(len(dimension) + 1))
    reference = [order[bounds[:-1][dimension == 1]]]
    for p in np.flatnonzero(dimension > 1).tolist():
        nodes = np.sort(order[bounds[p] : bounds[p + 1]])
        reference.append(nodes[_independent_rows(basis[nodes, : dimension[p]])])
    return np.concatenate(reference).astype(np.int64)


def _independent_rows(matrix: Floats) -> Ints:
    """As many row numbers as there are columns, chosen by pivots so that they are independent."""
    left = matrix.copy()
    chosen = []
    for _ in range(matrix.shape[1]):
        size = np.linalg.norm(left, axis=1)
        pick = int(size.argmax())
        chosen.append(pick)
        direction = left[pick] / size[pick]
        left = left - np.outer(left @ direction, direction)
    return np.array(chosen, np.int64)
