"""Lower pickups for what only the whole study finds: places no relay sees, neutrals left to carry on."""

from __future__ import annotations

from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.equations.fault_resistance import EARTH_KINDS
from seqfault.studies.settings import Settings
from seqfault.studies.settings_states import States, zone_of
from seqfault.studies.settings_view import View


class Cap(msgspec.Struct, frozen=True):
    """``relay`` has to pick up ``level`` (A or V), or else what ``why`` says."""

    relay: str
    level: float
    why: str


def caps(study: States, proof: Settings, keep: frozenset[str]) -> Iterator[Cap]:
    """What pickups would mend of ``proof``, the study of ``study``; the relay that has least to go."""
    for blind in proof.blind_places:
        if not blind.guarded:
            continue
        best: Cap | None = None
        least = 0.0
        for name, view in _views(study, blind.state).items():
            if name in keep or blind.owner not in zone_of(name, study.relays).whole:
                continue
            level = _measured(view, blind.place, blind.opened, blind.kind, blind.resistance)
            share = level / (view.relay.pickup.primary or np.inf)
            if level > 0 and share > least:
                where = f"{blind.place} with {blind.opened} open" if blind.opened else blind.place
                least = share
                best = Cap(
                    name, level, f"no relay would see a {blind.kind} fault at {where}, {blind.state}"
                )
        if best is not None:
            yield best
    for row in proof.withstand:
        at = row.limit
        if np.isfinite(row.time) or at is None or row.relay in keep:
            continue
        view = _views(study, at.state)[row.relay]
        level = _measured(view, at.place, at.opened, at.kind, at.resistance)
        if level > 0:
            yield Cap(
                row.relay, level, f"{row.neutral} would carry on with a {at.kind} fault at {at.place}"
            )


def _views(study: States, state: str) -> dict[str, View]:
    return next(each.views for each in study.states if each.name == state)


def _measured(view: View, place: str, opened: str, kind: str, ohm: float) -> float:
    """The least measured (A or V) of a fault, over reactances, resistors hot and cold."""
    which = np.array(
        [
            (view.spots[spot].place, view.spots[spot].opened, EARTH_KINDS[k]) == (place, opened, kind)
            for spot, k in zip(view.spot.tolist(), view.kind.tolist(), strict=True)
        ],
        bool,
    )
    return float(view.only(which).sizes(np.array([ohm])).min(initial=np.inf)) if which.any() else 0.0
