"""The least times for given pickups.

For given pickups every condition of grading asks of a backup's time to be no less than something that
grows with the time of the relay in front, so that there is one set of times of which none could be less:
it is reached from the least settings by raising what is too short, on the relay's scale. What grading
demands is a set of points, the currents both relays see of one fault; points that the exact study finds
wanting are added until it finds none.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence

import msgspec
import numpy as np

from seqfault.model.elements import Floats
from seqfault.studies.demands import Demanded
from seqfault.studies.relays import Relay, operate_times
from seqfault.studies.settings_grades import Pair, pair_of, required_margin, worst_of
from seqfault.studies.settings_states import States, breakers_of, inside, zone_of
from seqfault.studies.settings_view import ACTS_WITHIN, own_time
from seqfault.studies.settings_windows import Setting, Window, with_setting

_SLACK = 1e-9
_FIRST = 9
_PROPORTIONAL = ("residual", "core-balance", "neutral", "neutral-voltage")


class Points(msgspec.Struct, frozen=True, eq=False):
    """Faults that two relays see (m, k), by reactance: ``first`` and ``backup``, A or V."""

    machines: tuple[str, ...]
    first: Floats
    backup: Floats


class Task(msgspec.Struct, eq=False):
    """All that the search needs of a study.

    ``points`` of each pair (backup, first), ``ratio`` the most that the backup sees over the first where
    the two are in proportion; ``least`` what each relay must see at least, by state, and ``must`` all that
    it must see (m, k).
    """

    relays: dict[str, Relay]
    windows: dict[str, Window]
    keep: frozenset[str]
    demands: Demanded
    points: dict[tuple[str, str], list[Points]]
    ratio: dict[tuple[str, str], float]
    least: dict[str, list[tuple[tuple[str, ...], Floats]]]
    must: dict[str, list[tuple[tuple[str, ...], Floats]]]


class Found(msgspec.Struct, frozen=True):
    """Settings by relay, the sum of their times (s), and what set each time."""

    settings: dict[str, Setting]
    total: float
    binds: dict[str, str]


class Conflict(Exception):
    """Why some pickups have no times.

    ``gap`` says how far two pickups are from going together, as a factor; 0 where only times do not.
    """

    def __init__(self, text: str, gap: float = 0.0) -> None:
        super().__init__(text)
        self.gap = gap


def task_of(
    study: States, windows: dict[str, Window], keep: frozenset[str], pairs: Sequence[tuple[str, str]]
) -> Task:
    """The task, with the points of a coarse sweep."""
    relays = {name: relay for name, relay in study.relays.items() if name in windows}
    task = Task(relays, dict(windows), keep, study.states[0].protection.demands, {}, {}, {}, {})
    for backup, first in pairs:
        if backup not in windows or first not in windows:
            continue
        zone = zone_of(first, study.relays).whole
        task.points[backup, first] = []
        for state in study.states:
            pair = pair_of(state, backup, first, zone)
            if pair is None:
                continue
            ohms = _coarse(pair)
            add_points(task, (backup, first), pair, ohms)
        alike = all(relays[name].measures in _PROPORTIONAL for name in (backup, first))
        if alike:
            task.ratio[backup, first] = max((_ratio(p) for p in task.points[backup, first]), default=0.0)
    ohms = np.array(sorted(set(task.demands.fault_resistances)))
    for name in relays:
        zone_ = zone_of(name, study.relays)
        owners = zone_.protects or zone_.backs_up
        task.least[name], task.must[name] = [], []
        for state in study.states:
            view = state.views.get(name)
            if view is None or state.name not in task.demands.least:
                continue
            ends = breakers_of(name, study.relays)
            whole = view.only(inside(view, zone_.whole, ends)).sizes(ohms)
            task.must[name].append((view.machines, whole.reshape(len(view.machines), -1)))
            which = inside(view, owners, ends)
            if which.any():
                sizes = view.only(which).sizes(ohms).reshape(len(view.machines), -1)
                at = sorted({int(sizes[0].argmin()), int(sizes[-1].argmin())})
                task.least[name].append((view.machines, sizes[:, at]))
    return task


def add_points(task: Task, key: tuple[str, str], pair: Pair, ohms: Floats) -> None:
    """Add what both relays of ``pair`` see through ``ohms`` (n, r), without what others make idle."""
    first = pair.first.sizes(ohms[:, None]).reshape(len(pair.first.machines), -1)
    backup = pair.backup.sizes(ohms[:, None]).reshape(len(pair.first.machines), -1)
    kept = _hardest(first, backup)
    task.points[key].append(Points(pair.first.machines, first[:, kept], backup[:, kept]))


def _coarse(pair: Pair) -> Floats:
    scale = np.abs(pair.first.bottom[0, :, 0] / np.where(pair.first.bottom[0, :, 1] == 0, 1, 3))
    steps = np.concatenate([[0.0], np.geomspace(0.1, 300, _FIRST)])
    return np.asarray(np.maximum(scale, 1e-3)[:, None] * steps)


def _hardest(first: Floats, backup: Floats) -> list[int]:
    """Points of which no other asks more: less seen by the first and more by the backup."""
    order = np.lexsort((first.sum(axis=0), -backup.sum(axis=0)))
    kept: list[int] = []
    for k in order.tolist():
        if not backup[:, k].any():
            continue
        own = np.array(kept, np.int64)
        harder = (first[:, own] <= first[:, [k]]).all(axis=0) & (backup[:, own] >= backup[:, [k]]).all(
            axis=0
        )
        if not harder.any():
            kept.append(k)
    return kept


def _ratio(points: Points) -> float:
    some = points.first > 0
    ratio = np.where(some, points.backup / np.where(some, points.first, 1), 0)
    alone = (~some & (points.backup > 0)).any()
    return math.inf if alone else float(ratio.max(initial=0.0))


def times_for(task: Task, pickups: Mapping[str, float]) -> Found:
    """The least times for ``pickups``; those of definite relays that are free are the highest that go.

    Raises ``Conflict`` where there are none.
    """
    limits: dict[str, float] = {}
    while True:  # it ends: each round lowers a pickup of a scale
        settings, binds = _least_times(task, _pickups(task, pickups, limits))
        slow = {
            name: limit
            for name, setting in settings.items()
            if name not in pickups
            and (limit := _seen_at_delay(task, name, setting)) < float(setting.pickup or 0) * (1 - _SLACK)
            and limit < limits.get(name, math.inf)
        }
        if not slow:
            break
        limits |= slow
    for name, setting in settings.items():
        _sees_in_time(task, name, setting)
    total = sum(longest(task, name, settings[name]) for name in task.relays)
    return Found(settings, total, binds)


def _least_times(task: Task, chosen: Mapping[str, float]) -> tuple[dict[str, Setting], dict[str, str]]:
    """The least times that grade with the pickups ``chosen``, and what set each."""
    settings: dict[str, Setting] = {}
    binds: dict[str, str] = {}
    for name, window in task.windows.items():
        relay = task.relays[name]
        time = relay.delay if relay.curve == "definite" else relay.multiplier
        if name not in task.keep or time is None:
            time = window.times.at_least(window.times.least)
            binds[name] = "the least setting of its scale"
        else:
            binds[name] = "kept as it stands"
        settings[name] = Setting(chosen[name], time)
    raised = True
    while raised:  # it ends: no relay backs up itself by way of others
        raised = False
        for (backup, first), points in task.points.items():
            needed = _needed(task, backup, first, settings, points)
            if needed > float(settings[backup].time or 0):
                settings[backup] = Setting(chosen[backup], needed)
                binds[backup] = f"it waits for {first}"
                raised = True
    return settings, binds


def _seen_at_delay(task: Task, name: str, setting: Setting) -> float:
    """The greatest pickup (A or V) at which a definite relay sees all it must with its delay."""
    relay, delay = task.relays[name], float(setting.time or 0)
    if relay.curve != "definite" or name in task.keep:
        return math.inf
    least = math.inf
    for machines, sizes in task.must[name]:
        within = [m for m, each in enumerate(machines[:-1]) if delay <= ACTS_WITHIN[each]]
        least = min(least, float(sizes[within[0] if within else -1].min(initial=math.inf)))
    return least / task.demands.see


def _pickups(task: Task, given: Mapping[str, float], limits: Mapping[str, float]) -> dict[str, float]:
    chosen: dict[str, float] = {}
    for name, window in task.windows.items():
        if not window.pickups:
            raise Conflict(f"no pickup of {name} is both above and below what it must be", math.inf)
        limit = limits.get(name, math.inf)
        under = [p for p in window.pickups if p <= limit]
        chosen[name] = given.get(name, under[-1] if under else window.pickups[0])
    lowered = True
    while lowered:
        lowered = False
        for (backup, first), ratio in task.ratio.items():
            if chosen[backup] >= ratio * chosen[first] * (1 - 1e-12) or first in given:
                continue
            pickups = task.windows[first].pickups
            fitting = [p for p in pickups if p * ratio <= chosen[backup] * (1 + 1e-12)]
            lower = fitting[-1] if fitting else pickups[0]
            if lower < chosen[first]:
                chosen[first] = lower
                lowered = True
    apart = [
        (ratio * chosen[first] / chosen[backup], backup, first, ratio)
        for (backup, first), ratio in task.ratio.items()
        if chosen[backup] < ratio * chosen[first] * (1 - 1e-12)
    ]
    if apart:
        gap, backup, first, ratio = max(apart)
        raise Conflict(
            f"{backup} at {chosen[backup]:.4g} {task.relays[backup].unit} acts on faults that {first} at"
            f" {chosen[first]:.4g} {task.relays[first].unit} does not see: {backup} would have to pick up"
            f" at no less than {ratio:.4g} times what {first} does",
            gap,
        )
    return chosen


def _times(relay: Relay, setting: Setting, machines: tuple[str, ...], sizes: Floats) -> Floats:
    own = with_setting(relay, setting)
    return operate_times(own, own_time(own, machines, sizes)[0])


def _sees_in_time(task: Task, name: str, setting: Setting) -> None:
    """Raise ``Conflict`` where a relay is so slow that the machines no longer feed what it must see."""
    own = with_setting(task.relays[name], setting)
    wanted = task.demands.see * float(setting.pickup or 0)
    for machines, sizes in task.must[name]:
        if len(machines) == 1 or not sizes.size or name in task.keep:
            continue
        seen, which = own_time(own, machines, sizes)
        k = int(seen.argmin())
        if seen[k] < wanted * (1 - _SLACK):
            raise Conflict(
                f"{name} at {setting.pickup:.4g} {own.unit} is so slow that with the {machines[which[k]]}"
                f" reactance of the machines it sees {seen[k]:.4g} {own.unit}, not {wanted:.4g}",
                wanted / seen[k] if seen[k] else math.inf,
            )


def longest(task: Task, name: str, setting: Setting) -> float:
    """The operate time (s) at the least current it must see."""
    out = 0.0
    for machines, sizes in task.least[name]:
        out = max(out, float(_times(task.relays[name], setting, machines, sizes).max()))
    return out


def _needed(
    task: Task, backup: str, first: str, settings: Mapping[str, Setting], points: list[Points]
) -> float:
    """The least time setting of ``backup`` that is enough behind ``first``, from its present one on."""
    relay, front = task.relays[backup], task.relays[first]
    pickup, time = settings[backup].pickup, float(settings[backup].time or 0)
    scale = task.windows[backup].times
    wanted = []
    for each in points:
        early = _times(front, settings[first], each.machines, each.first)
        with np.errstate(invalid="ignore"):
            wanted.append(early + required_margin(task.demands, early, front))

    def lacking(time: float) -> float:
        """How many times longer the backup would have to be; 1 and less where it is long enough."""
        most = 0.0
        for each, want in zip(points, wanted, strict=True):
            late = _times(relay, Setting(pickup, time), each.machines, each.backup)
            acts = np.isfinite(late)
            floor = np.maximum(late[acts], 1e-6)
            most = max(most, float((want[acts] / floor).max(initial=0.0)))
        # Where the first rests a longer time may let the backup rest too, with a later reactance.
        return 2.0 if math.isinf(most) else most

    start = time
    for _ in range(200):
        short = lacking(time)
        if short <= 1 + _SLACK:
            break
        if backup in task.keep and settings[backup].time is not None:
            raise Conflict(f"{backup} as it stands does not wait long enough for {first}")
        further = scale.at_least(max(time * min(short, 8.0), time + 0.5 * scale.step))
        if math.isnan(further) or further > 1e4:
            fast = ", its fast stage counted" if relay.fast is not None else ""
            raise Conflict(f"{backup} can be set to no time that is long enough behind {first}{fast}")
        time = further
    else:
        raise Conflict(f"{backup}: its fast stage or minimum time is too short behind {first}")
    while time > start:  # the longest step back that still is enough
        lower = scale.at_most(time - 0.5 * scale.step)
        if math.isnan(lower) or lower < start or lacking(lower) > 1 + _SLACK:
            break
        time = lower
    return time


def cuts(study: States, pairs: Sequence[tuple[str, str]], task: Task) -> Iterator[tuple[str, str]]:
    """Add the worst point of every pair that the exact study finds wanting, and tell the pair."""
    for backup, first in pairs:
        if (backup, first) not in task.points:
            continue
        zone = zone_of(first, study.relays).whole
        for state in study.states:
            pair = pair_of(state, backup, first, zone)
            if pair is None:
                continue
            found = worst_of(pair)
            if found is None or found[0] >= -_SLACK:
                continue
            one = np.zeros(len(pair.first.spot), bool)
            one[found[1]] = True
            alone = Pair(pair.backup.only(one), pair.first.only(one), pair.demands)
            add_points(task, (backup, first), alone, np.array([[found[2]]]))
            yield backup, first
