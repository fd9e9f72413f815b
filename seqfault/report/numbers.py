"""Numbers as an engineer writes them: at least three figures, no noise, never ``-0``."""

from __future__ import annotations

import cmath
import math

NOISE = 1e-11
"""A phasor below this share of the greatest of its kind is rounding, and printed as 0."""


def figures(value: float, digits: int = 3, decimals: int | None = None) -> str:
    """``value`` with at least ``digits`` significant figures, or with ``decimals`` at most."""
    if not math.isfinite(value):
        return "undefined" if math.isnan(value) else "unlimited"
    if value == 0:
        return "0"
    if abs(value) < 1e-4 and decimals is None:
        return f"{value:.{digits - 1}e}"
    size = math.floor(math.log10(abs(float(f"{value:.{digits - 1}e}"))))
    places = max(0, digits - 1 - size)
    text = f"{value:.{places if decimals is None else min(places, decimals)}f}"
    return text.lstrip("-") if float(text) == 0 else text


def fixed(value: float, decimals: int) -> str:
    """``value`` with exactly ``decimals``."""
    text = f"{value:.{decimals}f}"
    return text.lstrip("-") if float(text) == 0 else text


def angle(value: complex) -> str:
    """The angle of a phasor in whole degrees, above -180 up to 180; nothing for a zero phasor."""
    if value == 0 or not cmath.isfinite(value):
        return ""
    degrees = round(math.degrees(cmath.phase(value)))
    return f"∠{180 if degrees == -180 else degrees}"


def quiet(value: complex, greatest: float) -> complex:
    """``value``, or exactly 0 where it is rounding beside ``greatest``."""
    return 0j if abs(value) <= NOISE * greatest else complex(value)


def kilovolt(volt: float) -> str:
    """A nominal voltage, ``11 kV``."""
    return f"{volt / 1000:g} kV"


def ohms(value: complex, digits: int = 6) -> str:
    """An impedance as it could be typed, ``0.5 ohm`` or ``0.5+j1.2 ohm``."""
    if value.imag == 0:
        return f"{value.real:.{digits}g} ohm"
    sign = "-" if value.imag < 0 else "+"
    real = f"{value.real:.{digits}g}{sign}" if value.real else sign.lstrip("+")
    return f"{real}j{abs(value.imag):.{digits}g} ohm"


def counted(number: int, noun: str, plural: str = "") -> str:
    """``1 bus``, ``3 buses``."""
    return f"{number} {noun if number == 1 else plural or noun + 's'}"
