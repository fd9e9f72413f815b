"""The selected inverse: Z wherever Y has an entry, from sparse factors, without a solve a node.

With Y = L D Lᵀ the inverse obeys Z = D⁻¹ + (1 − Lᵀ) Z + …: column by column from the last, entries of Z
on the pattern of L follow from those to its right. Here a supernode at a time, many of one shape
together, the sequences stacked on the first axis:

    Z_sj = −Z_ss L_sj X,   Z_jj = Xᵀ (D⁻¹ + L_sjᵀ Z_ss L_sj) X,   X = L_jj⁻¹

j the columns of the supernode, s its rows below.

Source: K. Takahashi, J. Fagan, M. S. Chen, "Formation of a sparse bus impedance matrix and its
application to short circuit study", PICA 1973; A. M. Erisman, W. F. Tinney, "On computing certain
elements of the inverse of a sparse matrix", Comm. ACM 18 (1975) (both from memory).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from seqfault.model.elements import Complex, Ints
from seqfault.networks.ordering import SETTINGS, Order, mirrored, order, peel, sorted_pattern
from seqfault.networks.pattern import UnionPattern, alike
from seqfault.networks.supernodes import Shape, Supernodes, supernodes

TOGETHER = 40_000
"""Places of fronts worked on at once, which keeps them in the cache."""


def selected_inverse(pattern: UnionPattern) -> Complex:
    """Entries (sequences, e) of the inverses of the matrices on ``pattern``, at its own entries.

    Raises ``RuntimeError`` where a matrix cannot be factorised with its pivots on the diagonal.
    """
    peeled = peel(pattern, mirrored(pattern.start, pattern.row))
    core, n = peeled.core, pattern.size
    number = np.full(n, -1)
    number[core] = np.arange(len(core))
    row, column = number[pattern.row], number[pattern.column]
    kept = np.flatnonzero((row >= 0) & (column >= 0))
    row, column = row[kept], column[kept]
    value = pattern.value.take(kept, axis=1)
    own = np.flatnonzero(row == column)
    value[:, own] = peeled.own[:, core]
    inner = _core(row, column, value, len(core))
    diagonal = np.empty((len(value), n), complex)
    diagonal[:, core] = inner.take(own, axis=1)
    across = []
    for turn in reversed(peeled.rounds):
        z = -diagonal.take(turn.parent, axis=1) * turn.factor
        diagonal[:, turn.node] = 1 / turn.pivot - z * turn.factor
        across.append(z)
    entry = [turn.entry for turn in reversed(peeled.rounds)]
    mirror = [turn.mirror for turn in reversed(peeled.rounds)]
    place = np.concatenate([kept, *entry, *mirror, pattern.diagonal])
    out = np.empty(pattern.value.shape, complex)
    for k, each in enumerate(out):
        ends = [z[k] for z in across]
        each[place] = np.concatenate([inner[k], *ends, *ends, diagonal[k]])
    return out


def _core(row: Ints, column: Ints, value: Complex, n: int) -> Complex:
    """The selected inverse of the core at its entries, columns in order."""
    start = np.concatenate([[0], np.cumsum(np.bincount(column, minlength=n))])
    elimination = order(start, row, column, value)
    structure = supernodes(elimination.lower)
    entries = elimination.entries
    factor, pivot = _factorised(value.take(entries.data, axis=1), elimination, structure)
    inverse = invert(structure, factor, pivot)
    below = np.repeat(np.arange(n), np.diff(entries.indptr))
    lower = np.flatnonzero(entries.indices > below)  # L stores one of a pair; these ascend
    place = np.empty(len(row), np.int64)
    place[entries.data[lower]] = structure.find(entries.indices[lower], below[lower])
    place[elimination.mirror[lower]] = place[entries.data[lower]]
    place[row == column] = structure.own[elimination.place]
    return inverse.take(place, axis=1)


def _factorised(value: Complex, elimination: Order, structure: Supernodes) -> tuple[Complex, Complex]:
    """L, and D⁻¹ where its diagonal lies, (sequences, size) each, as the blocks lie."""
    from scipy.sparse import csc_array
    from scipy.sparse.linalg import splu

    entries = elimination.entries
    factor = np.zeros((len(value), structure.size), complex)
    pivot = np.zeros_like(factor)
    last: Any = None
    for k, each in enumerate(value):
        matrix = csc_array((each, entries.indices, entries.indptr), shape=entries.shape)
        lu = splu(matrix, permc_spec="NATURAL", **SETTINGS)
        if not np.array_equal(lu.perm_r, lu.perm_c):
            raise RuntimeError("a pivot is off the diagonal")
        pivot[k, structure.own] = 1 / lu.U.diagonal()
        lower = lu.L
        if last is None or not alike(lower, last):
            place = _places(lower, structure)
            last = lower
        factor[k, place] = lower.data
    return factor, pivot


def _places(lower: Any, structure: Supernodes) -> Ints:
    """Where the values of ``lower`` go, in which those that are exactly zero are not stored."""
    pattern = sorted_pattern(lower)
    entry = structure.entry
    if lower.nnz != len(entry):
        n = lower.shape[0]
        key = np.repeat(np.arange(n) * n, np.diff(pattern.indptr)) + pattern.indices
        entry = entry[np.searchsorted(structure.key, key)]
    place = np.empty(lower.nnz, np.int64)
    place[pattern.data] = entry
    return place


def invert(structure: Supernodes, factor: Complex, pivot: Complex) -> Complex:
    """The inverse on the pattern of L as the blocks lie; ``pivot`` is overwritten with it."""
    inverse = pivot
    fronts = np.empty(structure.front_size, np.int32)
    for shape in structure.shapes:
        rows = shape.width + shape.below
        step = max(1, TOGETHER // rows**2)
        for begin in range(0, shape.count, step):
            _invert_some(structure, factor, inverse, fronts, shape, begin, min(step, shape.count - begin))
    return inverse


def _invert_some(
    structure: Supernodes,
    factor: Complex,
    inverse: Complex,
    fronts: Any,
    shape: Shape,
    begin: int,
    count: int,
) -> None:
    """Supernodes ``begin`` to ``begin + count`` of one shape."""
    c, w = shape.below, shape.width
    rows, m = w + c, len(factor)
    at = shape.value + begin * rows * w
    end = at + count * rows * w
    z = inverse[:, at:end].reshape(m, count, rows, w)  # a view: D⁻¹ on the diagonal, zero elsewhere
    lower = factor[:, at:end].reshape(m, count, rows, w)
    if c:
        links = slice(shape.link + begin * c, shape.link + (begin + count) * c)
        front = structure.base[links].reshape(count, c, 1) + structure.position[links].reshape(count, 1, c)
        among = fronts.take(front)  # where Z_ss lies
        known = inverse.take(among, axis=1)
    if w == 1:
        if c:
            column = lower[:, :, 1:]
            product = known * column if c == 1 else np.matmul(known, column)
            np.negative(product, out=z[:, :, 1:])
            product *= column
            z[:, :, 0] += product.sum(axis=2)
    else:
        x = _unit_inverse(lower[:, :, :w])
        middle = z[:, :, :w]
        if c:
            under = lower[:, :, w:]
            product = np.matmul(known, under)
            middle = middle + np.matmul(under.swapaxes(-1, -2), product)
            np.negative(np.matmul(product, x), out=z[:, :, w:])
        z[:, :, :w] = np.matmul(np.matmul(x.swapaxes(-1, -2), middle), x)
    if shape.leaf:
        return
    start = shape.front + begin * rows**2
    square = fronts[start : start + count * rows**2].reshape(count, rows, rows)
    places = np.arange(at, end, dtype=np.int32).reshape(count, rows, w)
    square[:, :, :w] = places
    if c:
        square[:, :w, w:] = places[:, w:].swapaxes(1, 2)
        square[:, w:, w:] = among


def _unit_inverse(lower: Complex) -> Complex:
    """Inverses of unit triangular matrices (…, w, w)."""
    w = lower.shape[-1]
    if w > 3:
        return np.asarray(np.linalg.inv(lower))
    x = 2 * np.eye(w) - lower  # with N below the diagonal, 1 − N + N²
    if w == 3:
        x[..., 2, 0] += lower[..., 2, 1] * lower[..., 1, 0]
    return np.asarray(x)
