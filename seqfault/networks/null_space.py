"""What sparse linear conditions leave free: the null space of many short rows.

Nearly all conditions name one node (it is earth) or two (they keep a ratio); those merge nodes, in
time that grows with their number. Only what is left after that, star points among it, is taken apart
densely, one small block at a time.
"""

from __future__ import annotations

from itertools import pairwise

import msgspec
import numpy as np

from seqfault.model.elements import Bools, Floats, Ints
from seqfault.model.zones import components

TOLERANCE = 1e-9
"""Ratios that differ by less are equal."""


class Conditions(msgspec.Struct, frozen=True, eq=False):
    """Row r says Σ weight·v[node] = 0 over its entries (r, node, weight)."""

    row: Ints
    node: Ints
    weight: Floats
    rows: int


class _Ratios:
    """Nodes in fixed proportion: v[node] = factor[node] · v[head[node]], or v[node] = 0."""

    def __init__(self, earth: Bools) -> None:
        self._head = list(range(len(earth)))
        self._factor = [1.0] * len(earth)
        self._earth = earth.tolist()

    def _find(self, node: int) -> tuple[int, float]:
        path = []
        while self._head[node] != node:
            path.append(node)
            node = self._head[node]
        factor = 1.0
        for below in reversed(path):
            factor *= self._factor[below]
            self._head[below], self._factor[below] = node, factor
        return node, factor

    def tie(self, node: int) -> None:
        """V[node] = 0."""
        self._earth[self._find(node)[0]] = True

    def join(self, a: int, b: int, ratio: float) -> None:
        """V[a] = ratio · v[b]."""
        (head_a, of_a), (head_b, of_b) = self._find(a), self._find(b)
        if head_a == head_b:
            if abs(of_a - ratio * of_b) > TOLERANCE * abs(of_a):
                self._earth[head_a] = True
            return
        self._head[head_a], self._factor[head_a] = head_b, ratio * of_b / of_a
        self._earth[head_b] |= self._earth[head_a]

    def columns(self) -> tuple[Ints, Floats, Bools]:
        """Head and factor of every node, and whether it is earth."""
        found = [self._find(node) for node in range(len(self._head))]
        head = np.array([each[0] for each in found], np.int64)
        factor = np.array([each[1] for each in found], float)
        return head, factor, np.array(self._earth, bool)[head]


def null_space(conditions: Conditions, earth: Bools) -> tuple[list[tuple[Ints, Floats]], Ints]:
    """Free vectors of nodes (n,) of which those in ``earth`` are held at zero.

    Returns the vectors that span several nodes, as (nodes, columns), and the nodes free on their own.
    No two items share a node. A vector that is alone over its nodes has a largest entry of exactly 1.
    """
    n = len(earth)
    ratios = _Ratios(earth)
    head, factor, tied = np.arange(n), np.ones(n), earth
    row, node, weight = conditions.row, conditions.node, conditions.weight
    while True:
        row, node, weight = _merged(row, head[node], weight * factor[node], tied, n)
        count = np.bincount(row, minlength=conditions.rows)
        for k in np.flatnonzero(count[row] == 1).tolist():
            ratios.tie(int(node[k]))
        first = np.flatnonzero(count[row] == 2)[::2]
        for k in first.tolist():
            ratios.join(int(node[k]), int(node[k + 1]), float(-weight[k + 1] / weight[k]))
        left = count[row] > 2
        if left.all():
            break
        row, node, weight = row[left], node[left], weight[left]
        head, factor, tied = ratios.columns()
    return _expanded(_blocks(row, node, weight, n), head, factor, tied)


def _merged(row: Ints, node: Ints, weight: Floats, tied: Bools, n: int) -> tuple[Ints, Ints, Floats]:
    """Entries in the order of rows, one a node, without those at earth and those that cancel."""
    keep = ~tied[node]
    key = row[keep] * n + node[keep]
    order = np.argsort(key, kind="stable")  # np.unique would import numpy.ma, dear in a small case
    key, weight = key[order], weight[keep][order]
    new = np.diff(key, prepend=-1) > 0
    key, at = key[new], np.cumsum(new) - 1
    total: Floats = np.zeros(len(key))
    np.add.at(total, at, weight)
    size = np.zeros(len(key))
    np.maximum.at(size, at, np.abs(weight))
    there = np.abs(total) > TOLERANCE * size
    return key[there] // n, key[there] % n, total[there]


def _blocks(row: Ints, node: Ints, weight: Floats, n: int) -> list[tuple[Ints, Floats]]:
    """Nodes and null space of each set of rows that hang together."""
    label = components(n + int(row.max(initial=-1)) + 1, node, n + row)[node]
    order = np.argsort(label, kind="stable")
    row, node, weight, label = row[order], node[order], weight[order], label[order]
    out = []
    bounds = np.append(np.flatnonzero(np.diff(label, prepend=-1)), len(label))
    for a, b in pairwise(bounds.tolist()):
        members, column = np.unique(node[a:b], return_inverse=True)
        rows, at = np.unique(row[a:b], return_inverse=True)
        dense = np.zeros((len(rows), len(members)))
        dense[at, column] = weight[a:b]
        dense /= np.abs(dense).max(axis=1, keepdims=True)
        _, s, vh = np.linalg.svd(dense)
        rank = int((s > TOLERANCE * max(s.max(initial=0.0), 1.0)).sum())
        out.append((members, vh[rank:].T))
    return out


def _expanded(
    blocks: list[tuple[Ints, Floats]], head: Ints, factor: Floats, tied: Bools
) -> tuple[list[tuple[Ints, Floats]], Ints]:
    """From heads back to all nodes: every head that no block holds is free by itself."""
    n = len(head)
    order = np.argsort(head, kind="stable")
    start = np.searchsorted(head[order], np.arange(n + 1))
    blocked = np.zeros(n, bool)
    vectors = []
    for heads, columns in blocks:
        blocked[heads] = True
        if not columns.shape[1]:
            continue
        members = np.concatenate([order[start[h] : start[h + 1]] for h in heads.tolist()])
        at = np.repeat(np.arange(len(heads)), start[heads + 1] - start[heads])
        vectors.append((members, scaled(factor[members, None] * columns[at])))
    loose = ~blocked[head] & ~tied
    size = np.diff(start)
    for h in np.flatnonzero(loose & (size > 1)).tolist():
        members = order[start[h] : start[h + 1]]
        vectors.append((members, scaled(factor[members, None])))
    return vectors, np.flatnonzero(loose & (size[head] == 1))


def scaled(columns: Floats) -> Floats:
    """``columns`` with a largest entry of exactly 1 each, what falls under the tolerance zero."""
    largest = columns[np.abs(columns).argmax(axis=0), np.arange(columns.shape[1])]
    out = np.asarray(columns / largest)
    out[np.abs(out) < TOLERANCE] = 0
    return out
