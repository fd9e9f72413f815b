"""What joins a network to earth: fault levels, neutral devices, earth-fault factors."""

from __future__ import annotations

import numpy as np


def zero_sequence_of_level(z1: complex, z2: complex, level: float, voltage: float, q: float) -> complex:
    """Zero-sequence impedance (ohm) of an infeed from its line-to-ground fault current.

    |Z1 + Z2 + Z0| = √3 U/I_k1 with Z0 = R0 (1 + j q): IEC 60909-0 clause 4.2.4 solved for Z0, the root
    with positive reactance. ``level`` in A, ``voltage`` line to line in V, ``q`` = X0/R0.

    Raises ValueError where the current asked for exceeds √3 U/|Z1 + Z2|.
    """
    z12 = z1 + z2
    total = np.sqrt(3.0) * voltage / level
    a = 1.0 + q * q
    b = z12.real + q * z12.imag
    c = abs(z12) ** 2 - total**2
    if c > 0:
        raise ValueError("the line-to-ground current is larger than Z1 and Z2 alone allow")
    r0 = (-b + np.sqrt(b * b - a * c)) / a if b <= 0 else -c / (b + np.sqrt(b * b - a * c))
    return complex(r0, q * r0)


def largest_level(z1: complex, z2: complex, voltage: float) -> float:
    """The largest line-to-ground current (A) that an infeed with Z0 = 0 could give."""
    return float(np.sqrt(3.0) * voltage / abs(z1 + z2))


def resistor_of_current(current: float, voltage: float) -> float:
    """Ohm of a neutral resistor that passes ``current`` (A) at the phase voltage of ``voltage`` (V).

    R = U/(√3 I): IEEE Std 142, neutral resistors (common practice).
    """
    return float(voltage / (np.sqrt(3.0) * current))


def charging_current(capacitance: float, frequency: float, voltage: float) -> float:
    """Earth-fault current (A) of an isolated network: 3 ω C0 U/√3 (IEC 60071-2; common practice).

    ``capacitance`` in F to earth a phase, ``frequency`` in Hz, ``voltage`` line to line in V.
    """
    return float(2 * np.pi * frequency * capacitance * np.sqrt(3.0) * voltage)


def parallel(a: complex, b: complex) -> complex:
    """Impedance of two in parallel, zero where either is exactly zero."""
    return 0j if a == 0 or b == 0 else a * b / (a + b)
