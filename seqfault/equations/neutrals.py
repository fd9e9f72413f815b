"""Arithmetic of neutral devices: warm resistors, winding cover, rating of an earthing transformer."""

from __future__ import annotations

from math import sqrt


def warm_ratio(coefficient: float, rise: float) -> float:
    """Ratio of a resistance ``rise`` (K) above its stated temperature to the stated one: 1 + α ΔT.

    ``coefficient`` α per K (common practice).
    """
    return 1 + coefficient * rise


def unprotected_share(pickup: float, neutral: complex, winding: complex, phase_voltage: float) -> float:
    """Share of a star winding, from its star point, whose earth faults stay below ``pickup`` (A).

    (x V)² = I² |Zn + x Zw|² for x, the positive root; without winding impedance x = I Rn/V.
    ``neutral`` and ``winding`` (the whole of it) in ohm, ``phase_voltage`` in V. Infinite where the
    winding never drives so much. Source: V. K. Mehta, R. Mehta, "Principles of Power System", ch. 22;
    Chakrabarti, Soni, Gupta, Bhatnagar, "A Text Book on Power System Engineering", ch. 3.8.
    """
    square = pickup**2
    a = phase_voltage**2 - square * abs(winding) ** 2
    half = square * (neutral * winding.conjugate()).real
    c = square * abs(neutral) ** 2
    if a <= 0:
        return float("inf")
    return (half + sqrt(half * half + a * c)) / a


def resistor_of_share(pickup: float, share: float, winding: complex, phase_voltage: float) -> float:
    """Ohm of the neutral resistor that leaves ``share`` of a star winding unprotected.

    The equation of ``unprotected_share`` solved for Rn. Raises ValueError where the winding itself lets
    less than ``pickup`` (A) through at that point.
    """
    square = (share * phase_voltage / pickup) ** 2 - (share * winding.imag) ** 2
    ohms = sqrt(square) - share * winding.real if square >= 0 else -1.0
    if ohms < 0:
        raise ValueError("the winding itself lets less current through than the pickup")
    return ohms


def short_time_rating(voltage: float, neutral_current: float) -> float:
    """VA of an earthing transformer for its short time: V_LN × I_N (common practice).

    ``voltage`` line to line in V, ``neutral_current`` in A.
    """
    return voltage / sqrt(3) * neutral_current


def ohms_of_rating(voltage: float, rating: float) -> float:
    """Ohm a phase that 100 % on ``rating`` (VA) stands for: U²/S; ``voltage`` line to line in V."""
    return voltage**2 / rating
