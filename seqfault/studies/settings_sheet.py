"""The setting sheet: what is set on each relay, on both sides of its transformer, and its times."""

from __future__ import annotations

import math

import msgspec
import numpy as np

from seqfault.studies.relay_settings import Stage
from seqfault.studies.relays import Relay
from seqfault.studies.settings_states import States, breakers_of, inside, zone_of


class Timed(msgspec.Struct, frozen=True):
    """A current (A, or V) that a relay sees in ``state``, and its operate time there.

    ``time`` s, infinite where it rests, NaN where a setting is open; ``current`` NaN where it sees nothing.
    """

    current: float
    time: float
    state: str


class SheetRow(msgspec.Struct, frozen=True):
    """One relay; ``ratio`` of its current or voltage transformer, ``duty`` what the currents are of."""

    relay: Relay
    ratio: str
    duty: str
    least: Timed
    greatest: Timed


NOTHING = Timed(math.nan, math.nan, "")


def setting_sheet(study: States) -> tuple[SheetRow, ...]:
    """A row for each relay in service.

    The least current is that of the states and fault resistances in which it must be seen, the greatest
    that of bolted faults in any state; of what it protects, or backs up where it protects nothing.
    """
    return tuple(_row(study, name) for name, relay in study.relays.items() if not relay.out)


def _row(study: States, name: str) -> SheetRow:
    relay = study.relays[name]
    zone = zone_of(name, study.relays)
    owners = zone.protects or zone.backs_up
    demands = study.states[0].protection.demands
    ohms = np.array(sorted({0.0, *demands.fault_resistances}))
    least = greatest = NOTHING
    for state in study.states:
        view = state.views.get(name)
        if view is None:
            continue
        which = inside(view, owners, breakers_of(name, study.relays))
        if not which.any():
            continue
        view = view.only(which)
        seen = view.seen(ohms)[0]
        times = view.times(ohms) if view.relay.complete else np.full(seen.shape, math.nan)
        n, k = (int(x) for x in np.unravel_index(int(seen[:, 0].argmax()), (len(seen), 1)))
        if not greatest.current >= seen[n, 0]:
            greatest = Timed(float(seen[n, 0]), float(times[n, 0]), state.name)
        if state.name in demands.least:
            asked = np.isin(ohms, demands.fault_resistances)
            n, k = (int(x) for x in np.unravel_index(int(seen[:, asked].argmin()), seen[:, asked].shape))
            if not least.current <= seen[:, asked][n, k]:
                least = Timed(float(seen[:, asked][n, k]), float(times[:, asked][n, k]), state.name)
    ct = study.states[0].protection.transformers.get(relay.ct)
    return SheetRow(
        relay=relay,
        ratio=ct.ratio if ct is not None else relay.vt,
        duty="protects" if zone.protects else "backs up",
        least=least,
        greatest=greatest,
    )


def stage_values(stage: Stage | None) -> tuple[float | None, float | None]:
    """Primary and secondary of a stage, None where there is none."""
    return (None, None) if stage is None else (stage.primary, stage.secondary)
