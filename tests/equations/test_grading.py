"""Margins, device numbers and the cover of a winding, by hand."""

from __future__ import annotations

import cmath

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from seqfault.equations.device_numbers import device_number
from seqfault.equations.grading import grading_margin
from seqfault.equations.setting_scales import setting_at_least, setting_at_most
from seqfault.equations.winding_cover import resistor_for_share, uncovered_share


def test_usual_margin_is_a_quarter_of_a_second() -> None:
    """(2 x 5 % + 10 %) x 0.5 s + 0.10 s + 0.02 s + 0.03 s: common practice."""
    assert grading_margin(0.5) == pytest.approx(0.25)
    assert grading_margin(np.array([0.0, 1.0])) == pytest.approx([0.15, 0.35])


@pytest.mark.parametrize(
    ("term", "value", "margin"),
    [
        ("relay_error", 0.075, 0.275),
        ("ct_error", 0.0, 0.20),
        ("breaker", 0.05, 0.20),
        ("overshoot", 0.05, 0.28),
        ("safety", 0.10, 0.32),
    ],
)
def test_each_term_of_the_margin(term: str, value: float, margin: float) -> None:
    assert grading_margin(0.5, **{term: value}) == pytest.approx(margin)


# IEEE C37.2, from memory; N and G as in common practice.
@pytest.mark.parametrize(
    ("measures", "options", "number"),
    [
        ("residual", {}, "51N"),
        ("residual", {"instant": True}, "50N/51N"),
        ("residual", {"delayed": False}, "50N"),
        ("residual", {"delayed": False, "instant": True}, "50N"),
        ("residual", {"directional": True, "instant": True}, "67N"),
        ("core-balance", {"instant": True}, "50G/51G"),
        ("neutral", {}, "51G"),
        ("phase", {"instant": True}, "50/51"),
        ("phase", {"directional": True}, "67"),
        ("negative-sequence", {"instant": True}, "46"),
        ("neutral-voltage", {"delayed": False}, "59N"),
    ],
)
def test_device_numbers(measures: str, options: dict[str, bool], number: str) -> None:
    assert device_number(measures, **options) == number


@given(
    st.floats(0.1, 1e4), st.floats(0, 100), st.floats(0, 20), st.floats(100, 20e3),
    st.floats(0, 5), st.floats(0, 5),
)  # fmt: skip
def test_a_fault_at_the_edge_of_the_cover_draws_the_pickup(
    pickup: float, r: float, x: float, voltage: float, r_w: float, x_w: float
) -> None:
    share = uncovered_share(pickup, r, voltage, complex(r_w, x_w), reactor=x)
    assert 0 <= share <= 1
    impedance = complex(r, x) + share * complex(r_w, x_w)
    if share < 1:
        assert share * voltage == pytest.approx(pickup * abs(impedance), rel=1e-6, abs=1e-6)
    else:
        assert voltage <= pickup * abs(impedance) * (1 + 1e-9)


def test_a_winding_that_nothing_covers() -> None:
    assert uncovered_share(500, 20, 6350) == 1
    assert uncovered_share(2000, 0, 6350, 4j) == 1
    assert uncovered_share(20, 0, 6350, 4j) == 0


def test_the_resistor_of_a_share_gives_that_share() -> None:
    for winding in (0j, 0.4j, cmath.rect(2, 1)):
        resistor = resistor_for_share(150, 0.1, 6350, winding)
        assert uncovered_share(150, resistor, 6350, winding) == pytest.approx(0.1)
    with pytest.raises(ValueError, match="own impedance"):
        resistor_for_share(2000, 0.1, 6350, 4j)


@given(st.floats(0, 1e3), st.integers(1, 10_000), st.integers(0, 100), st.integers(0, 1000))
def test_settings_next_to_a_value(value: float, step: int, first: int, count: int) -> None:
    """Counted out in thousandths, where whole numbers are exact."""
    size, least, greatest = step / 1000, first * step / 1000, (first + count) * step / 1000
    settings = [least + k * size for k in range(count + 1)]
    above = [one for one in settings if one >= value - 1e-6 * size]
    below = [one for one in settings if one <= value + 1e-6 * size]
    up = setting_at_least(value, size, least, greatest)
    down = setting_at_most(value, size, least, greatest)
    assert up == pytest.approx(above[0], abs=1e-5 * size) if above else np.isnan(up)
    assert down == pytest.approx(below[-1], abs=1e-5 * size) if below else np.isnan(down)


def test_rounding_moves_no_setting() -> None:
    assert setting_at_least(0.15, 0.05) == pytest.approx(0.15)
    assert setting_at_most(0.3, 0.1) == pytest.approx(0.3)
    assert setting_at_least(0.31, 0.1) == pytest.approx(0.4)
    assert np.isnan(setting_at_least(21, 1, 0, 20))
    assert setting_at_most(21, 1, 0, 20) == 20
    assert setting_at_least(0.01, 0.01, 0.05, 1) == 0.05
