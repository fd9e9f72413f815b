"""The ohms of a neutral that a wanted earth-fault current, or a limit of the sound phases, asks for.

Every current and voltage is a ratio of two linear forms in the ohms, so that its square crosses a level
where a quadratic has its roots: nothing is searched for, and no second root is missed. Converters, whose
feed depends on the ohms, are the exception; there the crossings are bracketed and bisected.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from itertools import pairwise

import msgspec
import numpy as np

from seqfault.errors import NoAnswerError
from seqfault.faults.neutral_ports import Form
from seqfault.model.elements import Bools, Complex, Floats
from seqfault.studies.neutral_states import OPEN, NeutralState, NeutralStates

MET = 1e-9
"""Relative tolerance within which a condition counts as met."""
AT_END = 1e-12
"""Relative tolerance within which solid or open has the level asked for."""
SHOWN = 6
FLAT = 1e-9
"""A current that changes by less than this share over all ohms does not depend on the neutral."""


class Reach(msgspec.Struct, frozen=True):
    """Least and greatest of a quantity over all ohms of one state, and the ohms that give them."""

    state: str
    least: float
    least_ohms: float
    greatest: float
    greatest_ohms: float


class Target(msgspec.Struct, frozen=True, eq=False):
    """The ohms asked for.

    ``current`` A, the line-ground current wanted, or None; ``limit`` the earth-fault factor allowed, or
    None; ``ohms`` what to put in, in the direction of the device; ``binds`` ``current`` or
    ``sound-phase``; ``met`` False where the limit leaves no room for the current, and ``ohms`` are the
    nearest that keep the limit; ``state`` that governs; ``for_current`` the ohms of each state that give
    the current there, nan where none do; ``others`` further ohms that meet everything; ``reach`` what
    any ohms could give in each state.
    """

    current: float | None
    limit: float | None
    ohms: float
    binds: str
    met: bool
    state: str
    for_current: tuple[float, ...]
    others: tuple[float, ...]
    reach: tuple[Reach, ...]


def find_target(neutral: NeutralStates, current: float | None, limit: float | None) -> Target:
    """The ohms that make ``current`` (A) the greatest line-ground current (3I0) over the states.

    ``limit`` is the highest earth-fault factor allowed, over both kinds and all states. Without a
    current the greatest ohms that keep the limit are given. Raises ``NoAnswerError`` where the
    current is out of reach or nothing keeps the limit, and says what can be had.
    """
    reach = tuple(_reach(state, neutral.direction) for state in neutral.states)
    if current is None:
        assert limit is not None
        ends = _keeping(neutral, limit)
        ohms = max(end for pair in ends for end in pair)
        _, name = _sound(neutral, ohms)
        return Target(None, limit, ohms, "sound-phase", True, name, (), (), reach)
    roots = [_crossings(state, neutral.direction, "earth", current) for state in neutral.states]
    if all(r.greatest - r.least <= FLAT * r.greatest for r in reach):
        raise NoAnswerError(
            f"the neutral has no say in earth faults at this place: they draw {_range(reach)} whatever its"
            " ohms"
        )
    fitting = sorted(
        (ohms, k)
        for k, found in enumerate(roots)
        for ohms in found
        if _greatest_current(neutral, ohms) <= current * (1 + MET)
    )
    if not fitting:
        raise NoAnswerError(_out_of_reach(current, reach))
    own = tuple(min(found, default=float("nan")) for found in roots)
    if limit is not None:
        kept = [(ohms, k) for ohms, k in fitting if _sound(neutral, ohms)[0] <= limit * (1 + MET)]
        if not kept:
            ohms = _nearest(_keeping(neutral, limit), fitting[0][0])
            _, name = _sound(neutral, ohms)
            return Target(current, limit, ohms, "sound-phase", False, name, own, (), reach)
        fitting = kept
    ohms, k = fitting[0]
    more = tuple(other for other, _ in fitting[1:] if abs(other - ohms) > MET * ohms)
    return Target(current, limit, ohms, "current", True, neutral.states[k].name, own, more, reach)


def _values(state: NeutralState, direction: complex, what: str, ohms: Floats) -> Floats:
    """Line-ground 3I0 (A), or the earth-fault factor, for real ``ohms`` (n,), infinite open."""
    z = np.full(len(ohms), OPEN)
    z[np.isfinite(ohms)] = ohms[np.isfinite(ohms)] * direction
    faults = state.faults(z)
    return np.asarray(np.abs(faults.earth[0]) if what == "earth" else faults.factor.max(axis=0))


def _greatest_current(neutral: NeutralStates, ohms: float) -> float:
    at = np.array([ohms])
    return max(float(_values(s, neutral.direction, "earth", at)[0]) for s in neutral.states)


def _sound(neutral: NeutralStates, ohms: float) -> tuple[float, str]:
    """Highest earth-fault factor with ``ohms``, and the state that has it."""
    at = np.array([ohms])
    values = [float(_values(s, neutral.direction, "sound", at)[0]) for s in neutral.states]
    k = int(np.argmax(values))
    return values[k], neutral.states[k].name


def _forms(state: NeutralState, what: str) -> Iterable[tuple[Form, float]]:
    """Forms whose size is ``what``, and the factor from them to it."""
    one, two = state.ports.forms
    if what == "earth":
        model = state.network.model
        nominal = float(model.nominal[state.ports.place])
        ampere = model.base_power / (np.sqrt(3) * nominal)
        return [(one.sequence[0], 3 * ampere * abs(state.ports.before))]
    return [(form, 1.0) for form in (*one.sound, *two.sound)]


def _crossings(state: NeutralState, direction: complex, what: str, level: float) -> list[float]:
    """Ohms, 0 and infinity among them, at which ``what`` has the value ``level``."""
    ends = np.array([0.0, np.inf])
    at_ends = np.abs(_values(state, direction, what, ends) - level) <= AT_END * level
    out = ends[at_ends].tolist()
    if state.ports.model.converters.names:
        return sorted({*out, *_bisected(lambda x: _values(state, direction, what, x) - level)})
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
    same = np.abs(_values(state, direction, what, between) - level) <= AT_END * level
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


def _reach(state: NeutralState, direction: complex) -> Reach:
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
    values = _values(state, direction, "earth", ohms)
    low, high = int(values.argmin()), int(values.argmax())
    return Reach(state.name, float(values[low]), float(ohms[low]), float(values[high]), float(ohms[high]))


def _keeping(neutral: NeutralStates, limit: float) -> list[tuple[float, float]]:
    """Ranges of ohms that keep the earth-fault factor at or below ``limit`` in every state."""
    breaks = {0.0, float("inf")}
    for state in neutral.states:
        breaks.update(_crossings(state, neutral.direction, "sound", limit))
    ends = sorted(breaks)
    ranges: list[tuple[float, float]] = []
    for low, high in pairwise(ends):
        inside = 2 * low + 1 if np.isinf(high) else 0.5 * (low + high)
        if _sound(neutral, inside)[0] <= limit * (1 + MET):
            if ranges and ranges[-1][1] == low:
                ranges[-1] = (ranges[-1][0], high)
            else:
                ranges.append((low, high))
    if not ranges:
        tried = np.concatenate([[0.0], np.geomspace(1e-3, 1e7, 401), [np.inf]])
        per_state = [_values(s, neutral.direction, "sound", tried) for s in neutral.states]
        highest = np.stack(per_state).max(axis=0)
        k = int(highest.argmin())
        raise NoAnswerError(
            f"sound phases below {limit:g} times the phase voltage: no {neutral.device} keeps that; the"
            f" least is {highest[k]:.4g}, with {_ohms(float(tried[k]))}"
        )
    return ranges


def _nearest(ranges: list[tuple[float, float]], wanted: float) -> float:
    """The end of a range that stands nearest to ``wanted`` ohm in ratio."""
    ends = [end for pair in ranges for end in pair if np.isfinite(end)]
    return min(ends, key=lambda end: abs(np.log(max(end, 1e-6) / max(wanted, 1e-6))))


def _ohms(value: float) -> str:
    if value == 0:
        return "the star point solidly earthed"
    return "the neutral open" if np.isinf(value) else f"{value:.4g} ohm"


def _range(reach: tuple[Reach, ...]) -> str:
    least, most = min(r.least for r in reach), max(r.greatest for r in reach)
    return f"{most:.4g} A" if most - least <= 1e-6 * most else f"{least:.4g} to {most:.4g} A"


def _out_of_reach(current: float, reach: tuple[Reach, ...]) -> str:
    """What to say where no ohms make ``current`` the greatest of all states."""
    floor = max(reach, key=lambda r: r.least)
    top = max(reach, key=lambda r: r.greatest)
    if current > top.greatest:
        why = f"even {_ohms(top.greatest_ohms)} lets no more than {top.greatest:.4g} A flow"
    else:
        why = f"state {floor.state} draws {floor.least:.4g} A even with {_ohms(floor.least_ohms)}"
    lines = [f"{current:.6g} A is out of reach of this neutral: {why}", "line-ground currents it can give:"]
    lines += [
        f"state {r.state}: from {r.least:.4g} A, {_ohms(r.least_ohms)}, to {r.greatest:.4g} A,"
        f" {_ohms(r.greatest_ohms)}"
        for r in reach[:SHOWN]
    ]
    if len(reach) > SHOWN:
        lines.append(f"and {len(reach) - SHOWN} states more")
    return "\n".join(lines)
