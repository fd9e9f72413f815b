"""Settings that meet every condition, or which conditions contradict one another."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Sequence

import msgspec

from seqfault.case.quantities import Quantity
from seqfault.errors import RequestError, quoted
from seqfault.studies.settings import Settings, judge
from seqfault.studies.settings_caps import Cap, caps
from seqfault.studies.settings_grades import pairs
from seqfault.studies.settings_search import search
from seqfault.studies.settings_states import States
from seqfault.studies.settings_times import Conflict, Found, Task, cuts, longest, task_of, times_for
from seqfault.studies.settings_windows import Setting, Window, resettled, windows

ROUNDS = 30


class Proposed(msgspec.Struct, frozen=True):
    """One relay: settings ``was`` and proposed, and what keeps them from being better.

    ``least`` and ``greatest`` (A or V) the window of its pickup.
    """

    relay: str
    unit: str
    curve: str
    was: Setting
    setting: Setting
    least: float
    greatest: float
    pickup_binds: str
    time_binds: str


class Proposal(msgspec.Struct, frozen=True, eq=False):
    """What is proposed; ``proof`` is the study with it, ``study`` its states.

    ``total`` s, the sum of operate times at the least current each relay must see; ``was`` the same as
    set now, NaN where a setting is open. ``whole`` tells that all pickups were tried. Where there is no
    proposal ``contradictions`` say what excludes what.
    """

    rows: tuple[Proposed, ...]
    total: float
    was: float
    whole: bool
    contradictions: tuple[str, ...]
    assumed: tuple[str, ...]
    study: States | None
    proof: Settings | None

    @property
    def met(self) -> bool:
        """Whether every demand is met, be it tightly."""
        return self.proof is not None and self.proof.verdict in ("pass", "tight")


def propose_settings(study: States, keep: Sequence[str] = ()) -> Proposal:
    """Settings for all relays in service but those to ``keep``.

    Raises ``RequestError`` for a relay that is not there, that has open settings and is to be kept, or
    whose settings a scenario changes.
    """
    kept = frozenset(keep)
    _check(study, kept)
    ranges, assumed = windows(study, kept)
    against = tuple(_empty(ranges))
    order = list(pairs(study))
    nothing = Proposal((), math.nan, math.nan, True, against, assumed, None, None)
    if against:
        return nothing
    task = task_of(study, ranges, kept, order)
    for _ in range(ROUNDS):
        found, whole, reason = search(task)
        if found is None:
            lowered = [w for w in task.windows.values() if w.greatest < ranges[w.relay].greatest]
            more = tuple(
                f"{w.relay}: no more than {w.greatest:.4g} {study.relays[w.relay].unit},"
                f" since {w.why_greatest}"
                for w in lowered
            )
            return msgspec.structs.replace(nothing, contradictions=(reason, *more), whole=whole)
        settled = resettled(study, found.settings)
        if list(cuts(settled, order, task)):
            continue
        proof = judge(settled)
        if not _lowered(task, list(caps(settled, proof, kept))):
            break
    else:
        return msgspec.structs.replace(
            nothing, contradictions=(f"after {ROUNDS} rounds the conditions still do not all hold",)
        )
    return Proposal(
        rows=tuple(_rows(study, task, found, proof)),
        total=found.total,
        was=_now(study, task),
        whole=whole,
        contradictions=tuple(_unmet(proof)),
        assumed=assumed,
        study=settled,
        proof=proof,
    )


def _lowered(task: Task, wanted: Sequence[Cap]) -> bool:
    """Narrow the windows of ``task`` to what is ``wanted``; whether any of them became narrower.

    A cap that leaves a relay no pickup is not taken: the proof tells what is then not met.
    """
    narrower = False
    for cap in wanted:
        window = task.windows[cap.relay]
        pickups = tuple(p for p in window.pickups if p <= cap.level * (1 - 1e-9))
        if pickups and len(pickups) < len(window.pickups):
            task.windows[cap.relay] = msgspec.structs.replace(
                window, pickups=pickups, greatest=cap.level, why_greatest=f"above it {cap.why}"
            )
            narrower = True
    return narrower


def _check(study: States, keep: frozenset[str]) -> None:
    for name in keep:
        relay = study.relays.get(name)
        if relay is None:
            raise RequestError(
                f"--keep {quoted(name)}: no relay has this name; {', '.join(map(quoted, study.relays))}"
            )
        if not relay.complete:
            raise RequestError(
                f"--keep {quoted(name)}: a setting of this relay is open, so it is to be found"
            )
    for state in study.states[1:]:
        for name, relay in state.protection.relays.items():
            first = study.states[0].protection.relays.get(name)
            same = (relay.pickup, relay.multiplier, relay.delay)
            if first is None or same != (first.pickup, first.multiplier, first.delay):
                raise RequestError(
                    f"relay {quoted(name)}: scenario {quoted(state.name)} gives it settings of its own; one"
                    " proposal is for all states: take them out of the scenario, or leave --propose out"
                )


def _empty(ranges: dict[str, Window]) -> Iterator[str]:
    for window in ranges.values():
        if window.pickups:
            continue
        scale = window.scale
        if window.least > window.greatest:
            yield (
                f"{window.relay}: its pickup would have to be {window.least:.4g} or more so that"
                f" {window.why_least or 'it keeps still'}, and {window.greatest:.4g} or less so that"
                f" {window.why_greatest or 'it sees'}"
            )
        else:
            yield (
                f"{window.relay}: its scale has no pickup between {window.least:.4g} and"
                f" {window.greatest:.4g} (steps of {scale.step:.4g} from {scale.least:.4g})"
            )


def _rows(study: States, task: Task, found: Found, proof: Settings) -> Iterator[Proposed]:
    for name, window in task.windows.items():
        relay, setting = study.relays[name], found.settings[name]
        time = relay.delay if relay.curve == "definite" else relay.multiplier
        yield Proposed(
            relay=name,
            unit=relay.unit,
            curve=relay.curve,
            was=Setting(relay.pickup.primary, time),
            setting=setting,
            least=window.least,
            greatest=window.greatest,
            pickup_binds=_pickup_binds(task, found, name),
            time_binds=_time_binds(found, name, proof),
        )


def _pickup_binds(task: Task, found: Found, name: str) -> str:
    """What is in the way of a lower pickup of an inverse relay, a higher one of a definite one."""
    window, setting = task.windows[name], found.settings[name]
    if name in task.keep:
        return "kept as it stands"
    at = window.pickups.index(float(setting.pickup or 0))
    definite = task.relays[name].curve == "definite"
    step = 1 if definite else -1
    if not 0 <= at + step < len(window.pickups):
        end = window.greatest if definite else window.least
        further = float(setting.pickup or 0) + step * window.scale.step
        beyond = further > end if definite else further < end
        if beyond:
            return (window.why_greatest if definite else window.why_least) or "nothing lower is studied"
        return f"its scale {'ends' if definite else 'begins'} here"
    free = {n for n, relay in task.relays.items() if relay.curve == "definite"}
    pickups = {n: float(s.pickup or 0) for n, s in found.settings.items() if n not in free}
    pickups[name] = window.pickups[at + step]
    which = "higher" if definite else "lower"
    try:
        other = times_for(task, pickups)
    except Conflict as conflict:
        return f"one step {which} and {conflict}"
    more = other.total - found.total
    if more > 0:
        return f"one step {which} and the times add up to {more:.3g} s more"
    return f"one step {which} gains nothing"


def _time_binds(found: Found, name: str, proof: Settings) -> str:
    text = found.binds[name]
    for grade in proof.grades:
        if grade.backup == name and text == f"it waits for {grade.first}":
            return f"{text}: {grade.limit}"
    return text


def _now(study: States, task: Task) -> float:
    if not all(study.relays[name].complete for name in task.relays):
        return math.nan
    total = 0.0
    for name, relay in task.relays.items():
        time = relay.delay if relay.curve == "definite" else relay.multiplier
        total += longest(task, name, Setting(relay.pickup.primary, time))
    return total


def _unmet(proof: Settings) -> Iterator[str]:
    """What the proof finds wanting: conditions that no search was made on."""
    for seen in proof.sees:
        if seen.verdict == "fail":
            yield f"{seen.relay} does not see what it {seen.duty}: {'; '.join(seen.reasons) or seen.limit}"
    for still in proof.still:
        if still.verdict == "fail":
            yield f"{still.relay} does not keep still: {'; '.join(still.reasons) or still.limit}"
    for grade in proof.grades:
        if grade.verdict == "fail":
            why = "; ".join(grade.reasons) or str(grade.limit)
            yield f"{grade.backup} does not wait for {grade.first}: {why}"
    for last in proof.withstand:
        if last.verdict == "fail":
            why = (
                "; ".join(last.reasons)
                or f"{last.time:.4g} s, and it lasts {last.allowed:.4g} s: {last.limit}"
            )
            yield f"{last.neutral} does not last until {last.relay} has cleared: {why}"
    guarded = dict.fromkeys(place.place for place in proof.blind_places if place.guarded)
    if guarded:
        yield f"no relay sees faults at {', '.join(list(guarded)[:6])}"


def changes_of(study: States, proposal: Proposal) -> dict[str, dict[str, str | float]]:
    """The fields of the case file that ``proposal`` changes, by relay, in the units of the file."""
    out: dict[str, dict[str, str | float]] = {}
    for row in proposal.rows:
        record = study.case.relays[row.relay]
        fields: dict[str, str | float] = {}
        pickup, time = row.setting.pickup, row.setting.time
        assert pickup is not None
        assert time is not None
        if pickup != row.was.pickup:
            fields["pickup"] = _written(record.pickup, row.was.pickup, pickup, row.unit)
        if time != row.was.time:
            time = float(f"{time:.12g}")
            definite = row.curve == "definite"
            fields["delay" if definite else "multiplier"] = f"{time:g} s" if definite else time
        if fields:
            out[row.relay] = fields
    return out


def _written(stated: Quantity | None, was: float | None, pickup: float, unit: str) -> str:
    """``pickup`` (A or V) in the unit of the quantity that stood there: ``0.2 In``, ``8 %``."""
    found = re.fullmatch(r"\s*([-+.0-9eE]+)\s*(\S.*?)\s*", stated.text) if stated is not None else None
    if found is None or not was:
        return f"{pickup:.10g} {unit}"
    return f"{float(found[1]) * pickup / was:.10g} {found[2]}"
