from __future__ import annotations

import math

import pytest

from seqfault.report.numbers import angle, figures, fixed, kilovolt, ohms, quiet


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (7072.4, "7072"),
        (144337.57, "144338"),
        (395.27, "395"),
        (58.31, "58.3"),
        (5.796, "5.80"),
        (0.09126, "0.0913"),
        (9.999, "10.0"),
        (99.96, "100"),
        (0, "0"),
        (-0.0, "0"),
        (-3.755, "-3.75"),
        (1.234e-7, "1.23e-07"),
        (math.nan, "undefined"),
        (math.inf, "unlimited"),
    ],
)
def test_figures(value: float, text: str) -> None:
    assert figures(value) == text


def test_limited_decimals_never_leave_a_signed_zero() -> None:
    assert figures(-0.001, 2, 1) == "0.0"
    assert fixed(-0.0001, 3) == "0.000"
    assert figures(50.0, 2, 1) == "50"


@pytest.mark.parametrize("value", [1e-3, 0.123456, 1.5, 12.345, 999.4, 12345.6])
def test_figures_keep_three_significant(value: float) -> None:
    assert float(figures(value)) == pytest.approx(value, rel=5e-3)


def test_angles() -> None:
    assert angle(1j) == "∠90"
    assert angle(complex(-1, -1e-9)) == "∠180"
    assert angle(0) == ""


def test_quiet_is_exactly_zero_for_rounding_only() -> None:
    assert quiet(1e-13, 1.0) == 0
    assert quiet(1e-6, 1.0) == 1e-6
    assert quiet(0, 0) == 0


def test_units() -> None:
    assert kilovolt(400.0) == "0.4 kV"
    assert ohms(0.5) == "0.5 ohm"
    assert ohms(-0.1j) == "-j0.1 ohm"
    assert ohms(0.5 + 1.2j) == "0.5+j1.2 ohm"
