"""Transformers: nameplate to impedance, and the turn of a delta's circulating current."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

# Which pair of delta terminals a leg spans decides how its current runs round the delta: for a delta on
# the hv side (star on the other) legs a-b, b-c, c-a belong to clocks 11, 3, 7 and the reversed ones to
# 1, 5, 9; for a delta on the lv side it is the other way about.
_ALONG_ON_HV = (3, 7, 11)


def split_by_loss(impedance: Any, loss: Any, rating: Any) -> Any:
    """Complex per-unit impedance from its magnitude and the load loss at rated current.

    R = P_k/S_r, X = √(Z² − R²): IEC 60076-1, IEC 60909-0 clause 3.3.1 (2001 edition). ``loss`` in W,
    ``rating`` in VA; the loss must not exceed what the impedance allows.
    """
    r = loss / rating
    return r + 1j * np.sqrt(impedance**2 - r**2)


def split_by_ratio(impedance: Any, x_over_r: Any) -> Any:
    """Complex impedance from its magnitude and X/R, in the unit of the magnitude."""
    return impedance * (1 + 1j * x_over_r) / np.sqrt(1 + x_over_r**2)


def two_winding_leakage(z: npt.NDArray[np.complex128]) -> npt.NDArray[np.complex128]:
    """Leakage admittance matrices (m, 2, 2) of two windings whose short-circuit impedance is ``z``.

    Source: the magnetising branch left out, y [1 −1; −1 1]; per unit, winding currents into the
    windings.
    """
    return np.asarray((1 / z)[:, None, None] * np.array([[1.0, -1.0], [-1.0, 1.0]]))


def delta_sense(clock: int, on_hv: bool) -> int:
    """+1 where a leg's winding runs a to b (b to c, c to a) round its delta, −1 where it runs back.

    Follows from the vector diagrams of IEC 60076-1 for a star and a delta winding on one leg.
    """
    return 1 if (clock % 12 in _ALONG_ON_HV) == on_hv else -1


def three_winding_leakage(z_hl: complex, z_ht: complex, z_lt: complex) -> npt.NDArray[np.complex128]:
    """Leakage admittance matrix (3, 3) from the short-circuit impedances of the three pairs.

    With hv as reference, Z' = [[z_hl, (z_hl + z_ht − z_lt)/2], [·, z_ht]] relates the currents into lv
    and tv to their voltages above hv; ampere-turns balance. The star equivalent of the books is its
    diagonal form: J. L. Blackburn, "Protective Relaying: Principles and Applications" (from memory). A
    branch of that star may be negative or zero. One base for all.
    """
    mutual = (z_hl + z_ht - z_lt) / 2
    inverse = np.linalg.inv(np.array([[z_hl, mutual], [mutual, z_ht]], complex))
    above = np.array([[-1, 1, 0], [-1, 0, 1]], complex)
    return np.asarray(above.T @ inverse @ above)


def star_branches(z_hl: complex, z_ht: complex, z_lt: complex) -> tuple[complex, complex, complex]:
    """Star equivalent (hv, lv, tv) of the three pairs: z_h = (z_hl + z_ht − z_lt)/2 and round."""
    return (z_hl + z_ht - z_lt) / 2, (z_hl + z_lt - z_ht) / 2, (z_ht + z_lt - z_hl) / 2


def magnetised_leakage(z_h: complex, z_l: complex, z_m: complex) -> npt.NDArray[np.complex128]:
    """Admittance matrix (2, 2) of a T: ``z_m`` to the reference between ``z_h`` and ``z_l``."""
    return np.linalg.inv(np.array([[z_h + z_m, z_m], [z_m, z_l + z_m]], complex))


def magnetising_from_tests(
    from_hv: complex, from_lv: complex, from_hv_lv_shorted: complex
) -> tuple[complex, complex, complex]:
    """The T (z_h, z_l, z_m) of zero-sequence tests, each per unit of its own side.

    Z_m = √(Z_lv,open (Z_hv,open − Z_hv,short)), the root with positive reactance: IEC 60076-1 and
    60076-8, three-limb cores and closed deltas (from memory).
    """
    z_m = complex(np.sqrt(complex(from_lv * (from_hv - from_hv_lv_shorted))))
    if z_m.imag < 0:
        z_m = -z_m
    return from_hv - z_m, from_lv - z_m, z_m
