"""In which order the nodes of a large network are eliminated: its radial ends first, then the core.

Radial ends go in rounds of nodes with one neighbour left, many at once. The core is ordered by minimum
degree on a real, diagonally dominant matrix of the same pattern, which keeps every entry of its
factor. No node is eliminated while its own admittance is all but cancelled: it waits for a neighbour.
"""

from __future__ import annotations

from typing import Any

import msgspec
import numpy as np

from seqfault.model.elements import Bools, Complex, Floats, Ints
from seqfault.networks.pattern import UnionPattern

CANCELLED = 1e-3
"""A node whose own admittance is below this share of those to its neighbours waits for one of them."""
WORTH = 0.2
"""Radial ends are taken off first where they are more than this share of the nodes."""
SETTINGS: dict[str, Any] = {
    "diag_pivot_thresh": 0.0,
    "relax": 1,  # rows here are too short for dense kernels to pay
    "panel_size": 1,
    "options": {"SymmetricMode": True},
}


class Round(msgspec.Struct, frozen=True, eq=False):
    """Nodes eliminated together: ``node`` hangs from ``parent`` by ``entry`` (parent, node), whose mirror
    is ``mirror``; ``factor`` (sequences, r) their entries of L, ``pivot`` of D.
    """

    node: Ints
    parent: Ints
    entry: Ints
    mirror: Ints
    factor: Complex
    pivot: Complex


class Peeled(msgspec.Struct, frozen=True, eq=False):
    """``rounds`` of radial ends, ``core`` the nodes left, ``own`` (sequences, n) their admittances then."""

    rounds: tuple[Round, ...]
    core: Ints
    own: Complex


def mirrored(start: Ints, row: Ints) -> Ints:
    """The entry (j, k) for every entry (k, j) of a symmetric pattern."""
    from scipy.sparse import csc_array

    n = len(start) - 1
    entries = np.arange(len(row), dtype=np.int32)
    turned = csc_array((entries, row.astype(np.int32), start.astype(np.int32)), shape=(n, n)).tocsr()
    return np.asarray(turned.data, np.int64)


def peel(pattern: UnionPattern, mirror: Ints) -> Peeled:
    """Take off nodes with one neighbour until none is left, or nothing where that is not worth it.

    The exclusive or of a node's neighbours, and of its entries, is the last one left of them.
    """
    n = pattern.size
    off = np.flatnonzero(pattern.row != pattern.column)
    degree = np.diff(pattern.start) - 1
    start = np.concatenate([[0], np.cumsum(degree)])
    neighbour, entry = np.zeros(n, np.int64), np.zeros(n, np.int64)
    joined = degree > 0
    if joined.any():
        neighbour[joined] = np.bitwise_xor.reduceat(pattern.row[off], start[:-1][joined])
        entry[joined] = np.bitwise_xor.reduceat(off, start[:-1][joined])
    own = pattern.value[:, pattern.diagonal]
    left, rounds = np.ones(n, bool), []
    ready = np.flatnonzero(degree == 1)
    while len(ready):
        parent = neighbour[ready]
        ready = ready[(degree[parent] > 1) | (ready < parent)]  # of a pair one stays
        value, pivot = pattern.value[:, entry[ready]], own[:, ready]
        sound = (np.abs(pivot) > CANCELLED * np.abs(value)).all(axis=0)
        ready, value, pivot = ready[sound], value[:, sound], pivot[:, sound]
        if not len(ready):
            break
        parent, at = neighbour[ready], entry[ready]
        factor = value / pivot
        rounds.append(Round(ready, parent, at, mirror[at], factor, pivot))
        left[ready], degree[ready] = False, 0
        np.subtract.at(degree, parent, 1)
        np.bitwise_xor.at(neighbour, parent, ready)
        np.bitwise_xor.at(entry, parent, mirror[at])
        for each, less in zip(own, value * factor, strict=True):
            np.subtract.at(each, parent, less)
        touched = np.zeros(n, bool)
        touched[parent] = True
        ready = np.flatnonzero(touched & (degree == 1) & left)
    core = np.flatnonzero(left)
    if n - len(core) < WORTH * n:
        return Peeled((), np.arange(n), pattern.value[:, pattern.diagonal])
    return Peeled(tuple(rounds), core, own)


