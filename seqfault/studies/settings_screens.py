"""What the metal screens of cables withstand against the time of the relays that act last."""

from __future__ import annotations

import math
from collections.abc import Iterator

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.equations.fault_resistance import at_resistance
from seqfault.model.elements import Floats, Ints
from seqfault.studies.relays import operate_times
from seqfault.studies.settings_states import State, States, breakers_of, inside, zone_of
from seqfault.studies.settings_verdicts import Situation, Verdict, doubted, judged, situation
from seqfault.studies.settings_view import View

SWEEP = 41


class Screen(msgspec.Struct, frozen=True):
    """Whether the screen of ``line`` outlasts the ``relay`` that acts last for it.

    Of the worst case: ``current`` A, all of 3I0 into the fault; ``time`` s until it ends, the breaker
    included; ``allowed`` s, in which it heats the screen as ``rated`` A do in one second.
    """

    relay: str
    line: str
    verdict: Verdict
    current: float
    time: float
    allowed: float
    rated: float
    limit: Situation | None
    reasons: tuple[str, ...]
    doubts: tuple[str, ...] = ()


def screens(study: States, doubts: dict[str, tuple[str, ...]]) -> Iterator[Screen]:
    """The verdicts on every line with a ``screen_current`` and each relay that backs up others there.

    The adiabatic law I²t (IEC 60949 clause 3), which is on the safe side, and the whole earth current in
    the screen of the faulted cable; where no relay backs up others on the line, those that protect it.
    """
    for line in dict.fromkeys(name for state in study.states for name in state.case.lines):
        if not any(_rated(state, line) for state in study.states):
            continue
        zones = {n: zone_of(n, study.relays) for n, relay in study.relays.items() if not relay.out}
        behind = [n for n, zone in zones.items() if line in zone.backs_up]
        own = [n for n, zone in zones.items() if line in zone.protects]
        for name in behind or own:
            yield _screen(study, name, line, doubts.get(name, ()))


def _rated(state: State, line: str) -> float:
    """A that the screen carries for a second, 0 where none is stated or the line is out of service."""
    record = state.case.lines.get(line)
    if record is None or record.out or record.screen_current is None:
        return 0.0
    return float(record.screen_current.value.real)


def _screen(study: States, name: str, line: str, doubts: tuple[str, ...]) -> Screen:
    demands = study.states[0].protection.demands
    ohms = np.unique([0.0, *np.linspace(0, max(demands.fault_resistances), SWEEP)])
    worst: tuple[float, float, float, float, Situation] | None = None
    unset = False
    for state in study.states:
        view, rated = state.views.get(name), _rated(state, line)
        if view is None or not rated:
            continue
        which = inside(view, frozenset([line]), breakers_of(name, study.relays))
        if not which.any():
            continue
        if not view.relay.complete:
            unset = True
            continue
        into = replace(view, top=3 * state.forms.current[:, :, :1], towards=None).only(which)
        view = view.only(which)
        measured, machine = view.seen(ohms)
        current = _into(into, ohms, machine)
        time = operate_times(view.relay, measured) + view.relay.breaker_time
        heat = np.where(current > 0, (current / rated) ** 2, 0) * np.where(current > 0, time, 0)
        case, k = (int(x) for x in np.unravel_index(int(heat.argmax()), heat.shape))
        if worst is None or heat[case, k] > worst[0]:
            at = situation(view, case, float(ohms[k]), int(machine[case, k]))
            worst = (float(heat[case, k]), float(current[case, k]), float(time[case, k]), rated, at)
    return _told(name, line, worst, demands.tight, unset, doubts)


def _into(view: View, ohms: Floats, machine: Ints) -> Floats:
    """A into the fault (n, r), with the reactances ``machine`` (n, r)."""
    size = np.abs(at_resistance(view.top, view.bottom[:, :, None], ohms))[:, :, 0]
    return np.asarray(np.take_along_axis(size, machine[None], axis=0)[0])


def _told(
    name: str,
    line: str,
    worst: tuple[float, float, float, float, Situation] | None,
    tight: float,
    unset: bool,
    doubts: tuple[str, ...],
) -> Screen:
    if unset or worst is None:
        reason = "a setting of the relay is still open" if unset else "the relay sees no fault of this line"
        return Screen(name, line, "not proven", *(math.nan,) * 4, None, (reason,), doubts)
    _, current, time, rated, limit = worst
    allowed = (rated / current) ** 2 if current else math.inf
    ratio = allowed / time if math.isfinite(time) else 0.0
    return Screen(
        relay=name,
        line=line,
        verdict=doubted(judged(ratio, 1.0, tight), doubts),
        current=current,
        time=time,
        allowed=allowed,
        rated=rated,
        limit=limit,
        reasons=("the relay rests while this current flows on",) if math.isinf(time) else (),
        doubts=doubts,
    )
