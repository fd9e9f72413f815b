"""What a relay looks at in a solved fault, and what tells it a direction, as phasors."""

from __future__ import annotations

import cmath
import math
from collections.abc import Mapping

import msgspec
import numpy as np

from seqfault.equations.symmetrical import to_phases
from seqfault.errors import quoted
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Bools, Complex
from seqfault.studies.relays import Relay

_FLOOR = 1e-9
"""Share of the greatest current, or of the nominal voltage, below which a quantity is rounding."""


class Looked(msgspec.Struct, frozen=True, eq=False):
    """Quantities (q,) a relay compares with its pickup, what polarises them, the phases (3,) behind."""

    own: Complex
    towards: Complex | None
    phases: Complex | None


def terminal_rows(solution: FaultSolution) -> dict[tuple[str, str], int]:
    """Rows of ``solution.terminals`` by element and bus, without those of a place seen from beyond."""
    t = solution.terminals
    return {
        (element, bus): k
        for k, (element, bus, side) in enumerate(zip(t.element, t.bus, t.side, strict=True))
        if not side.startswith("from ")
    }


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


def allowed_by(
    looked: Looked,
) -> tuple[Bools, float | None]:
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


def _displacement(solution: FaultSolution, bus: str) -> complex | None:
    at = solution.index.get(bus)
    if at is None or solution.undefined[at]:
        return None
    return complex(solution.voltage_sequence[0, at])
