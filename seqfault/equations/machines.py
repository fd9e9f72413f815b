"""Rotating machines: nameplate to impedance."""

from __future__ import annotations


def motor_rating(shaft_power: float, efficiency: float, power_factor: float) -> float:
    """Rated apparent power (VA) of an induction motor from its shaft power (W).

    S = P/(η cos φ): IEC 60909-0 clause 3.8.
    """
    return shaft_power / (efficiency * power_factor)


def motor_resistance_ratio(voltage: float, power_a_pole_pair: float | None) -> float:
    """R/X of an induction motor with locked rotor where the nameplate does not tell.

    IEC 60909-0 clause 3.8.1 (values from memory): 0.42 for low-voltage motor groups with their cables;
    above 1 kV 0.10 with at least 1 MW a pole pair and 0.15 below that. ``voltage`` in V line to line,
    ``power_a_pole_pair`` in W, None where the speed is not stated (taken as below 1 MW).
    """
    if voltage <= 1000:
        return 0.42
    if power_a_pole_pair is not None and power_a_pole_pair >= 1e6:
        return 0.10
    return 0.15


def pole_pairs(frequency: float, speed: float) -> int:
    """Pole pairs of an induction machine from its rated speed (rpm) at ``frequency`` (Hz)."""
    return max(1, int(60.0 * frequency / speed + 1e-9))
