"""Operate times of overcurrent and voltage relays: inverse curves, definite time, instant stage.

t = M (k/(m^α − 1) + c), with m the multiple of the pickup and M the multiplier (time multiplier, time
dial): IEC 60255-151:2009, curves A to F, and IEEE C37.112-1996, whose A, B and p are k, c and α here. All
constants from memory. The long-time inverse curve is in neither; it is common practice (BS 142). A
short-time inverse curve is left out: no published standard of it is known to us.

IEC 60255-151 declares accuracy over its effective range alone, ``EFFECTIVE_RANGE``: 2 to 20 times the
pickup (from memory). Just above the pickup, up to the threshold that the maker declares (G_T), a relay need
not operate at all; from G_D on, often 20 times, its time stays that of G_D. G_D is the maker's: state it as
``saturation``, or the formula goes on as it stands.
"""

from __future__ import annotations

from math import inf

import msgspec
import numpy as np
import numpy.typing as npt

Reals = npt.NDArray[np.float64]

EFFECTIVE_RANGE = (2.0, 20.0)
"""Multiples of the pickup between which IEC 60255-151 declares the accuracy of a time."""

# Upper end of a range of multiples, and how many times the assigned error is allowed there.
_ERROR_STEPS = ((5.0, 2.5), (10.0, 1.5), (inf, 1.0))


class Curve(msgspec.Struct, frozen=True):
    """Constants of a curve: ``k`` and ``c`` in s, ``alpha`` a number, ``reset`` in s where published."""

    name: str
    k: float
    alpha: float
    c: float = 0.0
    reset: float | None = None
    source: str = ""


_IEC, _IEEE = "IEC 60255-151:2009, curve", "IEEE C37.112-1996; IEC 60255-151:2009, curve"
CURVES = {
    curve.name: curve
    for curve in (
        Curve("IEC standard inverse", 0.14, 0.02, source=f"{_IEC} A"),
        Curve("IEC very inverse", 13.5, 1.0, source=f"{_IEC} B"),
        Curve("IEC extremely inverse", 80.0, 2.0, source=f"{_IEC} C"),
        Curve("IEC long-time inverse", 120.0, 1.0, source="common practice (BS 142)"),
        Curve("IEEE moderately inverse", 0.0515, 0.02, 0.1140, 4.85, f"{_IEEE} D"),
        Curve("IEEE very inverse", 19.61, 2.0, 0.491, 21.6, f"{_IEEE} E"),
        Curve("IEEE extremely inverse", 28.2, 2.0, 0.1217, 29.1, f"{_IEEE} F"),
        Curve("definite", 0.0, 1.0, 1.0, source="independent time of IEC 60255-151:2009"),
    )
}
"""By their names in the case file. ``definite`` takes its delay in s for a multiplier."""


def operate_time(
    curve: str,
    multiple: npt.ArrayLike,
    multiplier: npt.ArrayLike,
    *,
    least: npt.ArrayLike = 0.0,
    instant: npt.ArrayLike = inf,
    instant_delay: npt.ArrayLike = 0.0,
    saturation: float = inf,
) -> Reals:
    """Operate time (s), infinite at and below the pickup; all arrays are broadcast.

    ``multiple`` of the pickup, a number; ``multiplier`` a number, of ``definite`` its delay in s. The
    curve gives no time below ``least`` (s). Above ``instant`` (a multiple of the same pickup) the time
    is ``instant_delay`` (s) where that is shorter. A multiple above ``saturation`` counts as that.

    Raises KeyError for a curve that is not in ``CURVES``.
    """
    m = np.asarray(multiple, float)
    with np.errstate(invalid="ignore"):  # a delay of 0 s below the pickup
        curved = np.where(m > 1, _base_time(curve, m, saturation) * np.asarray(multiplier, float), inf)
    time = np.maximum(curved, least)
    fast = np.where(m > np.asarray(instant, float), instant_delay, inf)
    return np.asarray(np.where(np.isnan(m), np.nan, np.minimum(time, fast)))


def multiplier_for(
    curve: str,
    multiple: npt.ArrayLike,
    time: npt.ArrayLike,
    *,
    least: npt.ArrayLike = 0.0,
    instant: npt.ArrayLike = inf,
    instant_delay: npt.ArrayLike = 0.0,
    saturation: float = inf,
) -> Reals:
    """The multiplier that makes ``operate_time`` give ``time`` (s); NaN where none does.

    None does at or below the pickup, for a time shorter than ``least``, or above ``instant`` for a
    time longer than ``instant_delay``. For a time of just ``least`` it is the greatest of those that do.
    """
    m, wanted = np.asarray(multiple, float), np.asarray(time, float)
    base = _base_time(curve, m, saturation)
    fast = np.where(m > np.asarray(instant, float), instant_delay, inf)
    possible = np.isfinite(base) & (wanted > 0) & (wanted >= least) & (wanted <= fast)
    return np.where(possible, wanted / base, np.nan)


def multiple_for(curve: str, time: float, multiplier: float, *, least: float = 0.0) -> float:
    """The multiple of the pickup from which ``operate_time`` is no longer than ``time`` (s).

    m = (k/(t/M − c) + 1)^(1/α), the curve solved for m; 1 where every operation is as fast, infinite where
    none is. Raises KeyError for an unknown curve.
    """
    constants = CURVES[curve]
    if least > time:
        return inf
    if constants.k == 0:
        return 1.0 if multiplier * constants.c <= time else inf
    left = time / multiplier - constants.c if multiplier else inf
    return float((constants.k / left + 1) ** (1 / constants.alpha)) if left > 0 else inf


def reset_time(curve: str, multiple: npt.ArrayLike, multiplier: npt.ArrayLike) -> Reals:
    """Reset time (s) from full travel, t = M t_r/(1 − m²): IEEE C37.112-1996; infinite from the pickup up.

    Raises KeyError for an unknown curve, ValueError for one without published reset constants.
    """
    reset = CURVES[curve].reset
    if reset is None:
        raise ValueError(f"no reset constant is published for {curve}")
    m = np.asarray(multiple, float)
    with np.errstate(divide="ignore", over="ignore"):
        time = reset / (1 - m**2) * np.asarray(multiplier, float)
    return np.where(m >= 1, inf, time)


def in_effective_range(multiple: npt.ArrayLike) -> npt.NDArray[np.bool_]:
    """Whether IEC 60255-151 declares the accuracy of an inverse time at ``multiple`` of the pickup."""
    low, high = EFFECTIVE_RANGE
    m = np.asarray(multiple, float)
    return np.asarray((m >= low) & (m <= high))


def error_factor(multiple: npt.ArrayLike) -> Reals:
    """How many times the assigned error an inverse time may be off: 2.5 from 2, 1.5 from 5, 1 from 10.

    At those multiples of the pickup: IEC 60255-151:2009, limiting error as a multiple of the assigned
    one (from memory). NaN below the effective range, where nothing is declared.
    """
    m = np.asarray(multiple, float)
    factor = np.full(m.shape, np.nan)
    for top, value in reversed(_ERROR_STEPS):
        factor = np.where((m >= EFFECTIVE_RANGE[0]) & (m < top), value, factor)
    return np.asarray(factor)


def _base_time(curve: str, m: Reals, saturation: float) -> Reals:
    """Time (s) at a multiplier of 1."""
    constants = CURVES[curve]
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        excess = np.expm1(constants.alpha * np.log(np.minimum(m, saturation)))
        time = constants.k / excess + constants.c
    return np.where(m > 1, time, np.where(np.isnan(m), np.nan, inf))
