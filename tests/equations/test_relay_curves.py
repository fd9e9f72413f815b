"""Operate and reset times against printed constants, handbook points and exact decimal arithmetic."""

from __future__ import annotations

from decimal import Decimal, getcontext

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from seqfault.equations.relay_curves import (
    CURVES,
    error_factor,
    in_effective_range,
    multiplier_for,
    operate_time,
    reset_time,
)

# IEC 60255-151:2009 curves A, B, C and IEEE C37.112-1996 table 1: k, c, exponent; from memory.
CONSTANTS = {
    "IEC standard inverse": ("0.14", "0", "0.02"),
    "IEC very inverse": ("13.5", "0", "1"),
    "IEC extremely inverse": ("80", "0", "2"),
    "IEC long-time inverse": ("120", "0", "1"),
    "IEEE moderately inverse": ("0.0515", "0.1140", "0.02"),
    "IEEE very inverse": ("19.61", "0.491", "2"),
    "IEEE extremely inverse": ("28.2", "0.1217", "2"),
}
INVERSE = sorted(CONSTANTS)


def exact(curve: str, multiple: float) -> float:
    """The formula of the standard in forty decimal digits."""
    getcontext().prec = 40
    k, c, exponent = map(Decimal, CONSTANTS[curve])
    return float(k / (Decimal(multiple) ** exponent - 1) + c)


@given(st.sampled_from(INVERSE), st.floats(1.0000001, 1e3), st.floats(0.01, 20))
def test_the_formula_in_exact_arithmetic(curve: str, multiple: float, multiplier: float) -> None:
    got = operate_time(curve, multiple, multiplier)
    assert got == pytest.approx(multiplier * exact(curve, multiple), rel=1e-8)


def test_every_curve_names_its_source() -> None:
    assert set(CURVES) == {*CONSTANTS, "definite"}
    assert all(curve.source and curve.name == name for name, curve in CURVES.items())


# Handbook points at a multiplier of 1, common practice: the tables of protection guides, from memory.
POINTS = [
    ("IEC standard inverse", (2, 5, 10, 20), (10.03, 4.28, 2.97, 2.27)),
    ("IEC very inverse", (2, 4, 10), (13.5, 4.5, 1.5)),
    ("IEC extremely inverse", (2, 3, 9), (26.67, 10.0, 1.0)),
    ("IEC long-time inverse", (2, 5, 11), (120.0, 30.0, 12.0)),
    # by hand: 0.0515/0.03271 + 0.114, 19.61/24 + 0.491, 28.2/24 + 0.1217
    ("IEEE moderately inverse", (5,), (1.688,)),
    ("IEEE very inverse", (5, 10), (1.308, 0.6891)),
    ("IEEE extremely inverse", (5, 10), (1.2967, 0.4066)),
]


@pytest.mark.parametrize(("curve", "multiples", "times"), POINTS)
def test_points_of_the_handbooks(
    curve: str, multiples: tuple[float, ...], times: tuple[float, ...]
) -> None:
    assert operate_time(curve, multiples, 1.0) == pytest.approx(times, rel=2e-3)


@pytest.mark.parametrize("curve", sorted(CURVES))
def test_nothing_operates_at_or_below_the_pickup(curve: str) -> None:
    times = operate_time(curve, [-1, 0, 0.5, 1, np.nextafter(1, 2), 2], 0.3)
    assert np.isinf(times[:4]).all()
    assert np.isfinite(times[4:]).all()
    assert np.isnan(operate_time(curve, np.nan, 1))
    assert operate_time(curve, np.inf, 2) == pytest.approx(2 * CURVES[curve].c)


def test_definite_time_takes_its_delay() -> None:
    assert operate_time("definite", [0.9, 1.1, 30], 0.4).tolist() == [np.inf, 0.4, 0.4]
    assert operate_time("definite", [0, 0.9, 1, 1.1], 0.0).tolist() == [np.inf, np.inf, np.inf, 0.0]


