"""Installations for the tests of settings, and what a relay sees there by full solutions alone."""

from __future__ import annotations

import cmath
import math
from collections.abc import Iterator

import numpy as np
from msgspec.structs import replace

from seqfault.case.quantities import Quantity
from seqfault.case.reader import case_from_tree
from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.case.text import parse_text
from seqfault.faults.kinds import fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.studies.relays import Relay
from seqfault.studies.settings_places import Spot, spots
from seqfault.studies.settings_states import State

RING = """\
title = "Two boards in a ring, 11 kV"
frequency = "50 Hz"

[buses]
grid = "33 kV"
main = "11 kV"
east = "11 kV"
west = "11 kV"
low = "0.4 kV"

[infeeds.utility]
bus = "grid"
three_phase = "600 MVA"
x_over_r = 10
line_ground = "1 kA"
x0_over_r0 = 0.3

[transformers.T1]
vector_group = "Dyn11"
rating = "10 MVA"
hv = { bus = "grid", voltage = "33 kV" }
lv = { bus = "main", voltage = "11 kV", neutral = "NER" }
impedance = "10 %"
x_over_r = 20
z0_over_z1 = 0.9

[transformers.T2]
vector_group = "Dyn11"
rating = "1 MVA"
hv = { bus = "east", voltage = "11 kV" }
lv = { bus = "low", voltage = "0.4 kV", neutral = "solid" }
impedance = "5 %"
x_over_r = 6
z0_over_z1 = 0.95

[neutrals.NER]
resistance = "25 ohm"
duration = "10 s"
continuous = "40 A"
temperature_rise = "600 K"

[lines.E]
from = "main"
to = "east"
length = "2 km"
z1 = "0.125+j0.096 ohm/km"
z0 = "0.6+j0.3 ohm/km"
c1 = "0.42 uF/km"
c0 = "0.42 uF/km"

[lines.W]
from = "main"
to = "west"
length = "3 km"
count = 2
z1 = "0.2+j0.1 ohm/km"
z0 = "0.9+j0.35 ohm/km"
c1 = "0.3 uF/km"
c0 = "0.3 uF/km"

[lines.X]
from = "east"
to = "west"
length = "1.5 km"
z1 = "0.2+j0.1 ohm/km"
z0 = "0.9+j0.35 ohm/km"
c1 = "0.3 uF/km"
c0 = "0.3 uF/km"

[generators.G]
bus = "west"
rating = "4 MVA"
voltage = "11 kV"
subtransient = "16 %"
transient = "24 %"
synchronous = "190 %"
x2 = "18 %"
resistance = "1 %"
neutral = "isolated"
c0 = "0.05 uF"

[motors.M]
bus = "east"
rating = "800 kVA"
voltage = "11 kV"
locked_rotor = 5.5
x_over_r = 7
c0 = "0.03 uF"

[current_transformers.ring]
ratio = "400/1 A"
class = "5P20"
connection = "residual"
burden = "10 VA"
connected_burden = "2.5 ohm"
winding_resistance = "2 ohm"

[current_transformers.core]
ratio = "50/1 A"
class = "10P10"
connection = "core-balance"

[current_transformers.star]
ratio = "300/1 A"
class = "5P10"
connection = "neutral"

[relays.E-main]
at = "E@main"
measures = "residual"
ct = "ring"
vt = "11 kV/110 V"
direction = "forward"
characteristic_angle = "-15 deg"
polarisation = "residual-voltage"
pickup = "20 A"
curve = "IEC standard inverse"
multiplier = 0.1
protects = ["E"]

[relays.E-east]
at = "E@east"
measures = "residual"
ct = "ring"
vt = "11 kV/110 V"
direction = "forward"
characteristic_angle = "-15 deg"
polarisation = "residual-voltage"
pickup = "16 A"
curve = "definite"
delay = "0.3 s"
protects = ["E"]

[relays.X-east]
at = "X@east"
measures = "core-balance"
ct = "core"
pickup = "12 A"
curve = "IEC very inverse"
multiplier = 0.08
instant = { pickup = "120 A", delay = "0.05 s" }
protects = ["X"]

[relays.W-sequence]
at = "W@main"
measures = "negative-sequence"
ct = "ring"
pickup = "60 A"
curve = "IEEE very inverse"
multiplier = 0.5
protects = ["W"]

[relays.W-phase]
at = "W@main"
measures = "phase"
ct = "ring"
vt = "11 kV/110 V"
direction = "forward"
characteristic_angle = "45 deg"
polarisation = "phase-voltage"
pickup = "100 A"
curve = "IEC standard inverse"
multiplier = 0.2
protects = ["W"]

[relays.T1-neutral]
at = "NER"
measures = "neutral"
ct = "star"
pickup = "30 A"
curve = "IEC standard inverse"
multiplier = 0.4
protects = ["main", "east", "west", "W", "M", "G", "T1.lv", "T2.hv"]
backs_up = ["E-main", "E-east", "X-east"]

[relays.board]
at = "T1@main"
measures = "neutral-voltage"
vt = "11 kV/110 V"
pickup = "8 %"
curve = "definite"
delay = "3 s"
protects = ["main"]
backs_up = ["T1-neutral"]

[demands]
fault_resistances = ["0 ohm", "12 ohm"]
see = 1.5
keep_still = 1.2
least = ["base", "open"]
tight = "10 %"
margin = { breaker = "0.08 s", safety = "0.03 s" }

[scenarios.open]
out = ["G", "M"]
open = ["X@west"]

[scenarios.open.infeeds.utility]
three_phase = "250 MVA"
"""


