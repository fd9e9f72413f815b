"""Winding incidence: eliminating windings without current, and unit blocks by hand."""

from __future__ import annotations

import numpy as np
import pytest

from seqfault.model.windings import without_current

# Short-circuit admittances of three windings by their star: legs 0.1, 0.2 and 0.3 per unit reactance.
LEGS = np.array([0.1j, 0.2j, 0.3j])


def leakage(legs: np.ndarray) -> np.ndarray:
    """Admittance matrix of a star of ``legs`` whose centre is joined to nothing else."""
    y = 1 / legs
    return np.diag(y) - np.outer(y, y) / y.sum()


def gone(*windings: int, of: int = 3) -> np.ndarray:
    return np.isin(np.arange(of), windings)[None, :]


def test_all_windings_with_current_stay_as_they_are() -> None:
    y = leakage(LEGS)[None]
    assert without_current(y, gone()) is y


@pytest.mark.parametrize("winding", [0, 1, 2])
def test_a_winding_without_current_leaves_its_two_neighbours_in_series(winding: int) -> None:
    y = leakage(LEGS)
    kept = [k for k in range(3) if k != winding]
    series = 1 / LEGS[kept].sum()
    hand = np.zeros((3, 3), complex)
    hand[np.ix_(kept, kept)] = series * np.array([[1, -1], [-1, 1]])
    assert without_current(y[None], gone(winding))[0] == pytest.approx(hand, abs=1e-12)
    # Striking the row and column out instead would earth the two by a path that is not there.
    struck = y.copy()
    struck[winding] = struck[:, winding] = 0
    assert np.abs(struck.sum(axis=1)).max() > 1
    assert np.abs(hand.sum(axis=1)).max() < 1e-12


def test_what_is_left_of_two_windings_is_exactly_zero() -> None:
    # 1/3 and its like leave a rounding where y − y y⁻¹ y is taken.
    for z in (0.1j, 0.02 + 0.1j, (1 + 7j) / 3, 1e-6 + 3e-6j):
        y = np.array([[1, -1], [-1, 1]])[None] / z
        for winding in (0, 1):
            assert (without_current(y, gone(winding, of=2)) == 0).all()
        assert (without_current(y, gone(0, 1, of=2)) == 0).all()


def test_only_marked_units_change() -> None:
    y = np.stack([leakage(LEGS), leakage(2 * LEGS), leakage(3 * LEGS)])
    marks = np.concatenate([gone(), gone(0, 2), gone(1)])
    before = y.copy()
    out = without_current(y, marks)
    assert (y == before).all()
    assert (out[0] == y[0]).all()
    assert (out[1] == 0).all()
    assert out[2, 0, 2] == pytest.approx(-1 / (1.2j))
    assert (out[2, 1] == 0).all()
    assert (out[2, :, 1] == 0).all()


def test_a_magnetising_branch_is_a_path_left_behind() -> None:
    # Two windings with a shunt branch of 5 at the centre: one opened, the other sees leg and shunt.
    legs = np.array([0.1j, 0.15j])
    y = 1 / legs
    full = np.diag(y) - np.outer(y, y) / (y.sum() + 1 / 5j)
    out = without_current(full[None], gone(0, of=2))[0]
    assert out[1, 1] == pytest.approx(1 / 5.15j)
    assert out[0, 1] == out[1, 0] == out[0, 0] == 0
