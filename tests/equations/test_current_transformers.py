"""Current transformers by hand figures; the residual error by brute force over all errors."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from seqfault.equations.current_transformers import (
    burden_resistance,
    error_at_limit,
    knee_point_voltage,
    limit_factor_of_knee,
    limit_factor_with,
    limiting_emf,
    residual_error,
    to_primary,
    to_secondary,
)

A = np.exp(2j * np.pi / 3)
BALANCED = np.array([1, A**2, A])


def test_ratio() -> None:
    assert to_secondary(20.0, 200, 1) == 0.1
    assert to_primary(0.5, 1000, 5) == 100
    assert to_secondary(np.array([100.0, 400.0]), 400, 5).tolist() == [1.25, 5.0]


def test_accuracy_limit_with_the_burden_connected() -> None:
    # 5P20, 15 VA at 1 A is 15 ohm; 5 ohm of winding and 5 ohm connected: 20 (5 + 15)/(5 + 5)
    assert burden_resistance(15, 1) == 15
    assert burden_resistance(15, 5) == 0.6
    assert limit_factor_with(20, 5, 15, 5) == 40
    assert limit_factor_with(20, 5, 15, 15) == 20
    assert limit_factor_with(20, 5, 15, 35) == 10
    assert limit_factor_with(20, 0, 15, 0) == np.inf


def test_limiting_emf_and_knee_point() -> None:
    # 10P10, 7.5 VA at 5 A, 0.2 ohm of winding. Handbooks write 10 x 7.5 VA/5 A + 10 x 5 A x 0.2 ohm
    assert limiting_emf(10, 5, 0.2, 0.3) == pytest.approx(25)
    assert knee_point_voltage(10, 5, 0.2, 0.3) == pytest.approx(20)
    # the knee of 200 V carries 1 A x 10 ohm twenty times over
    assert limit_factor_of_knee(200, 1, 6, 4) == pytest.approx(20)
    assert limit_factor_of_knee(200, 1, 0, 0) == np.inf


def test_error_at_the_accuracy_limit() -> None:
    # 5P20, 200/1 A: 5 % of 4000 A
    assert error_at_limit(200, 20, 0.05) == pytest.approx(200)


def test_residual_error_of_a_balanced_current() -> None:
    """Common practice: ε I; the bound of the class, errors of any angle: 3 ε I."""
    assert residual_error(1000 * BALANCED, 0.05) == pytest.approx(50)
    assert residual_error(1000 * BALANCED, 0.05, transformers="any") == pytest.approx(150)
    # a line-line current: both its transformers lose in opposite phases, so one alone is worst
    assert residual_error(np.array([0, 800, -800.0]), 0.1) == pytest.approx(80)


def test_no_bound_beyond_the_accuracy_limit() -> None:
    sizes = np.array([3999.0, 4000.0, 4001.0])
    errors = residual_error(BALANCED[:, None] * sizes, 0.05, limit=4000)
    assert errors[:2] == pytest.approx([0.05 * 3999, 200])
    assert errors[2] == np.inf


SIZE = st.floats(0, 1)
PHASOR = st.builds(lambda r, t: r * np.exp(1j * t), st.floats(0, 1e4), st.floats(0, 2 * np.pi))


@given(st.lists(PHASOR, min_size=3, max_size=3), st.lists(SIZE, min_size=3, max_size=3), st.floats(0, 6.3))
def test_no_set_of_errors_exceeds_the_bound(
    currents: list[complex], share: list[float], turn: float
) -> None:
    i, x = np.array(currents), np.array(share)
    slack = 1e-9 * (1 + np.abs(i).sum())
    assert abs((0.05 * x * i).sum()) <= residual_error(i, 0.05) + slack
    turned = x * np.exp(1j * turn * np.array([1, 2, 5]))
    assert abs((0.05 * turned * i).sum()) <= residual_error(i, 0.05, transformers="any") + slack