def case_of(text: str = RING, *changes: tuple[str, str]) -> Case:
    """The case of ``text`` with each old part, which must be there, replaced by its new part."""
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    return case_from_tree(parse_text(text.encode(), "ring.toml"), "ring.toml")


def heated(case: Case, ratio: float) -> Case:
    """``case`` with the neutral resistors that have a temperature rise ``ratio`` times their ohms."""
    hot = {}
    for name, record in case.neutrals.items():
        if record.temperature_rise is None:
            continue
        if record.resistance is not None:
            ohm = record.resistance.value
        else:
            assert record.current is not None
            assert record.voltage is not None
            ohm = record.voltage.value / math.sqrt(3) / record.current.value
        own = Quantity(ohm * ratio, "impedance", "")
        hot[name] = replace(record, resistance=own, current=None, voltage=None)
    return replace(case, neutrals={**case.neutrals, **hot})


class Referee:
    """Full solutions of one state, by machine and by resistors hot.

    Lines are cut where the study cuts them, ``points`` to a line: a line of more sections, each a π,
    differs from one of fewer by some millionths. ``alone`` cuts them at the fault only.
    """

    def __init__(self, case: Case, state: str, ratio: float, points: int = 3, alone: bool = False) -> None:
        own = in_state(case, state)
        self.cases = {False: own, True: heated(own, ratio)}
        self.networks: dict[tuple[str, bool, str], Network] = {}
        self.spots = list(spots(own, points))
        self.alone = alone

    def solve(self, spot: Spot, kind: str, ohm: float, machine: str, hot: bool) -> FaultSolution:
        """One fault, the breaker of ``spot`` opened."""
        key = (machine, hot, spot.opened)
        if key not in self.networks:
            network = Network(self.cases[hot], machine=machine)  # type: ignore[arg-type]
            if not self.alone:
                places = [each.place for each in self.spots if each.opened == spot.opened]
                network = network.located(places, [spot.opened] if spot.opened else [])
            self.networks[key] = network
        network = self.networks[key]
        also = [fault_at(spot.opened, "open-three")] if spot.opened else []
        zf, zg = (ohm, 0) if kind == "line-ground" else (0, ohm)
        return network.solve([fault_at(spot.place, kind, zf=zf, zg=zg), *also])


def measured(solution: FaultSolution, relay: Relay) -> float:
    """What ``relay`` measures of ``solution``, 0 where its direction forbids."""
    t = solution.terminals
    rows = [
        k
        for k in range(len(t.element))
        if (t.element[k], t.bus[k]) == (relay.element, relay.bus) and not t.side[k].startswith("from ")
    ]
    star = {s.name: s for s in solution.star_points}.get(relay.star)
    if relay.measures == "neutral":
        assert star is not None
        return abs(star.current)
    if relay.measures == "neutral-voltage":
        return abs(solution.at(relay.bus).sum() / 3)
    phases = t.phases[:, rows[0]] / t.count[rows[0]]
    volts = solution.at(relay.bus)
    turn = cmath.exp(1j * math.radians(relay.characteristic_angle_deg or 0))
    a = cmath.exp(2j * math.pi / 3)
    if relay.measures == "negative-sequence":
        return float(abs(phases[0] + a**2 * phases[1] + a * phases[2]) / 3)
    if relay.measures == "phase":
        best = 0.0
        for k in range(3):
            by = 1j * (volts[(k + 1) % 3] - volts[(k + 2) % 3])
            if relay.direction and abs(by) < 1e-3:  # nothing is left of 11 kV to compare with
                continue
            if not relay.direction or abs(cmath.phase(phases[k] / (by * turn))) <= math.pi / 2:
                best = max(best, abs(phases[k]))
        return best
    residual, by = complex(phases.sum()), -complex(volts.sum()) * turn
    if relay.direction and (not by or abs(cmath.phase(residual * by.conjugate())) > math.pi / 2):
        return 0.0
    return abs(residual)


def sampled(state: State, every: int) -> Iterator[tuple[int, Spot, str, bool]]:
    """Every so manieth case of a state: its number, place, kind, and whether resistors are hot."""
    forms = state.forms
    for case in range(0, len(forms.spot), every):
        kind = ("line-ground", "line-line-ground")[int(forms.kind[case])]
        yield case, forms.spots[int(forms.spot[case])], kind, bool(forms.world[case])


def ohms(*values: float) -> np.ndarray:  # type: ignore[type-arg]  # floats
    return np.array(values, float)
