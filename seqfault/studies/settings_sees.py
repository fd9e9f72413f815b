"""Sensitivity: the least a relay sees of what it must see, and the greatest fault resistance seen."""

from __future__ import annotations

import math
from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.equations.winding_cover import uncovered_share
from seqfault.studies.demands import Demanded
from seqfault.studies.neutral import duty_of, hot_ohms
from seqfault.studies.settings_places import Spot
from seqfault.studies.settings_states import State, States, breakers_of, inside, zone_of
from seqfault.studies.settings_verdicts import Situation, Verdict, doubted, judged, situation
from seqfault.studies.settings_view import View

BELOW = "this is below its pickup: the relay rests, and its curve has no time for it"


class Reach(msgspec.Struct, frozen=True):
    """The greatest fault resistance (ohm) still seen at ``spot``: NaN none, infinite any; its case."""

    spot: Spot
    resistance: float
    limit: Situation


class Cover(msgspec.Struct, frozen=True):
    """Share of a star winding, from its terminals, whose bolted earth faults a neutral relay sees."""

    winding: str
    share: float
    state: str
    resistors: str


class Sees(msgspec.Struct, frozen=True):
    """Whether a relay sees what it ``duty`` (protects, backs up) demands.

    ``current`` the least measured (A, or V), ``pickup`` that of the same state or None, ``ratio`` theirs,
    the least of all; ``greatest_pickup`` that would meet the demand. NaN where nothing was studied.
    """

    relay: str
    duty: str
    unit: str
    verdict: Verdict
    current: float
    pickup: float | None
    ratio: float
    demand: float
    greatest_pickup: float
    limit: Situation | None
    reach: tuple[Reach, ...]
    covers: tuple[Cover, ...]
    reasons: tuple[str, ...]
    doubts: tuple[str, ...] = ()


def sees(study: States, name: str, doubts: tuple[str, ...]) -> Iterator[Sees]:
    """The verdicts on the relay ``name``: of what it protects, and of what it backs up."""
    demands = study.states[0].protection.demands
    zone = zone_of(name, study.relays)
    if not zone.whole:
        yield _nothing(study, name, "protects", demands, "it protects nothing and backs up no relay")
        return
    for duty, owners in (("protects", zone.protects), ("backs up", zone.backs_up)):
        if owners:
            yield _sees(study, name, duty, owners, demands, doubts)


def _sees(
    study: States, name: str, duty: str, owners: frozenset[str], demands: Demanded, doubts: tuple[str, ...]
) -> Sees:
    ohms = np.array(sorted(set(demands.fault_resistances)))
    worst: tuple[float, float, float, float | None, Situation] | None = None
    reach: dict[Spot, Reach] = {}
    covers: list[Cover] = []
    blind: list[str] = []
    lowest = math.inf
    for state in study.states:
        if state.name not in demands.least:
            continue
        whole = state.views.get(name)
        if whole is None:
            relay = state.protection.relays.get(name)
            why = relay.blind if relay is not None else "this state does not have it"
            blind.append(f"state {state.name}: {why or 'it is out of service'}")
            continue
        which = inside(whole, owners, breakers_of(name, study.relays))
        if not which.any():
            blind.append(f"state {state.name}: nothing of what it {duty} is live")
            continue
        view = whole.only(which)
        seen, machine = view.seen(ohms)
        case, k = divmod(int(seen.argmin()), len(ohms))
        least, pickup = float(seen[case, k]), view.relay.pickup.primary
        ratio = math.nan if pickup is None else least / pickup
        lowest = min(lowest, least)
        rank = least if pickup is None else ratio
        if worst is None or rank < worst[0]:
            at = situation(view, case, ohms[k], int(machine[case, k]))
            worst = (rank, least, ratio, pickup, at)
        if pickup is not None:
            _reaches(view, reach)
            if duty == "protects":
                covers += _covers(state, view, pickup, owners)
    if worst is None:
        return _nothing(study, name, duty, demands, *blind)
    _, least, ratio, pickup, limit = worst
    if pickup is None:
        verdict: Verdict = "not proven"
        reasons: tuple[str, ...] = ("its pickup is still to be set",)
    else:
        verdict = doubted(judged(ratio, demands.see, demands.tight), doubts)
        reasons = (BELOW,) if ratio < 1 else ()
    unsure = [f"{r.spot}: not even a bolted fault" for r in reach.values() if math.isnan(r.resistance)]
    if verdict == "fail" and len(unsure) <= 4:
        reasons = (*unsure, *reasons)
    return Sees(
        relay=name,
        duty=duty,
        unit=study.relays[name].unit,
        verdict=verdict,
        current=least,
        pickup=pickup,
        ratio=ratio,
        demand=demands.see,
        greatest_pickup=lowest / demands.see,
        limit=limit,
        reach=tuple(reach.values()),
        covers=_least_covers(covers),
        reasons=(*reasons, *blind),
        doubts=doubts,
    )


