"""What each pickup may be: above all that must not be seen, below all that must, on the relay's scale."""

from __future__ import annotations

import math
from collections.abc import Mapping

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.case.quantities import Quantity
from seqfault.case.relay_sites import Places
from seqfault.errors import quoted
from seqfault.studies.relay_settings import Scale, Stage, stage_of
from seqfault.studies.relays import Relay
from seqfault.studies.settings_states import State, States, breakers_of, inside, zone_of
from seqfault.studies.settings_still import keeps_still
from seqfault.studies.settings_verdicts import Situation, situation

MOST = 24
"""Pickups tried a relay; of a finer scale as many, evenly spread, and then the neighbours of the best."""


FINEST = 20000
"""Settings of a scale that are looked at; a finer one is cut off there."""


class Setting(msgspec.Struct, frozen=True):
    """``pickup`` (A or V, primary) and ``time``, a multiplier or a delay in s; None where open."""

    pickup: float | None
    time: float | None


class Window(msgspec.Struct, frozen=True):
    """Pickups of ``relay`` from ``least`` to ``greatest`` (A or V), what sets either, and the scales.

    ``pickups`` are the settings in between; none where there are none.
    """

    relay: str
    least: float
    greatest: float
    why_least: str
    why_greatest: str
    scale: Scale
    times: Scale
    pickups: tuple[float, ...]

    def tried(self) -> tuple[float, ...]:
        """The pickups a search begins with."""
        if len(self.pickups) <= MOST:
            return self.pickups
        last = len(self.pickups) - 1
        return tuple(self.pickups[round(k * last / (MOST - 1))] for k in range(MOST))

    def near(self, pickup: float) -> tuple[float, ...]:
        """The pickups between those tried on either side of ``pickup``."""
        at, reach = self.pickups.index(pickup), len(self.pickups) // MOST + 1
        return self.pickups[max(at - reach, 0) : at + reach + 1]


def resettled(study: States, settings: Mapping[str, Setting]) -> States:
    """``study`` with other settings, in all states; its networks and faults stay as they were solved."""

    def of(state: State) -> State:
        guarded, places = state.protection, Places(state.case)
        relays = dict(guarded.relays)
        for name, setting in settings.items():
            if name not in relays:
                continue
            relay = with_setting(relays[name], setting)
            if setting.pickup is not None:
                amount = Quantity(setting.pickup, "voltage" if relay.unit == "V" else "current", "")
                ct = guarded.transformers.get(relay.ct)
                record = state.case.relays[name]
                relay = replace(relay, pickup=stage_of(amount, record, state.case, places, ct))
            relays[name] = relay
        views = {name: replace(view, relay=relays[name]) for name, view in state.views.items()}
        return replace(state, protection=replace(guarded, relays=relays), views=views)

    return replace(study, states=tuple(of(state) for state in study.states))


def with_setting(relay: Relay, setting: Setting) -> Relay:
    """``relay`` set so; its secondary pickup is not worked out."""
    definite = relay.curve == "definite"
    return replace(
        relay,
        pickup=Stage(setting.pickup, None),
        multiplier=None if definite else setting.time,
        delay=setting.time if definite else None,
    )


def windows(study: States, keep: frozenset[str]) -> tuple[dict[str, Window], tuple[str, ...]]:
    """The window of every relay, and what was assumed of scales; ``keep`` leaves a relay its own pickup."""
    active = {name: relay for name, relay in study.relays.items() if not relay.out}
    blank = resettled(study, {name: Setting(None, None) for name in active if name not in keep})
    out: dict[str, Window] = {}
    assumed: list[str] = []
    for name, relay in active.items():
        still = keeps_still(blank, name, ())
        greatest, limit = _seen_at_best(blank, name)
        least = still.least_pickup
        why_least = f"it keeps still for {still.limit}" if still.limit is not None else ""
        why_greatest = "" if limit is None else f"it sees {limit}"
        if relay.fast is not None and relay.fast.primary is not None and relay.fast.primary <= greatest:
            greatest = math.nextafter(relay.fast.primary, 0)
            why_greatest = f"it stays below its fast stage of {relay.fast.primary:.5g} {relay.unit}"
        scale = _scale(relay, greatest if math.isfinite(greatest) else least, assumed)
        times = _times(relay, assumed)
        pickups: tuple[float, ...]
        if name in keep and relay.pickup.primary is not None:
            pickups = (relay.pickup.primary,)
        else:
            pickups = _settings(scale, least, greatest)
        out[name] = Window(name, least, greatest, why_least, why_greatest, scale, times, pickups)
    return out, tuple(dict.fromkeys(assumed))


def _seen_at_best(study: States, name: str) -> tuple[float, Situation | None]:
    """The greatest pickup (A or V) with which a relay quick enough still sees all it must, and the case."""
    demands = study.states[0].protection.demands
    ohms = np.array(sorted(set(demands.fault_resistances)))
    least: tuple[float, Situation | None] = (math.inf, None)
    owners, ends = zone_of(name, study.relays).whole, breakers_of(name, study.relays)
    for state in study.states:
        view = state.views.get(name)
        if view is None or state.name not in demands.least:
            continue
        which = inside(view, owners, ends)
        if not which.any():
            continue
        view = view.only(which)
        sizes = view.sizes(ohms)
        best = sizes.max(axis=0)
        case, k = (int(x) for x in np.unravel_index(int(best.argmin()), best.shape))
        if best[case, k] < least[0]:
            machine = int(sizes[:, case, k].argmax())
            least = (float(best[case, k]), situation(view, case, float(ohms[k]), machine))
    return least[0] / demands.see, least[1]


def _settings(scale: Scale, least: float, greatest: float) -> tuple[float, ...]:
    """The settings of ``scale`` in a window; where it has no upper end, a hundred of them."""
    if math.isinf(least):
        return ()
    first = scale.at_least(least)
    out: list[float] = []
    while not math.isnan(first) and first <= greatest * (1 + 1e-12) and len(out) < FINEST:
        out.append(first)
        if math.isinf(greatest) and len(out) >= 100:
            break
        first = scale.at_least(first + 0.5 * scale.step)
    return tuple(out)


def _scale(relay: Relay, size: float, assumed: list[str]) -> Scale:
    if "pickup" in relay.scales:
        return relay.scales["pickup"]
    step = 10 ** math.floor(math.log10(size)) / 20 if size > 0 and math.isfinite(size) else 1.0
    assumed.append(
        f"relay {quoted(relay.name)}: steps of its pickup not stated, proposed in steps of"
        f" {step:g} {relay.unit}"
    )
    return Scale(step, step, None)


def _times(relay: Relay, assumed: list[str]) -> Scale:
    what = "delay" if relay.curve == "definite" else "multiplier"
    if what in relay.scales:
        return relay.scales[what]
    unit = " s" if what == "delay" else ""
    least = 0.0 if what == "delay" else 0.01
    text = f"relay {quoted(relay.name)}: steps of its {what} not stated, proposed in steps of 0.01{unit}"
    assumed.append(text + f" from {least:g}{unit}")
    return Scale(0.01, least, None)
