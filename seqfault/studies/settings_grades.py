"""Selectivity: the time a relay leaves to those it backs up, over all currents."""

from __future__ import annotations

import math
from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.equations.grading import grading_margin
from seqfault.model.elements import Floats
from seqfault.studies.demands import Demanded
from seqfault.studies.relays import Relay
from seqfault.studies.settings_states import State, States, breakers_of, inside, zone_of
from seqfault.studies.settings_verdicts import Situation, Verdict, doubted, judged, situation
from seqfault.studies.settings_view import View

SWEEP = 41
"""Resistances of the sweep from bolted to the last that the backup sees, thresholds apart."""
_BESIDE = 1e-9
_REFINE = 60


class Grades(msgspec.Struct, frozen=True):
    """Whether ``backup`` waits for ``first``.

    Of the case with the least to spare: ``time`` of ``first`` and ``backup_time`` s, each with the
    current (``current``, ``backup_current``, A or V) that it really sees; ``margin`` between them and the
    ``required`` one, s. ``margin`` is −infinite where ``first`` rests and ``backup`` acts, infinite where
    the backup never acts.
    """

    backup: str
    first: str
    verdict: Verdict
    margin: float
    required: float
    time: float
    backup_time: float
    current: float
    backup_current: float
    units: tuple[str, str]
    limit: Situation | None
    reasons: tuple[str, ...]
    doubts: tuple[str, ...] = ()


class Pair(msgspec.Struct, frozen=True, eq=False):
    """Two relays that look at the same cases (n)."""

    backup: View
    first: View
    demands: Demanded

    def spare(self, resistance: Floats) -> tuple[Floats, Floats, Floats]:
        """Margin beyond the required one (n, r) s, and both times, ``first`` before ``backup``."""
        early, late = self.first.times(resistance), self.backup.times(resistance)
        with np.errstate(invalid="ignore"):
            spare = late - early - required_margin(self.demands, early, self.first.relay)
        spare = np.where(np.isinf(late), math.inf, np.where(np.isinf(early), -math.inf, spare))
        return np.asarray(spare), early, late


def required_margin(demands: Demanded, time: Floats, first: Relay) -> Floats:
    """The margin (s) wanted behind ``first`` where it operates in ``time`` (s)."""
    return np.asarray(
        grading_margin(
            time,
            demands.relay_error,
            demands.ct_error,
            first.breaker_time,
            demands.overshoot,
            demands.safety,
        )
    )


def grades(study: States, backup: str, first: str, doubts: tuple[str, ...]) -> Grades:
    """The verdict on the pair, in all states in which both see anything."""
    units = (study.relays[first].unit, study.relays[backup].unit)
    zone = zone_of(first, study.relays).whole
    worst: tuple[float, Pair, int, float] | None = None
    unset: list[str] = []
    met = False
    for state in study.states:
        pair = pair_of(state, backup, first, zone)
        if pair is None:
            continue
        unset = [view.relay.name for view in (pair.first, pair.backup) if not view.relay.complete]
        if unset:
            break
        met = True
        found = worst_of(pair)
        if found is not None and (worst is None or found[0] < worst[0]):
            worst = (found[0], pair, found[1], found[2])
    nothing = Grades(
        backup, first, "not proven", math.nan, math.nan, math.nan, math.nan, 0, 0, units, None, ()
    )
    if unset:
        return msgspec.structs.replace(nothing, reasons=(f"a setting is still open: {', '.join(unset)}",))
    if worst is None:
        if not zone:
            return msgspec.structs.replace(nothing, reasons=(f"{first} protects nothing",))
        text = (
            "the backup acts on no fault of what it backs up"
            if met
            else "in no state do both relays see a fault of what the first protects"
        )
        return msgspec.structs.replace(nothing, margin=math.inf, reasons=(text,))
    return _told(worst[1], worst[2], worst[3], units, doubts)


def pair_of(state: State, backup: str, first: str, zone: frozenset[str]) -> Pair | None:
    """Both relays on the cases of ``zone`` in ``state``; None where either sees nothing there."""
    relays = state.protection.relays
    late, early = state.views.get(backup), state.views.get(first)
    if late is None or early is None:
        return None
    which = inside(early, zone, breakers_of(backup, relays) | {relays[first].at})
    if not which.any():
        return None
    return Pair(late.only(which), early.only(which), state.protection.demands)


