"""What each relay makes of one solved fault: what it measures, how many times its pickup, when it acts."""

from __future__ import annotations

import cmath
import math
from collections.abc import Mapping

import msgspec
import numpy as np

from seqfault.equations.current_transformers import residual_error
from seqfault.equations.symmetrical import to_phases
from seqfault.errors import quoted
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Complex
from seqfault.studies.current_transformers import CurrentTransformer
from seqfault.studies.protection import Protection
from seqfault.studies.relays import Relay, operate_times

_FLOOR = 1e-9
"""Share of the greatest current, or of the nominal voltage, below which a quantity is rounding."""
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


class Looked(msgspec.Struct, frozen=True, eq=False):
    """Quantities (q,) a relay compares with its pickup, what polarises them, the phases (3,) behind."""

    own: Complex
    towards: Complex | None
    phases: Complex | None


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


def terminal_rows(solution: FaultSolution) -> dict[tuple[str, str], int]:
    """Rows of ``solution.terminals`` by element and bus, without those of a place seen from beyond."""
    t = solution.terminals
    return {
        (element, bus): k
        for k, (element, bus, side) in enumerate(zip(t.element, t.bus, t.side, strict=True))
        if not side.startswith("from ")
    }


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
    allowed, turned = _allowed(solution, relay, looked)
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


def looks_at(solution: FaultSolution, relay: Relay, rows: Mapping[tuple[str, str], int]) -> Looked | str:
    """What ``relay`` looks at in ``solution``, as phasors in A or V; a sentence where nothing fixes it."""
    own: Complex
    phases: Complex | None = None
    stars = {star.name: star for star in solution.star_points}
    if relay.star and relay.star not in stars:
        return f"no winding in service ends in {quoted(relay.star)}"
    if relay.measures == "neutral":
        own = np.array([-stars[relay.star].current])  # from earth into the star point
    elif relay.measures == "neutral-voltage":
        volts = stars[relay.star].voltage if relay.star else _displacement(solution, relay.bus)
        if volts is None:
            return "nothing in the model fixes the voltage it measures"
        own = np.array([volts])
    else:
        row = rows.get((relay.element, relay.bus))
        if row is None:
            return f"the current of {quoted(relay.at)} is not unique: closed ties in a loop share it"
        sequence = solution.terminals.sequence[:, row] / solution.terminals.count[row]
        phases = to_phases(sequence)
        if relay.measures == "phase":
            own = phases
        else:
            own = sequence[2:3] if relay.measures == "negative-sequence" else 3 * sequence[:1]
    floor = _FLOOR * (solution.largest if relay.unit == "A" else float(solution.bus_nominal.max()))
    own = np.where(np.abs(own) > floor, own, 0)
    towards = None
    if relay.direction:
        by = polarising(solution, relay)
        assert relay.characteristic_angle_deg is not None
        sense = 1 if relay.direction == "forward" else -1
        turn = sense * cmath.exp(1j * math.radians(relay.characteristic_angle_deg))
        towards = turn * np.broadcast_to(by, own.shape)
    return Looked(own, towards, phases)


def polarising(solution: FaultSolution, relay: Relay) -> Complex:
    """What polarises ``relay``: −3V0, −V2, crossed phase voltages, or a star point's current; 0 where none.

    As in ``studies.settings_view``: the current counts from earth into the star point; phase a is
    polarised by j (V_b − V_c)/√3, and so on, one quantity alone by V1.
    """
    stars = {star.name: star for star in solution.star_points}
    if relay.polarisation in stars:
        return np.array([-stars[relay.polarisation].current])
    at = solution.index.get(relay.bus)
    if at is None:
        return np.zeros(1, complex)
    v = solution.voltage_sequence[:, at]
    phases = to_phases(v)
    if relay.polarisation == "negative-sequence-voltage":
        by = -v[2:3]
    elif relay.polarisation == "phase-voltage":
        crossed = 1j * (np.roll(phases, -1) - np.roll(phases, -2)) / math.sqrt(3)
        by = crossed if relay.measures == "phase" else v[1:2]
    else:
        by = np.zeros(1, complex) if solution.undefined[at] else -3 * v[:1]
    floor = _FLOOR * float(solution.bus_nominal[at])
    return np.where(np.abs(by) > floor, by, 0)


def _allowed(
    solution: FaultSolution, relay: Relay, looked: Looked
) -> tuple[np.ndarray[tuple[int, ...], np.dtype[np.bool_]], float | None]:
    """Which quantities the direction lets through, and how far the greatest lies from its angle (deg)."""
    if looked.towards is None:
        return np.ones(looked.own.shape, bool), None
    work = (looked.own * looked.towards.conj()).real
    size = np.abs(looked.own) * np.abs(looked.towards)
    allowed = (size > 0) & (work >= -1e-12 * size)
    k = int(np.where(allowed, np.abs(looked.own), 0).argmax())
    if not allowed.any():
        k = int(np.abs(looked.own).argmax())
    if size[k] == 0:
        return allowed, None
    return allowed, abs(math.degrees(cmath.phase(complex(looked.own[k] / looked.towards[k]))))


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


def _displacement(solution: FaultSolution, bus: str) -> complex | None:
    at = solution.index.get(bus)
    if at is None or solution.undefined[at]:
        return None
    return complex(solution.voltage_sequence[0, at])


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