def test_arrays_are_broadcast() -> None:
    times = operate_time("IEC very inverse", np.array([[2.0], [10.0]]), np.array([0.1, 0.2, 1.0]))
    assert times == pytest.approx(np.array([[1.35, 2.7, 13.5], [0.15, 0.3, 1.5]]))


def test_least_time_instant_stage_and_saturation() -> None:
    def time(multiple: float) -> float:
        return float(
            operate_time(
                "IEC very inverse", multiple, 0.1, least=0.2, instant=12, instant_delay=0.05, saturation=20
            )
        )

    assert time(2) == pytest.approx(1.35)
    assert time(10) == pytest.approx(0.2)  # the curve alone would give 0.15 s
    assert time(12) == pytest.approx(0.2)  # not above the instant stage yet
    assert time(12.1) == 0.05
    assert operate_time("IEC very inverse", 100, 1, saturation=20) == pytest.approx(13.5 / 19)
    # an instant stage below the pickup acts by itself, and a slow one is overtaken by the curve
    assert operate_time("definite", 0.9, 1, instant=0.8, instant_delay=0.1) == 0.1
    assert operate_time("IEC very inverse", 28, 0.1, instant=12, instant_delay=0.5) == pytest.approx(0.05)


@given(st.sampled_from(sorted(CURVES)), st.floats(1.001, 50), st.floats(0.01, 50))
def test_a_multiplier_found_gives_the_time_wanted(curve: str, multiple: float, time: float) -> None:
    multiplier = multiplier_for(curve, multiple, time)
    assert operate_time(curve, multiple, multiplier) == pytest.approx(time, rel=1e-9)


def test_no_multiplier_gives_what_cannot_be() -> None:
    # at 5 times the pickup the very inverse curve gives 3.375 s at a multiplier of 1
    assert multiplier_for("IEC very inverse", 5, [0.3375, 3.375]) == pytest.approx([0.1, 1.0])
    assert np.isnan(multiplier_for("IEC very inverse", [0.5, 1.0, np.nan], 1.0)).all()
    assert np.isnan(multiplier_for("IEC very inverse", 5, [0.0, -1.0])).all()
    least = multiplier_for("IEC very inverse", 5, [0.1, 0.2, 0.3], least=0.2)
    assert np.isnan(least[0])
    assert least[1:] * 3.375 == pytest.approx([0.2, 0.3])
    assert np.isnan(multiplier_for("IEC very inverse", 5, 0.3, instant=4, instant_delay=0.05))
    assert multiplier_for("IEC very inverse", 5, 0.04, instant=4, instant_delay=0.05) * 3.375 == (
        pytest.approx(0.04)
    )


# IEEE C37.112-1996 table 1, reset constants at rest (current gone), from memory.
@pytest.mark.parametrize(
    ("curve", "at_rest"),
    [("IEEE moderately inverse", 4.85), ("IEEE very inverse", 21.6), ("IEEE extremely inverse", 29.1)],
)
def test_reset_of_the_ieee_curves(curve: str, at_rest: float) -> None:
    times = reset_time(curve, [0, 0.5, 1, 3], 2.0)
    assert times == pytest.approx([2 * at_rest, 2 * at_rest / 0.75, np.inf, np.inf])


def test_reset_of_others_is_not_published() -> None:
    with pytest.raises(ValueError, match="no reset constant is published for IEC standard inverse"):
        reset_time("IEC standard inverse", 0.5, 1)
    with pytest.raises(KeyError):
        operate_time("IEC inverse", 2, 1)


def test_effective_range_and_its_errors() -> None:
    """IEC 60255-151: 2.5, 1.5 and 1 times the assigned error from 2, 5 and 10 times; from memory."""
    assert in_effective_range([1.9, 2, 20, 20.1]).tolist() == [False, True, True, False]
    factors = error_factor([1.5, 2, 4.9, 5, 9.9, 10, 20])
    assert np.isnan(factors[0])
    assert factors[1:].tolist() == [2.5, 2.5, 1.5, 1.5, 1.0, 1.0]
