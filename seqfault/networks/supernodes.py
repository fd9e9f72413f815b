"""The structure of a symmetric factor: supernodes, the order they are inverted in, where values lie.

A fundamental supernode is a run of columns of L that share their rows below. One of ``width`` w with
``below`` c rows is a block of w + c rows and w columns. Its *front* are the places of the values among
those rows, (w + c)², which its children read instead of searching. Blocks of one height and shape are
neighbours in memory, so that many are worked on in one multiplication.

Source: J. W. H. Liu, E. G. Ng, B. W. Peyton, "On finding supernodes for sparse matrix computations",
SIAM J. Matrix Anal. Appl. 14 (1993) (from memory).
"""

from __future__ import annotations

from typing import Any

import msgspec
import numpy as np

from seqfault.model.elements import Bools, Ints

BELOW = np.array(
    (
        *(*range(5), 6, 8, 10, 12, 16, 20, 24, 28, *range(32, 129, 8), *range(144, 257, 32), 320, 384),
        *(448, 512, 640, 768, 1024, 1536, 2048, 3072, 4096, 6144, 8192, 12288, 16384),
    )
)
"""Numbers of rows below are rounded up to these: a few zeros buy fewer shapes."""
FEW = 40
TOP = 48
"""Up to so many columns at the top of the tree are one supernode."""


class Shape(msgspec.Struct, frozen=True, eq=False):
    """``count`` supernodes of one height and shape; ``value``, ``front`` and ``link`` where the first
    of them begins. ``leaf``: nobody reads their fronts.
    """

    below: int
    width: int
    leaf: bool
    count: int
    value: int
    front: int
    link: int


class Supernodes(msgspec.Struct, frozen=True, eq=False):
    """Where everything lies. ``size`` values in all, ``front_size`` places in fronts.

    ``own`` (n,) place of the diagonal value of a column, ``entry`` (e,) of each entry of L (the
    diagonal too). ``position`` and ``base`` one a row below, of 32 bits: its row in the parent's front,
    and where that row of the front begins. ``key`` (e,) column · n + row, ascending.
    """

    shapes: tuple[Shape, ...]
    size: int
    front_size: int
    own: Ints
    entry: Ints
    position: Any
    base: Any
    key: Ints

    def find(self, a: Ints, b: Ints) -> Ints:
        """Places of the values between columns ``a`` and ``b``, which L must join."""
        n = len(self.own)
        return self.entry[np.searchsorted(self.key, np.minimum(a, b) * n + np.maximum(a, b))]


def supernodes(lower: Any) -> Supernodes:
    """The supernodes of ``lower``, the CSC pattern of L with its diagonal, rows ascending."""
    n = lower.shape[0]
    start, row = lower.indptr.astype(np.int64), lower.indices.astype(np.int64)
    column = np.repeat(np.arange(n), np.diff(start))
    tree = _tree(start, row)
    unit, within, width, exact, parent = tree.unit, tree.within, tree.width, tree.exact, tree.parent
    units = len(width)
    below = BELOW[np.searchsorted(BELOW, exact)]
    above = np.where(parent >= 0, unit[parent], units)

    key = ((tree.height.max(initial=0) - tree.height) * 65536 + below) * 65536 + width
    turn = np.argsort(key, kind="stable")
    bounds = np.append(np.flatnonzero(np.diff(key[turn], prepend=-1)), units)
    rows = width + below
    value, size = _offsets(rows * width, turn)
    front, front_size = _offsets(np.where(tree.leaf, 0, rows * rows), turn)
    link, links = _offsets(below, turn)

    own = value[unit] + within * (width[unit] + 1)
    down = np.arange(len(row)) - start[column]  # rows of a supernode are without gaps
    if tree.top >= 0:
        inside = np.flatnonzero(unit[column] == tree.top)  # but not those of the topmost
        down[inside] = within[row[inside]] - within[column[inside]]
    entry = own[column] + down * width[unit][column]

    whose = np.repeat(np.arange(units), exact)
    step = np.arange(len(whose)) - np.repeat(np.cumsum(exact) - exact, exact)
    head, wanted = parent[whose], row[start[tree.last][whose] + 1 + step]
    keys = column * n + row
    found = np.searchsorted(keys, head * n + wanted)
    position = found - start[head] + within[head]
    uppermost = above[whose] == tree.top
    position[uppermost] = within[wanted[uppermost]]
    missing = row[np.minimum(found, len(row) - 1)] != wanted
    if (np.where(uppermost, unit[wanted] != tree.top, missing)).any():
        raise AssertionError("the pattern of the factor is not closed")  # rows of a child are its parent's
    places, bases = np.zeros(links, np.int32), np.append(front, 0)[np.repeat(above[turn], below[turn])]
    at = link[whose] + step
    places[at] = position
    bases[at] += position * rows[above[whose]]
    begin = turn[bounds[:-1]]
    shapes = zip(
        *(each[begin].tolist() for each in (below, width, tree.leaf)),
        np.diff(bounds).tolist(),
        *(each[begin].tolist() for each in (value, front, link)),
        strict=True,
    )
    return Supernodes(
        tuple(Shape(*shape) for shape in shapes),
        size,
        front_size,
        own,
        entry,
        places,
        bases.astype(np.int32),
        keys,
    )


