"""Earth faults through a resistance R, in closed form, and the greatest R that something still sees.

Seen from its place a network is E, Z0, Z1, Z2. Its sequence currents into a line-ground fault (phase a,
through R) and a line-line-ground fault (b, c joined, then R to earth) are ratios of linear forms in R:

    line-ground        I0 = I1 = I2 = E/(Z0 + Z1 + Z2 + 3R)
    line-line-ground   D = Z1 Z2 + (Z1 + Z2)(Z0 + 3R)
                       I1 = E (Z2 + Z0 + 3R)/D,  I2 = −E (Z0 + 3R)/D,  I0 = −E Z2/D

P. M. Anderson, "Analysis of Faulted Power Systems", ch. 3 (from memory); IEC 60909-0 clause 4.2 with R = 0.
Whatever is linear in them is such a ratio too, so that where it falls to a pickup is the root of a
quadratic. The last axis of a form holds its constant and its share of R.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Reals = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]

EARTH_KINDS = ("line-ground", "line-line-ground")
_CLOSE = 1e-9


def sequence_forms(z0: Complex, z1: Complex, z2: Complex) -> tuple[Complex, Complex]:
    """Tops (kinds, 3, n, 2) of the sequence currents into the fault per volt of E, bottoms (kinds, n, 2).

    Ohm, arrays (n,); kinds as in ``EARTH_KINDS``. An infinite ``z0`` is no path to earth: no I0, and of
    the two-phase fault what a line-line fault draws.
    """
    z0, z1, z2 = np.broadcast_arrays(*(np.asarray(z, complex) for z in (z0, z1, z2)))
    path = np.isfinite(z0)
    home = np.where(path, z0, 0)
    top = np.zeros((2, 3, len(z0), 2), complex)
    bottom = np.zeros((2, len(z0), 2), complex)
    top[0, :, :, 0] = np.where(path, 1, 0)
    bottom[0, :, 0] = np.where(path, home + z1 + z2, 1)
    bottom[0, :, 1] = np.where(path, 3, 0)
    top[1, 0, :, 0] = np.where(path, -z2, 0)
    top[1, 1, :, 0] = np.where(path, z2 + home, 1)
    top[1, 1, :, 1] = np.where(path, 3, 0)
    top[1, 2, :, 0] = np.where(path, -home, -1)
    top[1, 2, :, 1] = np.where(path, -3, 0)
    bottom[1, :, 0] = np.where(path, z1 * z2 + (z1 + z2) * home, z1 + z2)
    bottom[1, :, 1] = np.where(path, 3 * (z1 + z2), 0)
    return top, bottom


def displacement_without_path(z1: Complex, z2: Complex) -> Complex:
    """V0 (kinds, n) at the place per volt of E where nothing joins it to earth: −E, and E Z2/(Z1 + Z2)."""
    z1, z2 = np.asarray(z1, complex), np.asarray(z2, complex)
    return np.stack([-np.ones(z1.shape, complex), z2 / (z1 + z2)])


def at_resistance(top: Complex, bottom: Complex, resistance: npt.ArrayLike) -> Complex:
    """Values (..., r) of forms (..., 2) over ``bottom`` (..., 2) for each ``resistance`` (r,) ohm."""
    r = np.asarray(resistance, float)
    value = top[..., :1] + top[..., 1:] * r
    return np.asarray(value / (bottom[..., :1] + bottom[..., 1:] * r))


def greatest_resistance(
    top: Complex, bottom: Complex, pickup: float, towards: Complex | None = None
) -> Reals:
    """The greatest R (ohm) with |top/bottom| not below ``pickup``; NaN where not even R = 0 ... reaches it.

    Forms (..., 2). With ``towards`` (..., 2), a form over the same bottom, only where the two are at most
    90 degrees apart. Infinite where no R is too great. The set of such R is closed, so that its greatest
    member, if it has one, is a root of one of the two quadratics.
    """
    conditions = [_level(top, bottom, pickup)]
    if towards is not None:
        conditions.append(_aligned(top, towards))
    best = np.full(top.shape[:-1], np.nan)
    tries = [np.zeros(best.shape)]
    for condition in conditions:
        tries += _roots(condition)
    for at in tries:
        r = np.where(np.isfinite(at) & (at > 0), at, 0)
        met = np.ones(best.shape, bool)
        for a, b, c in conditions:
            size = np.abs(a) * r**2 + np.abs(b) * r + np.abs(c)
            met &= (a * r + b) * r + c >= -_CLOSE * size
        best = np.where(met, np.fmax(best, r), best)
    endless = np.ones(best.shape, bool)
    for a, b, c in conditions:
        endless &= (a > 0) | ((a == 0) & ((b > 0) | ((b == 0) & (c >= 0))))
    best = np.where(endless, np.inf, best)
    if towards is not None:
        never = ~(np.abs(towards).max(axis=-1) > 0)
        best = np.where(never, np.nan, best)
    return np.where(np.abs(top).max(axis=-1) > 0, best, np.nan)


Quadratic = tuple[Reals, Reals, Reals]


def _level(top: Complex, bottom: Complex, pickup: float) -> Quadratic:
    """|top|² − pickup² |bottom|², highest power first."""
    n0, n1 = top[..., 0], top[..., 1]
    d0, d1 = bottom[..., 0], bottom[..., 1]
    p2 = pickup**2
    a = np.abs(n1) ** 2 - p2 * np.abs(d1) ** 2
    b = 2 * (n0 * n1.conj()).real - 2 * p2 * (d0 * d1.conj()).real
    return a, b, np.abs(n0) ** 2 - p2 * np.abs(d0) ** 2


def _aligned(top: Complex, towards: Complex) -> Quadratic:
    """Re(top towards*), highest power first."""
    n0, n1 = top[..., 0], top[..., 1]
    t0, t1 = towards[..., 0].conj(), towards[..., 1].conj()
    return (n1 * t1).real, (n0 * t1 + n1 * t0).real, (n0 * t0).real


def _roots(quadratic: Quadratic) -> tuple[Reals, Reals]:
    """Both real roots, NaN where there are none; without loss of digits."""
    a, b, c = quadratic
    with np.errstate(divide="ignore", invalid="ignore"):
        root = np.sqrt(b * b - 4 * a * c)
        q = -(b + np.where(b < 0, -root, root)) / 2
        return np.asarray(q / a), np.asarray(c / q)