def _nothing(study: States, name: str, duty: str, demands: Demanded, *reasons: str) -> Sees:
    """A relay that was never seen to see anything: that fails, and says why."""
    relay = study.relays[name]
    protects = bool(zone_of(name, study.relays).whole)
    return Sees(
        relay=name,
        duty=duty,
        unit=relay.unit,
        verdict="fail" if protects else "not proven",
        current=math.nan,
        pickup=relay.pickup.primary,
        ratio=math.nan,
        demand=demands.see,
        greatest_pickup=math.nan,
        limit=None,
        reach=(),
        covers=(),
        reasons=reasons,
    )


def _reaches(view: View, reach: dict[Spot, Reach]) -> None:
    """Keep the least of the greatest resistances of each place over kinds, states, hot and cold."""
    found, machine = view.reach()
    for case, ohm in enumerate(found.tolist()):
        spot = view.spots[int(view.spot[case])]
        before = reach.get(spot)
        if before is None or _less(ohm, before.resistance):
            reach[spot] = Reach(spot, ohm, situation(view, case, ohm, int(machine[case])))


def _less(a: float, b: float) -> bool:
    """Whether ``a`` is the worse; none at all is the worst."""
    return not math.isnan(b) and (math.isnan(a) or a < b)


def _covers(state: State, view: View, pickup: float, owners: frozenset[str]) -> Iterator[Cover]:
    """The windings that a relay in their neutral covers.

    A bolted fault at the winding's terminals draws what was solved; the reactance that this leaves beside
    the neutral is the winding's, in proportion to the turns (``equations.winding_cover``).
    """
    star = view.relay.star
    record = state.case.neutrals.get(star)
    if view.relay.measures != "neutral" or record is None:
        return
    model = state.network.model
    cold = complex(model.stars.impedance[model.stars.names.index(star)])
    sizes = view.sizes(np.zeros(1))[-1, :, 0].tolist()
    for case, at in enumerate(view.spot.tolist()):
        owner, hot = view.spots[at].owner, bool(view.hot[case])
        if view.kind[case] != 0 or owner not in owners or not sizes[case]:
            continue
        if star != _star_of(state, owner):
            continue
        z_n = hot_ohms(record, cold, duty_of(record)) if hot else cold
        voltage = float(state.forms.probes[-1][int(hot)].voltage[at])
        left = (voltage / sizes[case]) ** 2 - z_n.real**2
        winding = 1j * max(math.sqrt(max(left, 0.0)) - z_n.imag, 0.0)
        bare = uncovered_share(pickup, z_n.real, voltage, winding, reactor=z_n.imag)
        yield Cover(owner, 1 - bare, state.name, "hot" if hot else "cold")


def _star_of(state: State, owner: str) -> str:
    """The star point of a winding ``T1.lv`` or a generator, empty where ``owner`` is none."""
    unit, _, side = owner.rpartition(".")
    if unit in state.case.transformers:
        return getattr(state.case.transformers[unit], side).neutral or ""
    generator = state.case.generators.get(owner)
    return (generator.neutral or "") if generator is not None else ""


def _least_covers(covers: list[Cover]) -> tuple[Cover, ...]:
    least: dict[str, Cover] = {}
    for cover in covers:
        if cover.winding not in least or cover.share < least[cover.winding].share:
            least[cover.winding] = cover
    return tuple(least.values())