class _Tree(msgspec.Struct, frozen=True, eq=False):
    """``unit`` (n,) supernode of each column, ``within`` (n,) its place there. One a supernode: ``width``;
    ``exact`` rows below; ``last`` its last column and ``parent`` the first row below that, −1 without
    one; ``height`` over the deepest leaf; ``leaf``. ``top`` is the topmost one, −1 where there is none.
    """

    unit: Ints
    within: Ints
    width: Ints
    exact: Ints
    last: Ints
    parent: Ints
    height: Ints
    leaf: Bools
    top: int


def _tree(start: Ints, row: Ints) -> _Tree:
    """Fundamental supernodes; the topmost of the tree, each a step by itself, are one without gaps."""
    n = len(start) - 1
    count = np.diff(start) - 1
    parent = np.full(n, -1)
    parent[count > 0] = row[start[:-1][count > 0] + 1]
    merged = np.zeros(n, bool)  # column k is in one supernode with k + 1
    merged[:-1] = (parent[:-1] == np.arange(1, n)) & (count[:-1] == count[1:] + 1) & (count[:-1] > 1)
    first = np.flatnonzero(np.concatenate([[True], ~merged[:-1]]))
    last = np.append(first[1:], n) - 1
    width = last - first + 1
    unit = np.repeat(np.arange(len(first)), width)
    within = np.arange(n) - first[unit]
    above = np.where(parent[last] >= 0, unit[parent[last]], len(first))
    height, leaf = _heights(above, len(first))
    columns = np.cumsum(np.bincount(height, weights=width)[::-1])[::-1]  # at this height and above
    lowest = int(np.searchsorted(-columns, -TOP))
    high = height >= lowest
    if high.sum() < 2:
        return _Tree(unit, within, width, count[last], last, parent[last], height, leaf, -1)
    kept = np.flatnonzero(~high)
    number = np.full(len(first), len(kept))
    number[kept] = np.arange(len(kept))
    unit = number[unit]
    inside = np.flatnonzero(unit == len(kept))
    within[inside] = np.arange(len(inside))
    last = np.append(last[kept], inside[-1])
    return _Tree(
        unit,
        within,
        np.append(width[kept], len(inside)),
        np.append(count[last[:-1]], 0),
        last,
        np.append(parent[last[:-1]], -1),
        np.append(height[kept], lowest),
        np.append(leaf[kept], lowest == 0),
        len(kept),
    )


def _offsets(size: Ints, turn: Ints) -> tuple[Ints, int]:
    """Where blocks of ``size`` begin when laid down in ``turn``, and where the last one ends."""
    ends = np.cumsum(size[turn])
    out = np.empty(len(size), np.int64)
    out[turn] = ends - size[turn]
    return out, int(ends[-1]) if len(ends) else 0


def _heights(above: Ints, units: int) -> tuple[Ints, Any]:
    """Height of each supernode over the deepest leaf under it, and which are leaves."""
    height = np.zeros(units, np.int64)
    waiting = np.bincount(above, minlength=units + 1)[:units]
    leaf = waiting == 0
    ready, level = np.flatnonzero(leaf), 0
    while len(ready):
        height[ready] = level
        level += 1
        up = above[ready]
        up = up[up < units]
        if len(up) > FEW:
            found, children = np.unique(up, return_counts=True)
            waiting[found] -= children
            ready = found[waiting[found] == 0]
        else:
            complete = []
            for one in up.tolist():
                waiting[one] -= 1
                if not waiting[one]:
                    complete.append(one)
            ready = np.array(complete, np.int64)
    return height, leaf
