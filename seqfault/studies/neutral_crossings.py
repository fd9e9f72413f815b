"""Where what a neutral's ohms give crosses a level: roots of quadratics, none missed.

Every current and voltage is a ratio of two linear forms in the ohms, so that its square crosses a level
where a quadratic has its roots. Converters, whose feed depends on the ohms, are the exception; there the
crossings are bracketed and bisected.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

import msgspec
import numpy as np

from seqfault.faults.neutral_ports import Form
from seqfault.model.elements import Bools, Complex, Floats
from seqfault.studies.neutral_states import OPEN, NeutralState

AT_END = 1e-12
"""Relative tolerance within which solid or open has the level asked for."""


class Reach(msgspec.Struct, frozen=True):
    """Least and greatest of a quantity over all ohms of one state, and the ohms that give them."""

    state: str
    least: float
    least_ohms: float
    greatest: float
    greatest_ohms: float


def values(state: NeutralState, direction: complex, what: str, ohms: Floats) -> Floats:
    """Line-ground 3I0 (A), earth-fault factor, or what a relay sees, for ``ohms`` (n,), infinite open."""
    z = np.full(len(ohms), OPEN)
    z[np.isfinite(ohms)] = ohms[np.isfinite(ohms)] * direction
    if what not in ("earth", "sound"):
        return state.seen(what, z)
    faults = state.faults(z)
    return np.asarray(np.abs(faults.earth[0]) if what == "earth" else faults.factor.max(axis=0))


def _forms(state: NeutralState, what: str) -> Iterable[tuple[Form, float]]:
    """Forms whose size is ``what``, and the factor from them to it."""
    one, two = state.ports.forms
    if what == "earth":
        model = state.network.model
        nominal = float(model.nominal[state.ports.place])
        ampere = model.base_power / (np.sqrt(3) * nominal)
        return [(one.sequence[0], 3 * ampere * abs(state.ports.before))]
    if what != "sound":
        relay = next((r for r in state.relays if r.view.name == what), None)
        return [(form, relay.scale * abs(state.ports.before)) for form in relay.forms] if relay else []
    return [(form, 1.0) for form in (*one.sound, *two.sound)]


def crossings(state: NeutralState, direction: complex, what: str, level: float) -> list[float]:
    """Ohms, 0 and infinity among them, at which ``what`` has the value ``level``."""
    ends = np.array([0.0, np.inf])
    at_ends = np.abs(values(state, direction, what, ends) - level) <= AT_END * level
    out = ends[at_ends].tolist()
    if state.ports.model.converters.names:
        return sorted({*out, *_bisected(lambda x: values(state, direction, what, x) - level)})
    base = state.ports.device_base
    for form, factor in _forms(state, what):
        out += [root * base for root in _positive_roots(_square(form, direction, factor, level))]
    return sorted({ohms for ohms in out if not _is_end(state, direction, what, level, ohms, at_ends)})


def _is_end(
    state: NeutralState, direction: complex, what: str, level: float, ohms: float, at_ends: Bools
) -> bool:
    """Whether ``ohms`` is an end that has the level too, but for rounding: no value lies between them."""
    if ohms == 0 or np.isinf(ohms):
        return False
    between = np.array([ohms / 10, ohms * 10])
    same = np.abs(values(state, direction, what, between) - level) <= AT_END * level
    return bool((same & at_ends).any())


def _square(form: Form, direction: complex, factor: float, level: float) -> Floats:
    """|factor · form|² − level² as a quadratic in the per-unit ohms x, lowest power first."""

    def size(pair: Complex) -> Floats:
        fixed, sliding = complex(pair[0]), complex(pair[1]) * direction
        return np.array([abs(fixed) ** 2, 2 * (fixed.conjugate() * sliding).real, abs(sliding) ** 2])

    return factor**2 * size(form.top) - level**2 * size(form.bottom)


def _positive_roots(c: Floats) -> list[float]:
    """Positive real roots of c₀ + c₁ x + c₂ x², each by the form of the formula that does not cancel."""
    c0, c1, c2 = (float(v) for v in c)
    square = c1 * c1 - 4 * c0 * c2
    if square < 0:
        return []
    q = -0.5 * (c1 + np.copysign(np.sqrt(square), c1))
    roots = [q / c2 if c2 else 0.0, c0 / q if q else 0.0]
    return sorted({root for root in map(float, roots) if 0 < root < np.inf})


def _bisected(f: Callable[[Floats], Floats]) -> list[float]:
    """Roots of ``f`` between 1e-3 and 1e7 ohm by bracketing on a logarithmic grid."""
    x = np.geomspace(1e-3, 1e7, 241)
    y = f(x)
    out = []
    for k in np.flatnonzero(np.sign(y[:-1]) * np.sign(y[1:]) < 0).tolist():
        low, high, sign = x[k], x[k + 1], np.sign(y[k])
        for _ in range(60):
            middle = np.sqrt(low * high)
            if np.sign(f(np.array([middle]))[0]) == sign:
                low = middle
            else:
                high = middle
        out.append(float(np.sqrt(low * high)))
    return out


def reach_of(state: NeutralState, direction: complex) -> Reach:
    """What the line-ground current can be; a ratio of two quadratics has at most two turning points."""
    points = [0.0, np.inf]
    ((form, _),) = _forms(state, "earth")
    top, bottom = (_square(Form(pair, pair * 0), direction, 1.0, 0.0) for pair in (form.top, form.bottom))
    turning = np.array([
        top[1] * bottom[0] - top[0] * bottom[1],
        2 * (top[2] * bottom[0] - top[0] * bottom[2]),
        top[2] * bottom[1] - top[1] * bottom[2],
    ])  # fmt: skip
    points += [root * state.ports.device_base for root in _positive_roots(turning)]
    if state.ports.model.converters.names:
        points += np.geomspace(1e-3, 1e7, 121).tolist()
    ohms = np.array(points)
    size = values(state, direction, "earth", ohms)
    low, high = int(size.argmin()), int(size.argmax())
    return Reach(state.name, float(size[low]), float(ohms[low]), float(size[high]), float(ohms[high]))
