"""Arithmetic of neutral devices: warm resistors, rating of an earthing transformer."""

from __future__ import annotations

from math import sqrt


def warm_ratio(coefficient: float, rise: float) -> float:
    """Ratio of a resistance ``rise`` (K) above its stated temperature to the stated one: 1 + α ΔT.

    ``coefficient`` α per K (common practice).
    """
    return 1 + coefficient * rise


def short_time_rating(voltage: float, neutral_current: float) -> float:
    """VA of an earthing transformer for its short time: V_LN × I_N (common practice).

    ``voltage`` line to line in V, ``neutral_current`` in A.
    """
    return voltage / sqrt(3) * neutral_current


def ohms_of_rating(voltage: float, rating: float) -> float:
    """Ohm a phase that 100 % on ``rating`` (VA) stands for: U²/S; ``voltage`` line to line in V."""
    return voltage**2 / rating
