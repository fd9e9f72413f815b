"""The ohms of a neutral that a wanted earth-fault current, or a limit of the sound phases, asks for.

Nothing is searched for: where a condition is met with equality is found in closed form
(``neutral_crossings``), and between those ohms it holds or does not.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterator, Sequence
from itertools import pairwise

import msgspec
import numpy as np

from seqfault.errors import NoAnswerError, RequestError, quoted
from seqfault.studies.neutral_crossings import Reach, crossings, reach_of, values
from seqfault.studies.neutral_states import NeutralState, NeutralStates

MET = 1e-9
"""Relative tolerance within which a condition counts as met."""
SHOWN = 6
FLAT = 1e-9
"""A current that changes by less than this share over all ohms does not depend on the neutral."""


class Target(msgspec.Struct, frozen=True, eq=False):
    """The ohms asked for.

    ``current`` A, the line-ground current wanted, or None; ``limit`` the earth-fault factor allowed, or
    None; ``see`` relays and the multiples of their pickup wanted; ``ohms`` what to put in, in the
    direction of the device; ``binds`` ``current``, ``sound-phase`` or ``relay NAME``; ``met`` False where
    the conditions leave no room for the current, and ``ohms`` are the nearest that keep them; ``state``
    that governs; ``for_current`` the ohms of each state that give the current there, nan where none do;
    ``others`` further ohms that meet everything; ``reach`` what any ohms could give in each state.
    """

    current: float | None
    limit: float | None
    see: tuple[tuple[str, float], ...]
    ohms: float
    binds: str
    met: bool
    state: str
    for_current: tuple[float, ...]
    others: tuple[float, ...]
    reach: tuple[Reach, ...]


def find_target(
    neutral: NeutralStates,
    current: float | None,
    limit: float | None,
    see: Sequence[tuple[str, float]] = (),
) -> Target:
    """The ohms that make ``current`` (A) the greatest line-ground current (3I0) over the states.

    ``limit`` is the highest earth-fault factor allowed, over both kinds and all states; ``see`` names
    relays and how many times their pickup they must see at the least. Without a current the greatest ohms
    that keep all of it are given. Raises ``NoAnswerError`` where the current is out of reach or nothing
    keeps the conditions, and says what can be had; ``RequestError`` for a relay that is none.
    """
    reach = tuple(reach_of(state, neutral.direction) for state in neutral.states)
    conditions = _conditions(neutral, limit, see)
    if current is None:
        assert conditions
        ohms = max(end for pair in _keeping(neutral, conditions) for end in pair)
        binding, name = _binding(neutral, conditions, ohms)
        return Target(None, limit, tuple(see), ohms, binding, True, name, (), (), reach)
    roots = [crossings(state, neutral.direction, "earth", current) for state in neutral.states]
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
    kept = [(ohms, k) for ohms, k in fitting if _kept(neutral, conditions, ohms)]
    if not kept:
        ohms = _nearest(_keeping(neutral, conditions), fitting[0][0])
        binding, name = _binding(neutral, conditions, ohms)
        return Target(current, limit, tuple(see), ohms, binding, False, name, own, (), reach)
    ohms, k = kept[0]
    more = tuple(other for other, _ in kept[1:] if abs(other - ohms) > MET * ohms)
    return Target(
        current, limit, tuple(see), ohms, "current", True, neutral.states[k].name, own, more, reach
    )


class Condition(msgspec.Struct, frozen=True):
    """``what`` (``sound``, or the name of a relay) stays at or below ``level``, or above it."""

    what: str
    level: float
    below: bool

    @property
    def name(self) -> str:
        """As answers name it."""
        return "sound-phase" if self.below else f"relay {self.what}"


def _conditions(
    neutral: NeutralStates, limit: float | None, see: Sequence[tuple[str, float]]
) -> tuple[Condition, ...]:
    out = [] if limit is None else [Condition("sound", limit, True)]
    views = {view.name: view for view in neutral.relays}
    for relay, times in see:
        if relay not in views:
            near = difflib.get_close_matches(relay, views, n=1, cutoff=0.5)
            known = f"did you mean {quoted(near[0])}?" if near else ", ".join(map(quoted, views)) or "none"
            raise RequestError(f"relay {quoted(relay)}: no earth-fault relay has this name; {known}")
        if not any(r.view.name == relay for state in neutral.states for r in state.relays):
            raise RequestError(f"relay {quoted(relay)}: it is out of service in every state asked for")
        out.append(Condition(relay, times * views[relay].pickup, False))
    return tuple(out)


def _extreme(neutral: NeutralStates, condition: Condition, ohms: float) -> tuple[float, str]:
    """The value that matters of ``condition`` with ``ohms``, and the state that has it."""
    at = np.array([ohms])
    here = [s for s in neutral.states if condition.below or _has(s, condition.what)]
    found = [float(values(s, neutral.direction, condition.what, at)[0]) for s in here]
    k = int(np.argmax(found) if condition.below else np.argmin(found))
    return found[k], here[k].name


def _has(state: NeutralState, relay: str) -> bool:
    return any(r.view.name == relay for r in state.relays)


def _holds(neutral: NeutralStates, condition: Condition, ohms: float) -> bool:
    value, _ = _extreme(neutral, condition, ohms)
    if condition.below:
        return value <= condition.level * (1 + MET)
    return value >= condition.level * (1 - MET)


def _kept(neutral: NeutralStates, conditions: Sequence[Condition], ohms: float) -> bool:
    return all(_holds(neutral, condition, ohms) for condition in conditions)


def _binding(neutral: NeutralStates, conditions: Sequence[Condition], ohms: float) -> tuple[str, str]:
    """The condition that stands nearest to its limit with ``ohms``, and the state that has it."""

    def room(condition: Condition) -> float:
        ratio = _extreme(neutral, condition, ohms)[0] / condition.level
        return float(abs(np.log(max(ratio, 1e-300))))

    nearest = min(conditions, key=room)
    return nearest.name, _extreme(neutral, nearest, ohms)[1]


def _greatest_current(neutral: NeutralStates, ohms: float) -> float:
    at = np.array([ohms])
    return max(float(values(s, neutral.direction, "earth", at)[0]) for s in neutral.states)


def _keeping(neutral: NeutralStates, conditions: Sequence[Condition]) -> list[tuple[float, float]]:
    """Ranges of ohms that keep all ``conditions`` in every state."""
    breaks = {0.0, float("inf")}
    for condition in conditions:
        for state in neutral.states:
            breaks.update(crossings(state, neutral.direction, condition.what, condition.level))
    ends = sorted(breaks)
    ranges: list[tuple[float, float]] = []
    for low, high in pairwise(ends):
        inside = 2 * low + 1 if np.isinf(high) else 0.5 * (low + high)
        if _kept(neutral, conditions, inside):
            if ranges and ranges[-1][1] == low:
                ranges[-1] = (ranges[-1][0], high)
            else:
                ranges.append((low, high))
    if not ranges:
        raise NoAnswerError("\n".join(_impossible(neutral, conditions)))
    return ranges


def _impossible(neutral: NeutralStates, conditions: Sequence[Condition]) -> Iterator[str]:
    """What to say where no ohms keep all conditions: the best each can have."""
    tried = np.concatenate([[0.0], np.geomspace(1e-3, 1e7, 401), [np.inf]])
    if len(conditions) > 1:
        yield f"no {neutral.device} keeps all conditions together; each alone:"
    for c in conditions:
        here = [s for s in neutral.states if c.below or _has(s, c.what)]
        every = np.stack([values(s, neutral.direction, c.what, tried) for s in here])
        best = every.max(axis=0) if c.below else every.min(axis=0)
        k = int(best.argmin() if c.below else best.argmax())
        least, with_ohms = f"{best[k]:.4g}", _ohms(float(tried[k]))
        if c.below:
            fails = best[k] > c.level * (1 + MET)
            text = f"no {neutral.device} keeps that; the least is" if fails else "the least is"
            what = f"sound phases below {c.level:g} times the phase voltage"
            yield f"{what}: {text} {least}, with {with_ohms}"
        else:
            fails = best[k] < c.level * (1 - MET)
            text = f"no {neutral.device} gives that; the most is" if fails else "the most is"
            yield f"relay {c.what} seeing {c.level:.4g} A: {text} {least} A, with {with_ohms}"


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
