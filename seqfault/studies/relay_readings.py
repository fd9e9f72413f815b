"""What each relay makes of one solved fault: what it measures, how many times its pickup, when it acts."""

from __future__ import annotations

import math
from collections.abc import Mapping

import msgspec
import numpy as np

from seqfault.equations.current_transformers import residual_error
from seqfault.errors import quoted
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Complex
from seqfault.studies.current_transformers import CurrentTransformer
from seqfault.studies.protection import Protection
from seqfault.studies.relay_sight import allowed_by, looks_at, terminal_rows
from seqfault.studies.relays import Relay, operate_times

SYMBOLS = {
    "residual": "3I0",
    "core-balance": "3I0",
    "neutral": "neutral",
    "phase": "phase",
    "negative-sequence": "I2",
    "neutral-voltage": "V0",
}
"""What a relay measures, as a column has room for it."""
EARTHS = ("residual", "core-balance", "neutral", "neutral-voltage")
"""What relays measure that a fault clear of earth does not drive."""


class Reading(msgspec.Struct, frozen=True):
    """What one relay makes of a fault.

    ``value`` A (neutral-voltage: V) primary, NaN where nothing fixes it, and ``secondary`` behind its
    transformer, None where the case does not tell; ``multiple`` of its pickup; ``main`` and ``fast`` the
    times (s) of its two stages, infinite where they rest. ``why`` it rests in a word or two, empty where
    it acts, and ``because`` of what, where there is more to say.
    ``turned`` degrees from its characteristic angle, None where it has none. ``error`` A that the errors
    of its residually connected transformers may show beside; ``beyond`` A through its transformers where
    that is more than the ``limit`` of their class, None where not.
    """

    relay: Relay
    value: float
    secondary: float | None
    multiple: float
    main: float
    fast: float
    why: str
    because: str
    turned: float | None
    error: float
    beyond: float | None
    limit: float | None

    @property
    def time(self) -> float:
        """Operate time, s, of the stage that is first; infinite where it rests."""
        return min(self.main, self.fast)

    @property
    def acts(self) -> bool:
        """Whether it acts while this current lasts."""
        return math.isfinite(self.time)

    @property
    def cleared(self) -> float:
        """Operate time with the time of its breaker, s; infinite where it rests."""
        return self.time + self.relay.breaker_time


def readings(
    solution: FaultSolution, guarded: Protection, opened: Mapping[str, float] | None = None
) -> tuple[Reading, ...]:
    """What every relay of ``guarded`` makes of ``solution``, in the order of the file.

    ``opened`` are breakers, ``ELEMENT@BUS``, that have opened since; a relay behind its own open breaker
    says so. Times are those of this one current: nothing that happened before counts.
    """
    rows = terminal_rows(solution)
    return tuple(
        _reading(solution, relay, guarded.transformers.get(relay.ct), rows, opened or {})
        for relay in guarded.relays.values()
    )


def _reading(
    solution: FaultSolution,
    relay: Relay,
    ct: CurrentTransformer | None,
    rows: Mapping[tuple[str, str], int],
    opened: Mapping[str, float],
) -> Reading:
    if relay.out:
        return _rests(relay, "out of service")
    if relay.blind:
        return _rests(relay, "blind", relay.blind)
    looked = looks_at(solution, relay, rows)
    if isinstance(looked, str):
        return _rests(relay, "not known", looked)
    sizes = np.abs(looked.own)
    allowed, turned = allowed_by(looked)
    counted = float(np.where(allowed, sizes, 0).max())
    whole = float(sizes.max())
    value = counted if counted > 0 else whole
    pickup = relay.pickup.primary
    multiple = math.nan if pickup is None else value / pickup
    main, fast, why = _times(relay, value, counted)
    because = ""
    if why and relay.at in opened:
        because = f"its own breaker {quoted(relay.at)} is open"
        why = "breaker open"
    elif why and value == 0:
        why, because = _nothing_words(solution, relay)
    elif why == "direction":
        why, because = "wrong way", _direction_words(relay, turned)
    through = value if looked.phases is None or ct is None else float(np.abs(looked.phases).max())
    if ct is not None and ct.connection != "residual":
        through = value
    limit = None if ct is None else ct.limit
    return Reading(
        relay=relay,
        value=value,
        secondary=_secondary(relay, ct, value),
        multiple=multiple,
        main=main,
        fast=fast,
        why=why,
        because=because,
        turned=turned,
        error=_error(relay, ct, looked.phases),
        beyond=through if limit is not None and through > limit else None,
        limit=limit,
    )


def _rests(relay: Relay, why: str, because: str = "") -> Reading:
    rest = math.inf
    return Reading(relay, math.nan, None, math.nan, rest, rest, why, because, None, 0.0, None, None)


def _times(relay: Relay, value: float, counted: float) -> tuple[float, float, str]:
    """Times (s) of the main and the fast stage, and why the relay rests."""
    rest = math.inf
    pickup = relay.pickup.primary
    if pickup is None:
        return rest, rest, "pickup not set"
    if not relay.complete:
        return rest, rest, "time not set"
    if value <= pickup:
        return rest, rest, "below pickup" if value < pickup else "just at pickup"
    if counted <= pickup:
        return rest, rest, "direction"
    main = float(operate_times(msgspec.structs.replace(relay, fast=None), counted))
    level = None if relay.fast is None else relay.fast.primary
    fast = (relay.fast_delay or 0.0) if level is not None and counted > level else rest
    return main, fast, ""


def _direction_words(relay: Relay, turned: float | None) -> str:
    if turned is None:
        return f"nothing is left of what polarises it, {relay.polarisation}, so it tells no direction"
    return (
        f"its current lies {turned:.0f} degrees from its characteristic angle, {relay.direction}; it acts"
        " up to 90"
    )


def _nothing_words(solution: FaultSolution, relay: Relay) -> tuple[str, str]:
    """Why a relay in service measures nothing at all, in a word or two and in a sentence."""
    stars = {star.name: star.bus for star in solution.star_points}
    at = solution.index.get(relay.bus or stars.get(relay.star, ""))
    if at is None or solution.before[at] == 0 or solution.lost[at]:
        return "dead", "nothing is live there"
    if relay.measures in EARTHS:
        if not any(state.fault.earth for state in solution.faults):
            return "sees nothing", "the fault is clear of earth and drives no earth current"
        if not solution.joined[at]:
            return "blind", "no transformer between passes on any of the fault's zero-sequence current"
    return "sees nothing", "nothing that it measures flows there"


def _secondary(relay: Relay, ct: CurrentTransformer | None, value: float) -> float | None:
    if ct is not None:
        return value * ct.secondary / ct.primary
    stage = relay.pickup
    if stage.primary and stage.secondary is not None:
        return value * stage.secondary / stage.primary
    return None


def _error(relay: Relay, ct: CurrentTransformer | None, phases: Complex | None) -> float:
    """A that errors of three residually connected transformers may show; infinite beyond their class."""
    if relay.measures != "residual" or ct is None or ct.composite_error is None or phases is None:
        return 0.0
    limit = math.inf if ct.limit is None else ct.limit
    return float(residual_error(phases, ct.composite_error, limit=limit))
