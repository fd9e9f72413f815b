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
