"""How much of an earthed star winding its earth-fault relay covers.

A fault at the share x of a winding, counted from its star point, is driven by x of the phase voltage
through the neutral's resistor and x of the winding's own impedance. V. K. Mehta, "Principles of Power
System", ch. 22; the winding's impedance in proportion to the turns, as in those examples.
"""

from __future__ import annotations

import math


def uncovered_share(
    pickup: float, resistor: float, voltage: float, winding: complex = 0j, *, reactor: float = 0.0
) -> float:
    """The share x of a winding, from its star point, in which a fault stays below ``pickup``.

    x V = I |Z_n + x Z_w|, with ``pickup`` the primary current I (A), ``voltage`` the phase voltage V (V),
    Z_n = ``resistor`` + j ``reactor`` (ohm) and ``winding`` the impedance Z_w (ohm) of the whole winding.
    1 where no fault of the winding reaches the pickup.
    """
    z_n, i2 = complex(resistor, reactor), pickup**2
    a = voltage**2 - i2 * abs(winding) ** 2
    b = -2 * i2 * (z_n.real * winding.real + z_n.imag * winding.imag)
    c = -i2 * abs(z_n) ** 2
    if a <= 0:
        return 1.0
    return min(1.0, (-b + math.sqrt(b * b - 4 * a * c)) / (2 * a))


def resistor_for_share(pickup: float, share: float, voltage: float, winding: complex = 0j) -> float:
    """Neutral resistor (ohm) with which ``pickup`` (A) leaves just ``share`` of a winding uncovered.

    R_n = √((x V/I)² − (x X_w)²) − x R_w; ``voltage`` (V) phase to neutral, ``winding`` in ohm. Raises
    ValueError where even a resistor of 0 ohm leaves more uncovered.
    """
    total, own = share * voltage / pickup, share * winding
    if total < abs(own):
        raise ValueError("the winding's own impedance leaves more of it uncovered than that")
    return math.sqrt(total**2 - own.imag**2) - own.real
