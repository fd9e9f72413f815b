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
from seqfault.networks.ordering import SETTINGS, Order, mirrored, order, peel
from seqfault.networks.pattern import UnionPattern
from seqfault.networks.supernodes import Shape, Supernodes, supernodes

TOGETHER = 40_000
"""Places of fronts worked on at once, which keeps them in the cache."""


def selected_inverse(pattern: UnionPattern) -> Complex:
    """Entries (sequences, e) of the inverses of the matrices on ``pattern``, at its own entries.

    Raises ``RuntimeError`` where a matrix cannot be factorised with its pivots on the diagonal.
    """
    mirror = mirrored(pattern.start, pattern.row)
    peeled = peel(pattern, mirror)
    out = np.empty(pattern.value.shape, complex)
    core = peeled.core
    number = np.full(pattern.size, -1)
    number[core] = np.arange(len(core))
    kept = np.flatnonzero((number[pattern.row] >= 0) & (number[pattern.column] >= 0))
    row, column = number[pattern.row[kept]], number[pattern.column[kept]]
    value = pattern.value[:, kept]
    value[:, row == column] = peeled.own[:, core]
    out[:, kept] = _core(row, column, value, len(core))
    for turn in reversed(peeled.rounds):
        above = out[:, pattern.diagonal[turn.parent]]
        across = -above * turn.factor
        out[:, turn.entry] = out[:, turn.mirror] = across
        out[:, pattern.diagonal[turn.node]] = 1 / turn.pivot - across * turn.factor
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
    """L below the diagonal and D⁻¹ on it, (sequences, size) each, as the blocks lie."""
    from scipy.sparse import csc_array
    from scipy.sparse.linalg import splu

    entries = elimination.entries
    factor = np.zeros((len(value), structure.size), complex)
    pivot = np.zeros_like(factor)
    pattern = elimination.lower
    strict = np.ones(len(pattern.indices), bool)
    strict[pattern.indptr[:-1]] = False
    below = np.flatnonzero(strict)
    into = structure.entry[below]
    for k, each in enumerate(value):
        matrix = csc_array((each, entries.indices, entries.indptr), shape=entries.shape)
        lu = splu(matrix, permc_spec="NATURAL", **SETTINGS)
        if not np.array_equal(lu.perm_r, lu.perm_c):
            raise RuntimeError("a pivot is off the diagonal")
        pivot[k, structure.own] = 1 / lu.U.diagonal()
        lower = lu.L
        if not lower.has_sorted_indices:
            lower.sort_indices()
        if lower.nnz == pattern.nnz:
            factor[k, into] = lower.data[below]
        else:
            _lay(factor[k], lower, structure)
    return factor, pivot


def _lay(into: Complex, lower: Any, structure: Supernodes) -> None:
    """Values of ``lower``, in which an entry that is exactly zero is not stored, into the blocks."""
    n = lower.shape[0]
    key = np.repeat(np.arange(n), np.diff(lower.indptr)) * n + lower.indices
    below = np.ones(lower.nnz, bool)
    below[lower.indptr[:-1]] = False
    into[structure.entry[np.searchsorted(structure.key, key[below])]] = lower.data[below]


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
    """Inverses of unit triangular matrices (…, w, w), whose diagonals are not stored."""
    w = lower.shape[-1]
    x = np.eye(w) - lower
    if w == 2:
        return np.asarray(x)
    if w == 3:
        x[..., 2, 0] += lower[..., 2, 1] * lower[..., 1, 0]
        return np.asarray(x)
    return np.asarray(np.linalg.inv(lower + np.eye(w)))
