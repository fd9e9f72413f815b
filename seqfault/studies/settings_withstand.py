"""What a neutral withstands against the time of the relay that acts last."""

from __future__ import annotations

import math
from collections.abc import Iterator

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.errors import quoted
from seqfault.model.elements import Bools, Floats, Ints
from seqfault.studies.relays import operate_times
from seqfault.studies.settings_states import State, States, breakers_of, inside, zone_of
from seqfault.studies.settings_verdicts import Situation, Verdict, doubted, judged, situation
from seqfault.studies.settings_view import View, view_of

SWEEP = 41


class Withstand(msgspec.Struct, frozen=True):
    """Whether a ``neutral`` outlasts the ``relay`` that backs up the others.

    Of the worst case: ``time`` s from the fault to the end of its current, the breaker included, with
    ``current`` A through the neutral; ``allowed`` s at that current, which is ``duration`` s at the rated
    ``rated`` A and as much I²t at others. ``stays`` A: the most that flows on through a resistance that
    no relay sees any more; ``continuous`` A that the neutral is rated for, or None.
    """

    relay: str
    neutral: str
    verdict: Verdict
    time: float
    current: float
    allowed: float
    rated: float
    duration: float
    stays: float
    continuous: float | None
    limit: Situation | None
    reasons: tuple[str, ...]
    doubts: tuple[str, ...] = ()


def withstands(study: States, doubts: dict[str, tuple[str, ...]]) -> Iterator[Withstand]:
    """The verdicts on every neutral with a ``duration`` and every relay that backs up others behind it."""
    for name, relay in study.relays.items():
        if not relay.backs_up or relay.out:
            continue
        for neutral in dict.fromkeys(n for state in study.states for n in _rated(state, name)):
            own = [r.name for r in study.relays.values() if r.star == neutral and r.measures == "neutral"]
            if own and name not in own:
                continue  # it has relays of its own
            yield _withstand(study, name, neutral, doubts.get(name, ()))


def _rated(state: State, relay: str) -> Iterator[str]:
    """The neutrals with a duration in the metallic network of ``relay``."""
    model = state.network.model
    for k, name in enumerate(model.stars.names):
        record = state.case.neutrals.get(name)
        here = int(model.galvanic[model.node[model.stars.bus[k]]]) == state.at_home.get(relay)
        if record is not None and record.duration is not None and not record.out and here:
            yield name


def _withstand(study: States, name: str, neutral: str, doubts: tuple[str, ...]) -> Withstand:
    demands = study.states[0].protection.demands
    ohms = np.unique([0.0, *np.linspace(0, max(demands.fault_resistances), SWEEP)])
    zone = zone_of(name, study.relays).whole
    worst: tuple[float, float, float, Situation] | None = None
    stays = 0.0
    unset = False
    rated = duration = math.nan
    continuous: float | None = None
    for state in study.states:
        view = state.views.get(name)
        if view is None or neutral not in set(_rated(state, name)):
            continue
        rated, duration, continuous = _plate(state, neutral)
        which = inside(view, zone, breakers_of(name, study.relays))
        if not which.any():
            continue
        if not view.relay.complete:
            unset = True
            continue
        view = view.only(which)
        looker = replace(view.relay, measures="neutral", star=neutral, element="", direction="")
        through = view_of(looker, state.forms, state.sites).only(which)
        measured, machine = view.seen(ohms)
        current = _with(through, ohms, machine)
        time = operate_times(view.relay, measured) + view.relay.breaker_time
        stays = max(stays, _stays(state, which, through))
        flows = current > 0
        heat = np.where(flows, current**2, 0) * np.where(flows, time, 0)
        case, k = (int(x) for x in np.unravel_index(int(heat.argmax()), heat.shape))
        if worst is None or heat[case, k] > worst[0]:
            at = situation(view, case, float(ohms[k]), int(machine[case, k]))
            worst = (float(heat[case, k]), float(time[case, k]), float(current[case, k]), at)
    return _told(name, neutral, worst, rated, duration, stays, continuous, demands.tight, unset, doubts)


def _with(view: View, ohms: Floats, machine: Ints) -> Floats:
    sizes = view.sizes(ohms)
    return np.asarray(np.take_along_axis(sizes, machine[None], axis=0)[0])


def _stays(state: State, which: Bools, through: View) -> float:
    """A through the neutral at the resistance of which no relay at all sees anything more."""
    reach = np.full(int(which.sum()), np.nan)
    for view in state.views.values():
        reach = np.fmax(reach, view.only(which).reach()[0])
    here = ~np.isinf(reach)
    if not here.any():
        return 0.0
    at = np.where(here & ~np.isnan(reach), reach, 0)[:, None, None]
    return float(np.where(here, through.sizes(at)[-1, :, 0], 0).max())


def _plate(state: State, neutral: str) -> tuple[float, float, float | None]:
    """Rated current (A), duration (s) and continuous current (A) of a neutral."""
    record, model = state.case.neutrals[neutral], state.network.model
    k = model.stars.names.index(neutral)
    volt = float(record.voltage.value.real) if record.voltage else float(model.stars.base[k])
    ohms = abs(complex(model.stars.impedance[k]))
    rated = volt / math.sqrt(3) / ohms if ohms else math.inf
    assert record.duration is not None
    continuous = None if record.continuous is None else float(record.continuous.value.real)
    return rated, float(record.duration.value.real), continuous


def _told(
    name: str,
    neutral: str,
    worst: tuple[float, float, float, Situation] | None,
    rated: float,
    duration: float,
    stays: float,
    continuous: float | None,
    tight: float,
    unset: bool,
    doubts: tuple[str, ...],
) -> Withstand:
    reasons: list[str] = []
    verdict: Verdict = "not proven"
    time = current = allowed = math.nan
    limit = None
    if unset:
        reasons.insert(0, "a setting of the relay is still open")
    elif worst is None:
        reasons.insert(0, "no fault of what the relay backs up sends a current through it")
    else:
        _, time, current, limit = worst
        allowed = duration * (rated / current) ** 2 if current else math.inf
        verdict = doubted(judged(allowed / time if math.isfinite(time) else 0.0, 1.0, tight), doubts)
        if math.isinf(time):
            reasons.insert(0, "the relay rests while this current flows on")
    if continuous is not None and stays > continuous:
        reasons.append(
            f"a fault that no relay sees may leave {stays:.4g} A flowing through {quoted(neutral)}, which"
            f" carries {continuous:.4g} A for ever (told, not judged)"
        )
    return Withstand(
        relay=name,
        neutral=neutral,
        verdict=verdict,
        time=time,
        current=current,
        allowed=allowed,
        rated=rated,
        duration=duration,
        stays=stays,
        continuous=continuous,
        limit=limit,
        reasons=tuple(reasons),
        doubts=doubts,
    )
