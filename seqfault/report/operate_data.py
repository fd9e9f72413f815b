"""What relays do about a fault as a tree for JSON and long rows for CSV; SI units throughout."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import msgspec

from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.report.data import Quantity, header, state_tree
from seqfault.report.settings_words import plain
from seqfault.studies.breakers import Trips
from seqfault.studies.operate import Operation, assumed_of, said_of
from seqfault.studies.relay_readings import Reading
from seqfault.studies.replay import Replay
from seqfault.studies.replay_said import feeding, replay_assumed


def operate_tree(network: Network, found: Operation) -> dict[str, Any]:
    """``found`` as plain values: relays that act first, in order; null what is not known, or never."""
    s = found.solution
    first, *others = [state_tree(state, s.largest) for state in s.faults]
    return {
        **header(network),
        "loaded": s.loaded,
        **first,
        **({"also": others} if others else {}),
        "relays": [_relay(each, found.trips) for each in found.readings],
        "notes": [*said_of(found), *s.notes],
        "assumptions": list(assumed_of(found)),
        "warnings": [*network.model.warnings, *found.protection.warnings],
    }


def replay_tree(network: Network, found: Replay) -> dict[str, Any]:
    """``found`` as plain values; ``cleared`` is null where the fault goes on."""
    tree = operate_tree(network, found.first)
    tree["assumptions"] += replay_assumed(found)
    return {
        **tree,
        "replay": {
            "cleared": found.cleared,
            "dead": found.dead,
            "events": [msgspec.to_builtins(event) for event in found.events],
            "left": msgspec.to_builtins(found.left),
            "still_feeding": [] if found.cleared is not None else list(feeding(found)),
            "opened": found.opened,
            "stuck": list(found.stuck),
            "nearest": [msgspec.to_builtins(way) for way in found.ways],
            "last": [_relay(each, found.first.trips) for each in found.last],
        },
    }


def _relay(each: Reading, trips: Trips) -> dict[str, Any]:
    relay = each.relay
    return {
        "relay": relay.name,
        "at": relay.at,
        "device": relay.device,
        "measures": relay.measures,
        "unit": relay.unit,
        "seen": _known(each.value),
        "secondary": each.secondary,
        "pickup": relay.pickup.primary,
        "multiple": _known(each.multiple),
        "acts": each.acts,
        "time": _known(each.time),
        "time_of_main_stage": _known(each.main),
        "time_of_fast_stage": _known(each.fast),
        "time_with_breaker": _known(each.cleared),
        "trips": list(trips.of[relay.name]),
        "why_not": each.why or None,
        "because": each.because or None,
        "degrees_from_characteristic_angle": each.turned,
        "error_of_current_transformers": plain(each.error),
        "beyond_the_class_of_its_transformer": each.beyond,
    }


def _known(value: float) -> float | None:
    return value if math.isfinite(value) else None


def operate_rows(found: Operation) -> Iterator[Quantity]:
    """``found`` in long form: ``where`` is the relay, of its breaker the relay too."""
    yield from _readings(found.solution, found.readings, found.trips)


def replay_rows(found: Replay) -> Iterator[Quantity]:
    """``found`` in long form: the fault at first, the events, and how it ends."""
    yield from operate_rows(found.first)
    row = _Rows(found.first.solution)
    for number, event in enumerate(found.events, 1):
        at = f"event {number}"
        yield row(at, event.time, "s", event.relay)
        yield row(f"{at}, what", event.what, "", event.relay)
        yield row(f"{at}, breaker", event.breaker, "", event.relay)
        yield row(f"{at}, times pickup", _known(event.multiple), "", event.relay)
        yield row(f"{at}, phase current left", event.left.phase, "A", event.relay)
        yield row(f"{at}, current left to earth", event.left.earth, "A", event.relay)
    for way in found.ways:
        yield row("share of its way", way.share, "", way.relay)
        yield row("still to go", way.lacking, "s", way.relay)
    yield row("cleared", "no" if found.cleared is None else "yes", "", "")
    yield row("time to clear", found.cleared, "s", "")


class _Rows:
    """Makes rows of one fault."""

    def __init__(self, solution: FaultSolution) -> None:
        self.place = " and ".join(state.fault.place for state in solution.faults)
        self.kind = " and ".join(state.fault.kind.name for state in solution.faults)
        self.state = solution.state

    def __call__(self, quantity: str, value: float | str | None, unit: str, relay: str) -> Quantity:
        return Quantity(self.place, self.kind, quantity, "", value, unit, None, relay, self.state)


def _readings(solution: FaultSolution, readings: tuple[Reading, ...], trips: Trips) -> Iterator[Quantity]:
    row = _Rows(solution)
    for each in readings:
        relay = each.relay
        values: tuple[tuple[str, float | str | None, str], ...] = (
            ("seen by relay", _known(each.value), relay.unit),
            ("seen by relay, secondary", each.secondary, relay.unit),
            ("pickup", relay.pickup.primary, relay.unit),
            ("times pickup", _known(each.multiple), ""),
            ("operate time", plain(each.time), "s"),
            ("operate time with breaker", plain(each.cleared), "s"),
            ("trips", ", ".join(trips.of[relay.name]), ""),
        )
        for name, value, unit in values:
            yield row(name, value, unit, relay.name)
        if each.why:
            yield row("why it rests", each.why, "", relay.name)
        if each.because:
            yield row("because", each.because, "", relay.name)
