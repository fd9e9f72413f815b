"""Per-unit quantities on a common base.

Source: J. D. Glover, M. S. Sarma, T. J. Overbye, "Power System Analysis and Design", 5th ed., section
3.3 (from memory): base power is three-phase, base voltage line to line.
"""

from __future__ import annotations

from typing import Any

import numpy as np


def base_impedance(voltage: Any, power: Any) -> Any:
    """Ohm of 1 per unit: U²/S; ``voltage`` line to line in V, ``power`` in VA."""
    return voltage**2 / power


def base_current(voltage: Any, power: Any) -> Any:
    """Ampere of 1 per unit: S/(√3 U); ``voltage`` line to line in V, ``power`` in VA."""
    return power / (np.sqrt(3.0) * voltage)


def change_base(z: Any, rating: Any, rated_voltage: Any, power: Any, voltage: Any) -> Any:
    """Per-unit impedance ``z`` on the unit's own rating, on the base ``power`` and ``voltage``."""
    return z * (power / rating) * (rated_voltage / voltage) ** 2
