"""The selected inverse against dense inverses and against a solve a bus."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from scipy.sparse import csc_array

from seqfault.case.reader import case_from_tree
from seqfault.errors import CheckError
from seqfault.faults.network import Network
from seqfault.networks import factors, selected, survey
from seqfault.networks.assembly import Stamps
from seqfault.networks.factors import SequenceFactor
from seqfault.networks.ordering import mirrored, peel
from seqfault.networks.pattern import UnionPattern, grounded, small_union, union
from seqfault.networks.selected import selected_inverse
from seqfault.networks.survey import survey_of
from tests.bench.grid import grid
from tests.networks.test_sparse import ROUNDED, lossless, matrix, nothing_free

NONE = np.zeros(0, np.int64)


def meshed(size: int, degree: float, seed: int, more: int = 0) -> Stamps:
    """A random network with a shunt at every node; ``more`` branches between far nodes on top."""
    chance = np.random.default_rng(seed)
    i = np.arange(1, size)
    j = np.array([chance.integers(max(0, k - 20), k) for k in i])
    extra = max(0, int(size * (degree / 2 - 1)))
    a = chance.integers(0, size - 25, extra)
    i, j = np.concatenate([i, a]), np.concatenate([j, a + chance.integers(1, 25, extra)])
    i = np.concatenate([i, chance.integers(0, size // 2, more)])
    j = np.concatenate([j, chance.integers(size // 2, size, more)])
    y = 1 / (chance.uniform(0.1, 1, len(i)) * (0.1 + 1j))
    ground = chance.uniform(0.01, 0.1, size) * (1 - 1j)
    row, column = np.concatenate([i, j, i, j]), np.concatenate([i, j, j, i])
    return Stamps(size, row, column, np.concatenate([y, y, -y, -y]), ground)


def on_union(*stamps: Stamps) -> UnionPattern:
    return union([grounded(each, NONE, max(s.size for s in stamps)) for each in stamps])


def same(pattern: UnionPattern, inverse: np.ndarray, stamps: tuple[Stamps, ...]) -> None:
    for each, ours in zip(stamps, inverse, strict=True):
        dense = np.linalg.inv(matrix(each))
        inside = (pattern.row < each.size) & (pattern.column < each.size)
        theirs = dense[pattern.row[inside], pattern.column[inside]]
        assert np.abs(ours[inside] - theirs).max() <= 1e-12 * np.abs(dense).max()


@pytest.mark.parametrize(("size", "degree"), [(2, 2), (50, 2), (400, 2.2), (600, 2.6), (500, 4)])
def test_dense_inverses(size: int, degree: float) -> None:
    # The zero sequence has branches that the others lack, as coupled lines make them.
    stamps = meshed(max(size, 30), degree, 1, more=12), meshed(max(size, 30), degree, 1)
    pattern = on_union(*stamps)
    same(pattern, selected_inverse(pattern), stamps)


def test_networks_of_different_sizes_share_the_pattern() -> None:
    stamps = meshed(330, 2.6, 4), meshed(300, 2.6, 7)
    pattern = on_union(*stamps)
    same(pattern, selected_inverse(pattern), stamps)


def test_a_tree_is_peeled_to_its_last_node() -> None:
    stamps = meshed(200, 2, 3)
    pattern = on_union(stamps)
    peeled = peel(pattern, mirrored(pattern.start, pattern.row))
    assert len(peeled.core) == 1
    same(pattern, selected_inverse(pattern), (stamps,))


# Series reactors x, x and a series capacitor −x/2 to one node, in the middle and at the end of a chain.
@pytest.mark.parametrize("legs", [(0.25, 0.25, -0.125), ROUNDED, (0.1, 0.1, -0.0500000001), (0.2, -0.2)])
def test_nodes_without_an_admittance_of_their_own(legs: tuple[float, ...]) -> None:
    stamps = lossless(legs, 400, seed=5)
    pattern = on_union(stamps)
    inverse, dense = selected_inverse(pattern)[0], np.linalg.inv(matrix(stamps))
    assert np.abs(inverse - dense[pattern.row, pattern.column]).max() <= 1e-10 * np.abs(dense).max()


def test_those_nodes_are_a_trap_without_the_guard(monkeypatch: pytest.MonkeyPatch) -> None:
    # And the check of every column sees it, and the solve a bus mends it.
    from seqfault.networks import ordering

    stamps = lossless(ROUNDED, 400, seed=5)
    factor = SequenceFactor(stamps, nothing_free(stamps.size))
    dense = np.linalg.inv(matrix(stamps))
    monkeypatch.setattr(ordering, "CANCELLED", 0)
    pattern = on_union(stamps)
    try:
        inverse = selected_inverse(pattern)[0]
    except RuntimeError:
        inverse = np.zeros(len(pattern.row), complex)
    assert np.abs(inverse - dense[pattern.row, pattern.column]).max() > 1e-3 * np.abs(dense).max()
    found = survey_of([factor] * 3, stamps.size)
    assert np.abs(found.impedance - dense.diagonal()).max() <= 1e-10 * np.abs(dense).max()


def test_a_survey_that_fails_its_check_is_withheld(monkeypatch: pytest.MonkeyPatch) -> None:
    stamps = meshed(400, 2.6, 2)
    factor = SequenceFactor(stamps, nothing_free(400))
    monkeypatch.setattr(survey, "_by_columns", lambda network, pattern: 1.001 * right[0])
    right = selected_inverse(on_union(stamps, stamps, stamps))
    assert survey_of([factor] * 3, 400).worst.max() < 1e-12
    monkeypatch.setattr(selected, "selected_inverse", lambda pattern: 1.001 * right)
    with pytest.raises(CheckError, match="withheld"):
        survey_of([factor] * 3, 400)


def test_small_and_large_patterns_are_one() -> None:
    stamps = meshed(60, 2.6, 1, more=5), meshed(50, 2.6, 2)
    references = np.array([3, 17]), NONE
    large = union([grounded(s, r, 60) for s, r in zip(stamps, references, strict=True)])
    small = small_union(stamps, references, 60)
    assert (large.row == small.row).all()
    assert (large.start == small.start).all()
    assert large.value == pytest.approx(small.value, rel=1e-14)


def test_an_entry_off_the_pattern_is_refused() -> None:
    line = Stamps(3, np.array([0, 1]), np.array([1, 0]), np.array([1j, 1j]), np.ones(3, complex))
    with pytest.raises(AssertionError, match="pattern"):
        on_union(line).find(np.array([0]), np.array([2]))


@cache
def large() -> Network:
    return Network(case_from_tree(grid(5000, 2)))


@pytest.mark.parametrize("sequence", [0, 1, 2])
def test_two_thousand_buses_one_solve_each(sequence: int) -> None:
    network = large()
    found, factor = network.sequences.survey(), network.sequences[sequence]
    nodes = np.random.default_rng(0).choice(network.model.common, 2000, replace=False)
    pattern, floats = found.pattern, 0
    for some in np.array_split(nodes, 8):
        columns = factor.columns(some)
        for r, k in enumerate(some.tolist()):
            z = factor.port_impedance(np.array([k]), columns[:, r : r + 1])[0, 0]
            assert abs(found.impedance[sequence, k] - z) <= 1e-10 * abs(z)
            entries = slice(pattern.start[k], pattern.start[k + 1])
            there = pattern.row[entries]
            inside = there < factor.size
            w, _ = factor.respond(columns[:, r : r + 1], np.array([k]), np.ones(1, complex), {})
            scale = max(abs(w).max(), 1e-300)
            assert np.abs(found.above[sequence, entries][inside] - w[there[inside]]).max() <= 1e-10 * scale
            floats += factor.free.part[k] >= 0
    assert sequence or floats > 100


@pytest.mark.parametrize("seed", [3, 10])
def test_the_survey_of_a_grid_is_that_of_dense_networks(seed: int) -> None:
    case = case_from_tree(grid(500, seed))
    ours = Network(case).sequences.survey()
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(factors, "DENSE", 10**9)
        theirs = Network(case).sequences.survey()
    assert (ours.infinite == theirs.infinite).all()
    bounded = ~ours.infinite
    assert ours.impedance[bounded] == pytest.approx(theirs.impedance[bounded], rel=1e-9, abs=1e-12)
    assert np.abs(ours.above - theirs.above).max() <= 1e-10 * np.abs(theirs.above).max()


def test_the_stand_in_is_symmetric() -> None:
    pattern = on_union(meshed(300, 2.6, 9))
    turned = mirrored(pattern.start, pattern.row)
    assert (pattern.row[turned] == pattern.column).all()
    assert (pattern.column[turned] == pattern.row).all()
    assert csc_array((np.ones(len(turned)), pattern.row, pattern.start)).nnz == len(turned)
