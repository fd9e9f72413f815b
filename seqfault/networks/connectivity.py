"""Parts of a sequence network that no strong element ties to earth.

The free space of a network is what all its strong elements leave free: potentials that draw no current
in any of them. It is a structural fact, taken from the elements and never from pivots of the matrix.
Each part has one free vector (equal per-unit potential) or several (loops of star-star windings).
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from seqfault.model.elements import DELTA, STAR, Floats, Ints, Model, WindingSets
from seqfault.model.windings import incidence
from seqfault.model.zones import components

TOLERANCE = 1e-9
"""Ratios that differ by less are equal."""


@dataclass(frozen=True, eq=False)
class FreeSpace:
    """Free vectors by part: a part is what strong elements join, so that parts do not see each other.

    ``part`` (n,) number of the part a node belongs to, −1 where a part leaves nothing free;
    ``basis`` (n, k) its free vectors, zero at nodes that are tied to earth; ``dimension`` (parts,) how
    many each part has; ``reference`` nodes held at zero, one a free vector.
    """

    part: Ints
    basis: Floats
    dimension: Ints
    reference: Ints


@dataclass(frozen=True, eq=False)
class Ties:
    """Linear conditions the strong elements set on a potential without current.

    Row r says Σ weight·v[node] = 0 over its entries (r, node, weight).
    """

    row: Ints
    node: Ints
    weight: Floats
    rows: int


def free_space(model: Model, sequence: int) -> FreeSpace:
    """The free space of sequence 0, 1 or 2 of ``model``."""
    n = model.nodes if sequence == 0 else len(model.buses)
    lines = model.lines
    whole = lines.closed.all(axis=0)
    group = components(n, lines.ends[0, whole], lines.ends[1, whole])
    size = int(group.max()) + 1 if n else 0
    tied = np.zeros(size, bool)
    grounded = model.sources.admittance[sequence] != 0
    tied[group[model.sources.bus[grounded]]] = True
    ties = _ties(model, sequence, group)
    vectors, number = _solve(ties, tied, size)
    return _spread(vectors, number, group, _parts(model, sequence, group, size))


def _parts(model: Model, sequence: int, group: Ints, size: int) -> Ints:
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
    return components(size, np.concatenate(first), np.concatenate(second))


def _ties(model: Model, sequence: int, group: Ints) -> Ties:
    """One row for each independent condition of each winding set, nodes merged by ``group``."""
    rows, nodes, weights = [], [], []
    start = 0
    for sets in model.winding_sets:
        if not len(sets.names):
            continue
        inc = incidence(sets, sequence, model.stars.node)
        for unit, first, second in _conditions(sets, sequence):
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
        return Ties(empty, empty, np.zeros(0), 0)
    return Ties(np.concatenate(rows), np.concatenate(nodes), np.concatenate(weights), start)


def _conditions(sets: WindingSets, sequence: int) -> list[tuple[Ints, int, int | None]]:
    """(units, winding, other winding): the winding's voltage is zero, or equals the other's.

    A leakage matrix leaves exactly equal winding voltages free. A delta holds its winding's
    zero-sequence voltage at zero, and with it that of every other winding on the core.
    """
    m, w = sets.bus.shape
    out: list[tuple[Ints, int, int | None]] = []
    if sequence:
        present = np.ones((m, w), bool)
        held = np.zeros(m, bool)
    else:
        present = sets.kind == STAR
        held = (sets.kind == DELTA).any(axis=1)
    if w == 1:
        return [(np.flatnonzero(present[:, 0] & (sets.leakage[sequence, :, 0, 0] != 0)), 0, None)]
    for winding in range(w):
        out.append((np.flatnonzero(present[:, winding] & held), winding, None))
        for other in range(winding):
            between = ~present[:, other + 1 : winding].any(axis=1)
            pair = present[:, winding] & present[:, other] & between & ~held
            out.append((np.flatnonzero(pair), winding, other))
    return [(unit, first, second) for unit, first, second in out if len(unit)]


def _solve(ties: Ties, tied: np.ndarray, size: int) -> tuple[list[tuple[Ints, Floats]], Ints]:
    """Free vectors of the merged nodes: those over several nodes, and the nodes free on their own."""
    row, node, weight = ties.row, ties.node, ties.weight
    tied = tied.copy()
    while True:  # a condition on one free node alone ties it to earth
        keep = ~tied[node]
        row, node, weight = row[keep], node[keep], weight[keep]
        count = np.bincount(row, minlength=ties.rows)
        single = count[row] == 1
        if not single.any():
            break
        tied[node[single]] = True
    label = components(size + ties.rows, node, size + row)[:size]
    order = np.argsort(label[node], kind="stable")
    row, node, weight = row[order], node[order], weight[order]
    touched = np.zeros(size, bool)
    touched[node] = True
    vectors: list[tuple[Ints, Floats]] = []
    bounds = np.flatnonzero(np.diff(label[node], prepend=-1, append=-1)) if len(node) else np.zeros(0, int)
    for a, b in pairwise(bounds.tolist()):
        members, column = np.unique(node[a:b], return_inverse=True)
        conditions, at = np.unique(row[a:b], return_inverse=True)
        dense = np.zeros((len(conditions), len(members)))
        np.add.at(dense, (at, column), weight[a:b])
        free = _null_space(dense)
        if free.shape[1]:
            vectors.append((members, free))
    return vectors, np.flatnonzero(~touched & ~tied)


def _null_space(dense: Floats) -> Floats:
    """Orthonormal null space, a single vector scaled to a largest entry of exactly 1."""
    scale = np.abs(dense).max(axis=1, keepdims=True)
    dense = dense[(scale > 0).ravel()] / scale[scale > 0][:, None]
    _, s, vh = np.linalg.svd(dense)
    rank = int((s > TOLERANCE * max(s.max(initial=0.0), 1.0)).sum())
    free: Floats = vh[rank:].T
    if free.shape[1] == 1:
        free = free / free[np.abs(free).argmax()]
    free[np.abs(free) < TOLERANCE] = 0
    return free


def _spread(vectors: list[tuple[Ints, Floats]], alone: Ints, group: Ints, label: Ints) -> FreeSpace:
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
    return FreeSpace(part, full, dimension, _references(part, full, dimension))


def _references(part: Ints, basis: Floats, dimension: Ints) -> Ints:
    """A node for each free vector, such that holding them at zero leaves none."""
    inside = np.flatnonzero(part >= 0)
    order = inside[np.lexsort((-np.abs(basis[inside, 0]), part[inside]))]
    first = order[np.flatnonzero(np.diff(part[order], prepend=-1))]
    reference = [first[dimension[part[first]] == 1]]
    for p in np.flatnonzero(dimension > 1).tolist():
        nodes = np.flatnonzero(part == p)
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
