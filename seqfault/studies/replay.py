"""A fault until it is cleared: solved again after each breaker that opens, while relays go on running.

Between two openings the currents stand still, so each relay's way grows in a straight line and the next
operation is told exactly, not stepped (``equations.relay_travel``). What falls below its pickup, or turns
the wrong way, begins anew. A relay that has operated stays so; its breakers open their own time later.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Literal

import msgspec
from msgspec.structs import replace

from seqfault.case.relay_sites import Places
from seqfault.equations.relay_travel import travelled, until_operation
from seqfault.errors import CheckError, NoAnswerError, RequestError
from seqfault.faults.kinds import Fault
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution, FaultState
from seqfault.studies.breakers import check_breaker, closed, solve_with, trips_of
from seqfault.studies.fault_left import Left, left_of, standing
from seqfault.studies.operate import Operation, Stated, guarded_network, operation
from seqfault.studies.relay_readings import Reading, readings

SAME = 1e-9
"""Events closer than this (s) are one moment."""
_NOISE = 1e-9
"""A current below this share of the first one is rounding."""

What = Literal["operates", "opens", "stays closed", "opens no more"]


class Event(msgspec.Struct, frozen=True):
    """What happens at ``time`` (s): ``relay`` operates, or its ``breaker`` opens, or fails to.

    ``left`` is what flows afterwards; ``seen`` (A or V) and ``multiple`` what a relay that operates sees in
    that moment, and how many pickups that is, NaN of a breaker that opens. ``late`` tells of what happens
    when the fault is cleared already; ``opens no more`` of a breaker that is open when its relay operates.
    """

    time: float
    what: What
    relay: str
    breaker: str
    left: Left
    seen: float = math.nan
    multiple: float = math.nan
    late: bool = False


class Way(msgspec.Struct, frozen=True):
    """How far a relay that did not operate had come, at its furthest: ``share`` of its way at ``time`` (s).

    ``lacking`` s that it would still have taken at the current of that moment.
    """

    relay: str
    share: float
    time: float
    lacking: float


class Replay(msgspec.Struct, frozen=True, eq=False):
    """A fault in time.

    ``first`` what the relays do about it as it stands; ``events`` in order; ``cleared`` the time (s) at
    which no infeed or generator feeds it any more, None where it goes on; ``last`` what relays make of it
    after the last breaker that opened in time, ``left`` what flows then. ``ways`` of relays that ran and
    did not operate. ``opened`` breakers by the time they opened; ``final`` the solution ``last`` is of.
    ``dead``: nothing fed it from the start.
    """

    first: Operation
    events: tuple[Event, ...]
    cleared: float | None
    last: tuple[Reading, ...]
    left: Left
    ways: tuple[Way, ...]
    opened: dict[str, float]
    stuck: tuple[str, ...]
    final: FaultSolution
    dead: bool


class _Running:
    """Relays as they run: both stages of each, what has operated, how far each came."""

    def __init__(self, names: Sequence[str]) -> None:
        self.travel = {name: [0.0, 0.0] for name in names}
        self.operated: set[str] = set()
        self.furthest: dict[str, Way] = {}

    def next(self, seen: Sequence[Reading]) -> tuple[float, list[str]]:
        """Time (s) until the next relay operates, and which do then."""
        waits = {each.relay.name: self._wait(each) for each in seen}
        waiting = {name: wait for name, wait in waits.items() if name not in self.operated}
        first = min(waiting.values(), default=math.inf)
        if math.isinf(first):
            return first, []
        return first, [name for name, wait in waiting.items() if wait <= first + SAME]

    def run(self, seen: Sequence[Reading], lasting: float, until: float) -> None:
        """Let ``lasting`` s go by with what is ``seen``, up to the time ``until``."""
        for each in seen:
            name = each.relay.name
            if name in self.operated:
                continue
            times = (each.main, each.fast)
            own = [travelled(x, t, lasting) for x, t in zip(self.travel[name], times, strict=True)]
            self.travel[name] = own
            way = Way(name, max(own), until, self._wait(each))
            if way.share > 0 and (name not in self.furthest or way.share >= self.furthest[name].share):
                self.furthest[name] = way

    def _wait(self, each: Reading) -> float:
        main, fast = self.travel[each.relay.name]
        return min(until_operation(main, each.main), until_operation(fast, each.fast))


def replay(
    network: Network, faults: Sequence[Fault], stated: Stated = (), stuck: Sequence[str] = ()
) -> Replay:
    """``faults`` on ``network`` from their first moment until nothing feeds them or no relay runs.

    ``stated`` pairs of relay and breaker as in ``operate``; ``stuck`` breakers that do not open. Raises
    ``RequestError`` as ``operate`` does, ``NoAnswerError`` at resonance, with the moment it comes up in.
    """
    network, guarded = guarded_network(network, [*(b for _, b in stated), *stuck])
    places = Places(network.case)
    for breaker in stuck:
        check_breaker(places, breaker, "--stuck")
    trips = trips_of(network.case, guarded.relays, stated)
    open_already = {b for own in trips.of.values() for b in own if not closed(places, network.case, b)}
    solution = network.solve(faults)
    faults = [_settled(network, *each) for each in zip(faults, solution.faults, strict=True)]
    first = operation(network, solution, guarded, trips)
    floor = _NOISE * solution.largest
    running = _Running(list(guarded.relays))
    events: list[Event] = []
    pending: list[tuple[float, str, str]] = []
    opened: dict[str, float] = {}
    seen = readings(solution, guarded)
    now = 0.0
    gone = not standing(solution, opened)
    cleared = 0.0 if gone else None
    dead = gone
    left = left_of(solution, opened, floor)
    while cleared is None:
        wait, operating = running.next(seen)
        opening = min((time for time, _, _ in pending), default=math.inf)
        if math.isinf(min(now + wait, opening)):
            break
        if opening < now + wait - SAME:  # a relay that is as quick operates all the same
            running.run(seen, opening - now, opening)
            now = opening
            due = [each for each in pending if each[0] <= now + SAME]
            pending = [each for each in pending if each[0] > now + SAME]
            opened |= {breaker: now for _, breaker, _ in due}
            solution = _solved(network, faults, opened, now)
            left, seen = left_of(solution, opened, floor), readings(solution, guarded, opened)
            events += [Event(now, "opens", relay, breaker, left) for _, breaker, relay in due]
            if not standing(solution, opened):
                cleared = now
            continue
        running.run(seen, wait, now + wait)
        now += wait
        sight = {each.relay.name: (each.value, each.multiple) for each in seen}
        for name in operating:
            running.operated.add(name)
            delay = guarded.relays[name].breaker_time
            for breaker in trips.of[name]:
                due_at = {b: time for time, b, _ in pending}
                what: What = "operates"
                if breaker in stuck:
                    what = "stays closed"
                elif breaker in opened or breaker in open_already:
                    what = "opens no more"
                elif now + delay < due_at.get(breaker, math.inf):
                    pending = [p for p in pending if p[1] != breaker]
                    pending.append((now + delay, breaker, name))
                events.append(Event(now, what, name, breaker, left, *sight[name]))
            if not trips.of[name]:
                events.append(Event(now, "operates", name, "", left, *sight[name]))
    for time, breaker, relay in sorted(pending):  # their relays had operated; nothing stops them now
        opened[breaker] = time
        events.append(Event(time, "opens", relay, breaker, left, late=True))
    ways = tuple(way for name, way in running.furthest.items() if name not in running.operated)
    return Replay(
        first=first,
        events=tuple(events),
        cleared=cleared,
        last=tuple(seen),
        left=left,
        ways=ways,
        opened=opened,
        stuck=tuple(stuck),
        final=solution,
        dead=dead,
    )


def _settled(network: Network, fault: Fault, state: FaultState) -> Fault:
    """``fault`` with its source or load side by name: open breakers may leave no source to tell it by."""
    if fault.fallen not in ("source", "load") or state.sides is None:
        return fault
    place = network.place(fault.place)
    names = (place.bus, place.element)
    if place.fraction is not None:
        line = network.case.lines[place.element]
        names = (line.from_, line.to)
    return replace(fault, fallen=names[state.sides.index(state.bus)])


def _solved(
    network: Network, faults: Sequence[Fault], opened: Mapping[str, float], now: float
) -> FaultSolution:
    try:
        return solve_with(network, faults, opened)
    except (NoAnswerError, RequestError, CheckError) as error:
        names = ", ".join(opened)
        raise type(error)(f"at {now:.3f} s, with {names} open: {error}") from None
