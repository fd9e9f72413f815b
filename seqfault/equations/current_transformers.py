"""Current transformers of the classes P and PX: ratios, accuracy limits, the error of a residual sum.

Formulas from IEC 61869-2:2012 and IEC TR 61869-100 (from memory), and common practice where so marked.
Steady state alone: no direct component, no remanence. Currents in A, primary unless said otherwise.
"""

from __future__ import annotations

from itertools import combinations
from math import inf
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

Reals = npt.NDArray[np.float64]

KNEE_SHARE = 0.8
"""Knee point as a share of the secondary limiting e.m.f. of a class P core (common practice)."""


def to_secondary(current: Any, primary: float, secondary: float) -> Any:
    """Secondary of a primary current (A) through a transformer rated ``primary``/``secondary`` (A)."""
    return current * secondary / primary


def to_primary(current: Any, primary: float, secondary: float) -> Any:
    """Primary of a secondary current (A) through a transformer rated ``primary``/``secondary`` (A)."""
    return current * primary / secondary


def burden_resistance(power: float, secondary: float) -> float:
    """Ohm of a burden stated in VA at the rated secondary current (A): R = S/I_sr²."""
    return power / secondary**2


def limit_factor_with(
    limit_factor: float, winding_resistance: float, rated_burden: float, connected_burden: float
) -> float:
    """Accuracy limit factor with the burden that is connected: ALF' = ALF (R_ct + R_n)/(R_ct + R_b).

    IEC TR 61869-100 (from memory); burdens and winding resistance in ohm, taken as resistances. Infinite
    where neither winding nor burden has any.
    """
    actual = winding_resistance + connected_burden
    return limit_factor * (winding_resistance + rated_burden) / actual if actual else inf


def limit_factor_of_knee(
    knee_point: float, secondary: float, winding_resistance: float, connected_burden: float
) -> float:
    """Multiple of the rated current at which a class PX core reaches its knee: U_k/(I_sr (R_ct + R_b)).

    ``knee_point`` in V, ``secondary`` the rated secondary current (A), ohm. IEC 61869-2 (from memory).
    """
    actual = secondary * (winding_resistance + connected_burden)
    return knee_point / actual if actual else inf


def limiting_emf(
    limit_factor: float, secondary: float, winding_resistance: float, rated_burden: float
) -> float:
    """Secondary limiting e.m.f. (V) of a class P core: ALF I_sr (R_ct + R_n), IEC 61869-2."""
    return limit_factor * secondary * (winding_resistance + rated_burden)


def knee_point_voltage(
    limit_factor: float,
    secondary: float,
    winding_resistance: float,
    rated_burden: float,
    share: float = KNEE_SHARE,
) -> float:
    """An estimate of the knee point (V) of a class P core: ``share`` of its limiting e.m.f.

    Common practice, 0.8 and more; a measured magnetising curve is better.
    """
    return share * limiting_emf(limit_factor, secondary, winding_resistance, rated_burden)


def error_at_limit(primary: float, limit_factor: float, composite_error: float) -> float:
    """Primary current (A) that the composite error stands for at the accuracy limit: ε ALF I_pr.

    ``composite_error`` a fraction, 0.05 for 5P and 0.10 for 10P (IEC 61869-2).
    """
    return composite_error * limit_factor * primary


def residual_error(
    currents: npt.ArrayLike,
    composite_error: float,
    *,
    limit: float = inf,
    transformers: Literal["alike", "any"] = "alike",
) -> Reals:
    """Greatest residual current (A, primary) that the errors of three transformers make of none.

    ``currents`` (3, ...) are the complex phase currents through the three, A; ``composite_error`` the
    fraction of its current that each may lose, 0.05 for 5P; ``limit`` the greatest current (A) that their
    class speaks of, ALF' I_pr. Infinite where a phase exceeds it: a saturated core has no bound.

    ``alike``: each error lies between none and ε I, all in the sense of an exciting current, as with
    three transformers of one make; the worst is one or two of them erring, max |ε Σ I_k| over any of the
    phases: ε I for a balanced current. ``any``: errors of any phase angle add up, ε Σ |I_k|: the bound of
    the class itself, 3 ε I. The method is the project's own, from the definition of composite error in
    IEC 61869-2; common practice takes ε I, and ε below the limit is taken as at the limit.
    """
    i = np.asarray(currents, complex)
    size = np.abs(i)
    if transformers == "any":
        worst = size.sum(axis=0)
    else:
        some = [list(group) for n in (1, 2, 3) for group in combinations(range(3), n)]
        worst = np.max([np.abs(i[group].sum(axis=0)) for group in some], axis=0)
    return np.where((size > limit).any(axis=0), inf, composite_error * worst)
