"""Stability: the most a relay measures of faults that are none of its business."""

from __future__ import annotations

import math
from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.equations.current_transformers import residual_error
from seqfault.equations.fault_resistance import at_resistance
from seqfault.equations.symmetrical import TO_PHASES
from seqfault.errors import quoted
from seqfault.model.elements import Bools, Complex, Floats
from seqfault.studies.current_transformers import CurrentTransformer
from seqfault.studies.demands import Demanded
from seqfault.studies.settings_states import State, States, zone_of
from seqfault.studies.settings_verdicts import Situation, Verdict, doubted, judged, situation
from seqfault.studies.settings_view import View

CLEAR = ("three-phase", "line-line")
"""Faults clear of earth, whose through currents the errors of current transformers turn into residual."""


class Still(msgspec.Struct, frozen=True):
    """Whether a relay keeps still.

    ``current`` the most measured (A, or V): ``residual`` that really flows there and ``error`` (A) of its
    current transformers on the phase currents; ``pickup`` of the same state; ``ratio`` pickup over
    current, infinite where nothing is measured; ``least_pickup`` that would meet the demand.
    ``held_back`` A, the most that only its direction keeps it from acting on.
    """

    relay: str
    unit: str
    verdict: Verdict
    current: float
    residual: float
    error: float
    pickup: float | None
    ratio: float
    demand: float
    least_pickup: float
    held_back: float
    limit: Situation | None
    reasons: tuple[str, ...]
    doubts: tuple[str, ...] = ()


class _Most(msgspec.Struct, frozen=True):
    rank: float
    residual: float
    error: float
    pickup: float | None
    limit: Situation


def keeps_still(study: States, name: str, doubts: tuple[str, ...]) -> Still:
    """The verdict on the relay ``name`` for all faults outside what it protects and backs up."""
    demands = study.states[0].protection.demands
    owners = zone_of(name, study.relays).whole
    worst: _Most | None = None
    most, held_back = 0.0, 0.0
    unsure: dict[str, None] = {}
    for state in study.states:
        view = state.views.get(name)
        if view is None:
            continue
        outside = _elsewhere(view, owners)
        ct = state.protection.transformers.get(view.relay.ct)
        unsure |= dict.fromkeys(_unsure(view, ct))
        found, back = _of_state(state, view, outside, ct)
        held_back = max(held_back, back)
        for each in found:
            most = max(most, each.residual + each.error)
            if worst is None or each.rank > worst.rank:
                worst = each
    relay = study.relays[name]
    pickup = relay.pickup.primary if worst is None else worst.pickup
    current = 0.0 if worst is None else worst.residual + worst.error
    ratio = math.nan if pickup is None else pickup / current if current else math.inf
    return Still(
        relay=name,
        unit=relay.unit,
        verdict=_verdict(pickup, ratio, current, demands, (*doubts, *unsure)),
        current=current,
        residual=0.0 if worst is None else worst.residual,
        error=0.0 if worst is None else worst.error,
        pickup=pickup,
        ratio=ratio,
        demand=demands.keep_still,
        least_pickup=most * demands.keep_still,
        held_back=held_back,
        limit=None if worst is None else worst.limit,
        reasons=tuple(_reasons(pickup, worst)),
        doubts=(*doubts, *unsure),
    )


def _verdict(
    pickup: float | None, ratio: float, current: float, demands: Demanded, doubts: tuple[str, ...]
) -> Verdict:
    if pickup is None or math.isinf(current):
        return "not proven"
    return doubted(judged(ratio, demands.keep_still, demands.tight), doubts)


def _reasons(pickup: float | None, worst: _Most | None) -> Iterator[str]:
    if pickup is None:
        yield "its pickup is still to be set"
    if worst is not None and math.isinf(worst.error):
        yield "the through current is beyond what the class of its ct speaks of: no bound is known"
    elif worst is not None and pickup is not None and pickup < worst.error:
        yield (
            f"the errors of its current transformers alone may show {worst.error:.4g} A, more than its"
            f" pickup of {pickup:.4g} A"
        )


