"""The three networks on one pattern of entries: the union of Y0, Y1 and Y2.

Coupled lines and shared star points join nodes in zero sequence that are no neighbours in the others.
A node that a sequence lacks, or holds at zero as a reference, is a row of the unit matrix there.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import msgspec
import numpy as np

from seqfault.model.elements import Complex, Ints
from seqfault.networks.assembly import Stamps


class UnionPattern(msgspec.Struct, frozen=True, eq=False):
    """Columns of symmetric matrices: entries ``start[k]`` to ``start[k + 1]`` of column k.

    ``row`` and ``column`` (e,) of each entry, rows ascending in a column; ``diagonal`` (n,) the entry
    (k, k), always there; ``value`` (sequences, e).
    """

    start: Ints
    row: Ints
    column: Ints
    diagonal: Ints
    value: Complex

    @property
    def size(self) -> int:
        """Number of nodes."""
        return len(self.start) - 1

    def find(self, row: Ints, column: Ints) -> Ints:
        """Entries at ``row``, ``column``, which must be there."""
        n = self.size
        key, wanted = self.column * n + self.row, column * n + row
        found = np.searchsorted(key, wanted)
        if len(wanted) and not np.array_equal(key[np.minimum(found, len(key) - 1)], wanted):
            raise AssertionError("an entry is not on the pattern")
        return found


def small_union(stamps: Sequence[Stamps], references: Sequence[Ints], size: int) -> UnionPattern:
    """The union pattern of small networks, without scipy; as ``union`` of ``grounded`` ones."""
    keys, values = [], []
    every = np.arange(size)
    for each, reference in zip(stamps, references, strict=True):
        kept = np.zeros(size, bool)
        kept[: each.size] = True
        kept[reference] = False
        both = kept[each.row] & kept[each.column]
        own = np.ones(size, complex)
        own[: each.size] = np.where(kept[: each.size], each.weak, 1)
        keys.append(np.concatenate([each.column * size + each.row, every * (size + 1)]))
        values.append(np.concatenate([np.where(both, each.value, 0), own]))
    key = np.sort(np.concatenate(keys))
    key = key[np.diff(key, prepend=-1) > 0]
    value = np.zeros((len(stamps), len(key)), complex)
    for into, at, of in zip(value, keys, values, strict=True):
        np.add.at(into, np.searchsorted(key, at), of)
    column, row = key // size, key % size
    start = np.searchsorted(column, np.arange(size + 1))
    return UnionPattern(start, row, column, np.flatnonzero(row == column), value)


def grounded(stamps: Stamps, reference: Ints, size: int) -> Any:
    """The matrix (``size``, ``size``) of ``stamps`` as CSC, rows of the unit matrix at ``reference``.

    What was in such rows stays as zeros: its neighbours still ask for the entries of the inverse.
    """
    from scipy.sparse import csc_array

    kept = np.ones(size, bool)
    kept[reference] = False
    kept[stamps.size :] = False
    both = kept[stamps.row] & kept[stamps.column]
    own = np.ones(size, complex)
    own[: stamps.size] = np.where(kept[: stamps.size], stamps.weak, 1)
    every = np.arange(size)
    return csc_array(
        (
            np.concatenate([np.where(both, stamps.value, 0), own]),
            (
                np.concatenate([stamps.row, every]).astype(np.int32),
                np.concatenate([stamps.column, every]).astype(np.int32),
            ),
        ),
        shape=(size, size),
    )


def union(matrices: Sequence[Any]) -> UnionPattern:
    """Square CSC ``matrices`` of one size, symmetric and with every diagonal entry, on one pattern."""
    for matrix in matrices:
        matrix.sort_indices()
    whole, places = matrices[0], [np.arange(matrices[0].nnz)]
    for k, matrix in enumerate(matrices[1:], 1):
        same = (j for j in range(k) if alike(matrices[j], matrix))
        twin = next(same, None)
        if twin is not None:
            places.append(places[twin])
            continue
        whole, before, here = _merged(whole, matrix)
        places = [before[place] for place in places] + [here]
    start, row = whole.indptr.astype(np.int64), whole.indices.astype(np.int64)
    column = np.repeat(np.arange(len(start) - 1), np.diff(start))
    value = np.zeros((len(matrices), len(row)), complex)
    for sequence, matrix, place in zip(value, matrices, places, strict=True):
        sequence[place] = matrix.data
    return UnionPattern(start, row, column, np.flatnonzero(row == column), value)


def alike(a: Any, b: Any) -> bool:
    """Whether two CSC matrices have their entries at the same places, in the same order."""
    return a.nnz == b.nnz and np.array_equal(a.indptr, b.indptr) and np.array_equal(a.indices, b.indices)


def _merged(a: Any, b: Any) -> tuple[Any, Ints, Ints]:
    """The union of two sorted CSC patterns, and where it holds the entries of each."""
    from scipy.sparse import csc_array

    # An entry of the sum is 1 where only a has it, 2 where only b, 3 where both: rows ascend in all three.
    one, two = (np.full(each.nnz, tag, np.int8) for each, tag in ((a, 1), (b, 2)))
    both = csc_array((one, a.indices, a.indptr), shape=a.shape)
    both = both + csc_array((two, b.indices, b.indptr), shape=b.shape)
    return both, np.flatnonzero(both.data & 1), np.flatnonzero(both.data & 2)