class Order(msgspec.Struct, frozen=True, eq=False):
    """``place`` (n,) of each node in the elimination; ``lower`` the pattern of L (``sorted_pattern``);
    ``entries`` the matrix in that order, CSC with the numbers of its entries, and ``mirror`` (e,) that of
    the mirror of each of them.
    """

    place: Ints
    lower: Any
    entries: Any
    mirror: Ints


def order(start: Ints, row: Ints, column: Ints, value: Complex) -> Order:
    """The elimination of the core whose columns hold ``row`` with ``value`` (sequences, e)."""
    from scipy.sparse import csc_array
    from scipy.sparse.linalg import splu

    n = len(start) - 1
    count = np.diff(start)
    dummy = np.where(row == column, count[column].astype(float), -1.0)
    stand_in = csc_array((dummy, row.astype(np.int32), start.astype(np.int32)), shape=(n, n))
    lu = splu(stand_in, permc_spec="MMD_AT_PLUS_A", **SETTINGS)
    place = np.asarray(lu.perm_c, np.int64)
    waiting = _cancelled(start, row, column, value)
    if waiting.any():
        place = _after_a_neighbour(place, waiting, row, column)
        turned = np.argsort(place)
        lu = splu(csc_array(stand_in[turned][:, turned]), permc_spec="NATURAL", **SETTINGS)
        place = np.asarray(lu.perm_c, np.int64)[place]  # it still sorts children before their parents
    lower = sorted_pattern(lu.L)
    turned = np.argsort(place)
    counts = count[turned]
    begin = np.concatenate([[0], np.cumsum(counts)])
    number = np.repeat(start[turned] - begin[:-1], counts) + np.arange(len(row))
    by_row = csc_array(
        (number.astype(np.int32), place[row[number]].astype(np.int32), begin), (n, n)
    ).tocsr()
    entries = by_row.tocsc()  # turned twice, its rows ascend
    return Order(place, lower, entries, by_row.data)


def sorted_pattern(matrix: Any) -> Any:
    """The CSC pattern of ``matrix``, rows ascending; its data say which value of ``matrix`` each one is."""
    from scipy.sparse import csc_array

    number = np.arange(matrix.nnz, dtype=np.int32)
    out = csc_array((number, matrix.indices.copy(), matrix.indptr), shape=matrix.shape)
    out.sort_indices()
    return out


def _cancelled(start: Ints, row: Ints, column: Ints, value: Complex) -> Bools:
    """Nodes whose own admittance is next to nothing in one sequence."""
    size = np.abs(value)
    own = size.take(np.flatnonzero(row == column), axis=1)
    across = np.add.reduceat(size, start[:-1], axis=1) - own
    return np.asarray((own < CANCELLED * across).any(axis=0))


def _after_a_neighbour(place: Ints, waiting: Bools, row: Ints, column: Ints) -> Ints:
    """``place`` with each waiting node behind a neighbour of its own that does not wait.

    Two behind the same neighbour could cancel each other. Where every neighbour is taken, the last counts.
    """
    wanted: Floats = place.astype(float)
    taken: set[int] = set()
    for node in np.flatnonzero(waiting).tolist():
        here = slice(*np.searchsorted(column, (node, node + 1)).tolist())
        others = row[here][~waiting[row[here]]]
        others = others[np.argsort(place[others])].tolist()
        free = [other for other in others if other not in taken]
        behind = free[0] if free else others[-1] if others else None
        if behind is not None:
            taken.add(behind)
        wanted[node] = max(place[node], len(place) if behind is None else place[behind]) + 0.5
    moved = np.empty(len(place), np.int64)
    moved[np.argsort(wanted, kind="stable")] = np.arange(len(place))
    return moved