def _elsewhere(view: View, owners: frozenset[str]) -> Bools:
    """Cases (n,) outside ``owners``, but those with the relay's own breaker open."""
    own = np.array([spot.owner not in owners and spot.opened != view.relay.at for spot in view.spots], bool)
    return np.asarray(own[view.spot] if len(own) else np.zeros(0, bool))


def _unsure(view: View, ct: CurrentTransformer | None) -> Iterator[str]:
    if view.relay.measures != "residual":
        return
    if ct is None:
        yield "no ct is named, so the error of its current transformers on through currents is not known"
    elif ct.composite_error is None:
        kind = f"class {ct.ct_class}" if ct.ct_class else "no class"
        yield (
            f"current transformer {quoted(ct.name)}: {kind}, so its error on through currents is not known"
        )
    elif ct.limit is None:
        yield f"current transformer {quoted(ct.name)}: how far its class holds as connected is not known"


def _of_state(
    state: State, view: View, outside: Bools, ct: CurrentTransformer | None
) -> tuple[list[_Most], float]:
    """The worst case of earth faults, and of faults clear of earth; what only direction holds back."""
    found: list[_Most] = []
    pickup = view.relay.pickup.primary
    held_back = 0.0

    def keep(residual: Floats, error: Floats, at: tuple[int, int], limit: Situation) -> None:
        m, n = at
        total = float(residual[m, n] + error[m, n])
        rank = total if pickup is None else total / pickup
        found.append(_Most(rank, float(residual[m, n]), float(error[m, n]), pickup, limit))

    some = view.only(outside)
    if some.spot.size:
        bolted = np.zeros(1)
        allowed = some.sizes(bolted)[:, :, 0]
        whole = np.abs(at_resistance(some.top, some.bottom[:, :, None], bolted)).max(axis=2)[:, :, 0]
        phases = at_resistance(some.through, some.bottom[:, :, None], bolted)[..., 0]
        error = _error(some, np.moveaxis(phases, 2, 0), ct)
        # An error above the current may turn the direction too, where anything polarises it.
        turned = (error >= whole) & some.polarised(bolted)[:, :, 0]
        error = np.where((allowed > 0) | turned | (some.towards is None), error, 0)
        residual = np.where(turned, whole, allowed)
        held_back = float(np.where(residual < whole, whole, 0).max(initial=0.0))
        m, n = np.unravel_index(int((residual + error).argmax()), error.shape)
        keep(residual, error, (int(m), int(n)), situation(some, int(n), 0.0, int(m)))
    if view.relay.measures == "residual" and view.towards is None:
        found += _clear_of_earth(state, view, outside, ct, pickup)
    return found, held_back


def _error(view: View, phases: Complex, ct: CurrentTransformer | None) -> Floats:
    """A that the errors of three current transformers make of ``phases`` (3, ...) A."""
    if view.relay.measures != "residual" or ct is None or ct.composite_error is None:
        return np.zeros(phases.shape[1:])
    return residual_error(phases, ct.composite_error, limit=math.inf if ct.limit is None else ct.limit)


def _clear_of_earth(
    state: State, view: View, outside: Bools, ct: CurrentTransformer | None, pickup: float | None
) -> Iterator[_Most]:
    """The worst of three-phase and line-line faults; without V0 a directional relay stays as it is."""
    site = state.sites.terminals.index((view.relay.element, view.relay.bus))
    cases = np.flatnonzero(outside & (view.kind == 0) & ~view.hot)
    if not cases.size:
        return
    at = view.spot[cases]
    for m, by_world in enumerate(state.forms.probes):
        one = by_world[0]
        z1, z2 = one.impedance[1, at], one.impedance[2, at]
        t1, t2 = one.terminal[1, at, site], one.terminal[2, at, site]
        for kind in CLEAR:
            i1 = one.voltage[at] / (z1 if kind == "three-phase" else z1 + z2)
            i2 = 0 * i1 if kind == "three-phase" else -i1
            phases = TO_PHASES[:, 1:] @ np.stack([t1 * i1, t2 * i2])
            error = _error(view, phases, ct)
            k = int(error.argmax())
            rank = float(error[k]) if pickup is None else float(error[k]) / pickup
            limit = situation(view, int(cases[k]), 0.0, m, kind)
            yield _Most(rank, 0.0, float(error[k]), pickup, limit)
