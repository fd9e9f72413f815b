"""What short conditions leave free, against the singular values of the whole matrix."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from seqfault.networks.null_space import Conditions, null_space


def conditions(rows: list[dict[int, float]]) -> Conditions:
    entries = [(r, node, weight) for r, row in enumerate(rows) for node, weight in row.items()]
    row, node, weight = zip(*entries, strict=True) if entries else ((), (), ())
    return Conditions(np.array(row, int), np.array(node, int), np.array(weight, float), len(rows))


def free(rows: list[dict[int, float]], size: int, earth: tuple[int, ...] = ()) -> np.ndarray:
    """All free vectors (size, k)."""
    held = np.zeros(size, bool)
    held[list(earth)] = True
    vectors, alone = null_space(conditions(rows), held)
    columns = []
    seen = np.zeros(size, int)
    for members, block in vectors:
        assert len(members) > 1
        seen[members] += 1
        whole = np.zeros((size, block.shape[1]))
        whole[members] = block
        columns.append(whole)
    seen[alone] += 1
    assert (seen <= 1).all()
    return np.column_stack([*columns, np.eye(size)[:, alone]])


def test_without_conditions_every_node_is_free() -> None:
    assert (free([], 3) == np.eye(3)).all()
    assert free([], 2, earth=(0, 1)).shape == (2, 0)


def test_ratios_multiply_along_a_chain() -> None:
    chain = [{0: 1.0, 1: -1.1}, {1: 1.0, 2: -1.2}, {2: 2.0, 3: -1.0}]
    vector = free(chain, 5)
    # v0 = 1.1 v1 = 1.32 v2 = 0.66 v3; node 4 is nobody's.
    assert vector[:, 0] == pytest.approx(np.array([0.66, 0.6, 0.5, 1, 0]))
    assert vector[:, 0].max() == 1
    assert (vector[:, 1] == [0, 0, 0, 0, 1]).all()


def test_earth_runs_along_a_chain() -> None:
    chain = [{k: 1.0, k + 1: -1.0} for k in range(50)]
    assert free(chain, 51, earth=(50,)).shape[1] == 0
    assert free([*chain, {25: 3.0}], 51).shape[1] == 0


@pytest.mark.parametrize(("off", "left"), [(0.0, 1), (1e-13, 1), (1e-3, 0)])
def test_a_loop_of_ratios_is_free_when_they_multiply_to_one(off: float, left: int) -> None:
    loop = [{0: 1.0, 1: -1.1}, {1: 1.0, 2: -1.3}, {2: 1.0, 0: -(1 + off) / 1.1 / 1.3}]
    assert free(loop, 3).shape[1] == left


@pytest.mark.parametrize(("off", "left"), [(0.0, 1), (2e-16, 1), (1e-13, 1), (1e-3, 0)])
def test_a_condition_of_one_node_with_itself(off: float, left: int) -> None:
    # Both windings of a unit on buses that a line joins: equal ratios say nothing, others earth it.
    same = Conditions(np.array([0, 0]), np.array([0, 0]), np.array([1.0, -1.0 - off]), 1)
    vectors, alone = null_space(same, np.zeros(1, bool))
    assert not vectors
    assert len(alone) == left


def test_several_free_vectors_of_one_condition() -> None:
    vectors = free([{0: 1.0, 1: 1.0, 2: -2.0}], 3)
    assert vectors.shape[1] == 2
    assert np.linalg.matrix_rank(vectors) == 2
    assert np.array([1, 1, -2]) @ vectors == pytest.approx(np.zeros(2), abs=1e-14)


def test_long_conditions_become_short_ones_behind_earth() -> None:
    # The second row holds one node once the first has tied another, the third then two.
    rows = [{0: 1.0}, {0: 5.0, 1: 1.0}, {1: 1.0, 2: 1.0, 3: -1.5}]
    vector = free(rows, 4)
    assert vector.shape[1] == 1
    assert vector[:, 0] == pytest.approx(np.array([0, 0, 1, 2 / 3]))


small = st.sampled_from((-2.0, -1.1, -1.0, 0.9, 1.0, 1.0, 1.05, 3.0))
row = st.dictionaries(st.integers(0, 9), small, min_size=1, max_size=4)


@given(st.lists(row, max_size=14), st.sets(st.integers(0, 9), max_size=3))
def test_the_same_space_as_by_singular_values(rows: list[dict[int, float]], earth: set[int]) -> None:
    vectors = free(rows, 10, tuple(earth))
    whole = np.zeros((len(rows) + len(earth), 10))
    for r, entries in enumerate(rows):
        for node, weight in entries.items():
            whole[r, node] = weight
    whole[np.arange(len(rows), len(whole)), sorted(earth)] = 1
    assert vectors.shape[1] == 10 - np.linalg.matrix_rank(whole, tol=1e-9)
    assert np.linalg.matrix_rank(vectors) == vectors.shape[1]
    assert np.abs(whole @ vectors).max(initial=0) <= 1e-10
    assert (np.abs(vectors).max(axis=0, initial=0) == 1).all()


def test_ten_thousand_ratios_in_one_piece() -> None:
    # A dense decomposition of these would take minutes.
    chance = np.random.default_rng(3)
    ratio = chance.uniform(0.95, 1.05, 10000)
    rows = [
        {int(a): ratio[b] / ratio[a], int(b): -1.0}
        for a, b in chance.integers(0, 10000, (30000, 2))
        if a != b
    ]
    rows += [{k: ratio[k + 1] / ratio[k], k + 1: -1.0} for k in range(9999)]
    vectors, alone = null_space(conditions(rows), np.zeros(10000, bool))
    assert len(alone) == 0
    ((members, columns),) = vectors
    assert columns[:, 0] == pytest.approx(ratio[members] / ratio.max(), rel=1e-9)