def swept(pair: Pair) -> Floats:
    """Resistances (n, r) ohm of each case: bolted, a sweep to the last seen, and beside every threshold."""
    steps = [np.zeros((len(pair.first.spot), 1))]
    edges = []
    for view in (pair.backup, pair.first):
        relay = view.relay
        fast = None if relay.fast is None else relay.fast.primary
        for level in (relay.pickup.primary, fast):
            edges += list(view.crossings(level)) if level is not None else []
    last = np.fmax.reduce(edges[: len(pair.backup.machines)])
    scale = np.abs(pair.first.bottom[0, :, 0] / np.where(pair.first.bottom[0, :, 1] == 0, 1, 3))
    end = np.where(np.isfinite(last), last, 1e3 * np.maximum(scale, 1))
    end = np.maximum(end, 1e-6)
    start = np.minimum(np.maximum(scale, 1e-6) * 1e-3, end / 10)
    steps.append(start[:, None] * (end / start)[:, None] ** np.linspace(0, 1, SWEEP))
    for edge in edges:
        at = np.where(np.isfinite(edge), edge, 0)[:, None]
        steps += [at * (1 - _BESIDE), at * (1 + _BESIDE)]
    return np.sort(np.concatenate(steps, axis=1), axis=1)


def worst_of(pair: Pair) -> tuple[float, int, float] | None:
    """The least spare margin, its case and resistance; None where the backup rests in every case."""
    ohms = swept(pair)
    spare, _, late = pair.spare(ohms[:, None])
    if np.isinf(late).all():
        return None
    case, k = (int(x) for x in np.unravel_index(int(spare.argmin()), spare.shape))
    best, at = float(spare[case, k]), float(ohms[case, k])
    if math.isinf(best):
        return best, case, at
    one = np.zeros(len(pair.first.spot), bool)
    one[case] = True
    alone = Pair(pair.backup.only(one), pair.first.only(one), pair.demands)
    low, high = float(ohms[case, max(k - 1, 0)]), float(ohms[case, min(k + 1, ohms.shape[1] - 1)])
    for _ in range(4):  # finer and finer between the neighbours
        grid = np.linspace(low, high, _REFINE)
        values = alone.spare(grid)[0][0]
        j = int(values.argmin())
        if values[j] < best:
            best, at = float(values[j]), float(grid[j])
        low, high = float(grid[max(j - 1, 0)]), float(grid[min(j + 1, _REFINE - 1)])
    return best, case, at


def _told(pair: Pair, case: int, ohm: float, units: tuple[str, str], doubts: tuple[str, ...]) -> Grades:
    at = np.array([ohm])
    early, late = (float(each[case, 0]) for each in pair.spare(at)[1:])
    current, machine = pair.first.seen(at)
    behind = pair.backup.seen(at)[0]
    required = float(required_margin(pair.demands, np.array(early), pair.first.relay))
    margin = late - early if math.isfinite(early) else -math.inf
    reasons: tuple[str, ...] = ()
    if math.isinf(early):
        reasons = (_rests(pair, case),)
        verdict: Verdict = "fail"
    else:
        verdict = doubted(judged(margin / required, 1.0, pair.demands.tight), doubts)
    return Grades(
        backup=pair.backup.relay.name,
        first=pair.first.relay.name,
        verdict=verdict,
        margin=margin,
        required=required,
        time=early,
        backup_time=late,
        current=float(current[case, 0]),
        backup_current=float(behind[case, 0]),
        units=units,
        limit=situation(pair.first, case, ohm, int(machine[case, 0])),
        reasons=reasons,
        doubts=doubts,
    )


def _rests(pair: Pair, case: int) -> str:
    """What to say where the backup acts and the first rests."""
    reach = [float(view.reach()[0][case]) for view in (pair.first, pair.backup)]
    first, backup = (
        "sees none there" if math.isnan(r) else f"sees faults there up to {_upto(r)}" for r in reach
    )
    return (
        f"{pair.first.relay.name} {first}, {pair.backup.relay.name} {backup}: where {pair.first.relay.name}"
        " rests the backup acts alone"
    )


def _upto(ohm: float) -> str:
    return "any resistance" if math.isinf(ohm) else f"{ohm:.4g} ohm"


def pairs(study: States) -> Iterator[tuple[str, str]]:
    """Every pair of backup and first, in the order of the file."""
    for name, relay in study.relays.items():
        for first in relay.backs_up:
            if first in study.relays and not (relay.out or study.relays[first].out):
                yield name, first
