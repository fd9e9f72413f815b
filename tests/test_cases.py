"""The installations in ``cases``: all states solve, and what their opening comments claim holds.

Hand formulas are written out here; none of them is taken from the package.
"""

from __future__ import annotations

from functools import cache
from math import pi, sqrt
from pathlib import Path

import numpy as np
import pytest

from seqfault.case.reader import read_case
from seqfault.case.records import Case
from seqfault.faults.kinds import KINDS
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution

FOLDER = Path(__file__).parents[1] / "cases"
FILES = sorted(path.stem for path in FOLDER.glob("*.toml"))


@cache
def case_of(name: str) -> Case:
    return read_case(FOLDER / f"{name}.toml")


@cache
def network(name: str, state: str | None = None) -> Network:
    return Network(case_of(name), state)


def states() -> list[tuple[str, str | None]]:
    return [(name, state) for name in FILES for state in (None, *case_of(name).scenarios)]


def fault(name: str, bus: str, kind: str = "line-ground", state: str | None = None) -> FaultSolution:
    return network(name, state).fault(bus, kind)


def size(name: str, bus: str, kind: str = "line-ground", state: str | None = None) -> float:
    """Greatest phase current into the fault, A."""
    return float(np.abs(fault(name, bus, kind, state).current).max())


def home(solution: FaultSolution) -> dict[str, complex]:
    return {path.path: path.current for path in solution.home}


def charging(solution: FaultSolution) -> complex:
    """What comes home through capacitance, A."""
    return sum(current for path, current in home(solution).items() if "capacitance" in path)


def factor(name: str, bus: str, state: str | None = None) -> float:
    solution = fault(name, bus, "line-ground", state)
    factors = solution.earth_fault_factor
    assert factors is not None
    return float(factors[solution.index[bus]])


@pytest.mark.parametrize("name", FILES)
def test_case_opens_with_what_it_shows(name: str) -> None:
    text = (FOLDER / f"{name}.toml").read_text(encoding="utf-8")
    assert text.startswith("# ")
    assert "ook at" in text.split("title =")[0]
    assert case_of(name).title
    assert case_of(name).warnings == ()


# The states that are there to show a warning of the trade.
EXPECTED = {
    ("mill", None): (
        'neutrals "NER-A", "NER-B" earth the same network in this state: 800 A, 800 A each alone,'
        " 1600 A together",
    ),
    ("quarry", "ring-closed"): (
        'neutrals "NER-A", "NER-B" earth the same network in this state: 400 A, 399 A each alone,'
        " 799 A together",
    ),
    ("moor", "coil-out"): (
        'bus "moor-a", "tarn", "hollin", "hamlet", "cairn": this state takes away what earths the network'
        " in the base case; only its capacitance is left (36.2 A in an earth fault)",
    ),
}


@pytest.mark.parametrize(("name", "state"), states())
def test_every_fault_at_every_bus_solves(name: str, state: str | None) -> None:
    here = network(name, state)
    assert here.model.warnings == EXPECTED.get((name, state), ())
    for bus in here.buses:
        three_phase = abs(here.fault(bus, "three-phase").current[0])
        assert three_phase > 500
        for kind in (name for name, kind in KINDS.items() if not kind.series):
            solution = here.fault(bus, kind)
            assert np.isfinite(solution.current).all()
            sound = ["abc".index(phase) for phase in "abc" if phase not in solution.fault.phases]
            assert np.abs(solution.current[sound]).max(initial=0) <= 1e-9 * three_phase
            if solution.fault.kind.earth:
                returned = sum(home(solution).values())
                assert abs(returned - solution.residual) <= 1e-7 * three_phase


def test_small() -> None:
    # 5249 A is 100 MVA at 11 kV; 750 MVA and 9.5 % of 10 MVA on that base, both nearly reactive.
    assert size("small", "main", "three-phase") == pytest.approx(5249 / (100 / 750 + 0.95), rel=2e-3)
    assert size("small", "main", "three-phase") == pytest.approx(4800, rel=0.02)
    assert size("small", "main") == pytest.approx(300, rel=0.02)
    assert size("small", "grid") == 0


def test_quarry_three_phase_and_line_ground_at_main_a() -> None:
    transformer_and_utility = 5249 / (100 / 750 + 10.1 / 12.5)
    three_phase = size("quarry", "main-a", "three-phase")
    assert 6500 < three_phase < 7500
    assert three_phase / transformer_and_utility == pytest.approx(1.2, abs=0.05)
    solution = fault("quarry", "main-a")
    assert abs(solution.residual) == pytest.approx(400, rel=0.01)
    paths = home(solution)
    assert len(paths) == 2
    assert abs(paths["NER-A"]) == pytest.approx(400, rel=0.01)
    # Feeders with count, ring-1, ring-2 whose far end is open, and four motors, in uF to earth.
    farads = 1e-6 * (2 * 0.62 * 0.37 + 0.45 * 0.37 + 2.2 * 0.29 + 0.03 + 3 * 0.025)
    by_hand = sqrt(3) * 11e3 * 2 * pi * 50 * farads
    assert abs(charging(solution)) == pytest.approx(by_hand, rel=0.01)
    apart = np.degrees(np.angle(charging(solution) / paths["NER-A"]))
    assert apart == pytest.approx(90, abs=2)
    assert 1.7 < factor("quarry", "main-a") < 1.8


def test_quarry_delta_keeps_earth_faults_apart() -> None:
    solution = fault("quarry", "main-a")
    ends = zip(solution.terminals.element, solution.terminals.side, strict=True)
    residual = dict(zip(ends, np.abs(solution.terminals.residual), strict=True))
    assert residual[("T1", "hv")] == 0
    assert residual[("T1", "lv")] == pytest.approx(400, rel=0.01)
    for unit in ("T-primary", "T-secondary", "T-workshop"):
        assert residual[(unit, "hv")] == 0
        assert residual[(unit, "lv")] == 0
    ratio = size("quarry", "primary-lv") / size("quarry", "primary-lv", "three-phase")
    assert ratio == pytest.approx(1, abs=0.05)


def test_quarry_states() -> None:
    assert size("quarry", "main-a", "three-phase", "minimum") == pytest.approx(4800, rel=0.01)
    # 0.95 of nominal drives 380 A through 400 A worth of resistor, less the rest of the loop.
    assert size("quarry", "main-a", "line-ground", "minimum") == pytest.approx(378, abs=1)
    for board in ("main-a", "main-b"):
        joined = fault("quarry", board, "line-ground", "ring-closed")
        assert abs(joined.residual) == pytest.approx(750, rel=0.01)
        assert min(abs(home(joined)[name]) for name in ("NER-A", "NER-B")) > 350
        assert size("quarry", board, "line-ground", "standby") == pytest.approx(100, rel=0.05)
    assert size("quarry", "main-a", "three-phase", "standby") == pytest.approx(1200, rel=0.03)


@pytest.mark.parametrize("bus", ["works", "hall-north", "hall-south", "outlying", "services"])
def test_pumps_charging_current_is_the_hand_formula(bus: str) -> None:
    cables = 2 * 3.2 * 0.46 + 0.55 * 0.36 + 0.7 * 0.36 + 0.3 * 0.46
    motors = 4 * 0.022 + 3 * 0.018
    assert [cables, motors] == pytest.approx([3.532, 0.142])
    by_hand = sqrt(3) * 6600 * 2 * pi * 50 * (cables + motors) * 1e-6
    assert by_hand == pytest.approx(13.2, abs=0.05)
    solution = fault("pumps", bus)
    # The formula leaves series impedances out, which lift the current by a few parts in a thousand.
    assert abs(solution.residual) == pytest.approx(by_hand, rel=5e-3)
    assert home(solution).keys() == {path for path in home(solution) if "capacitance" in path}
    assert factor("pumps", bus) == pytest.approx(sqrt(3), rel=5e-3)
    assert size("pumps", bus, "three-phase") > 5000


def test_pumps_line_voltages_stay() -> None:
    a, b, c = fault("pumps", "works").at("works")
    assert [abs(b - a), abs(c - b), abs(a - c)] == pytest.approx([6600] * 3, rel=5e-3)


def test_pumps_states() -> None:
    resistor = fault("pumps", "works", "line-ground", "resistor")
    paths = home(resistor)
    assert abs(paths["NER-P"]) == pytest.approx(50, rel=0.02)
    assert abs(resistor.residual) == pytest.approx(51, rel=5e-3)
    at_right_angles = float(np.hypot(abs(paths["NER-P"]), abs(charging(resistor))))
    assert abs(resistor.residual) == pytest.approx(at_right_angles, rel=0.01)
    base = size("pumps", "works")
    assert base - size("pumps", "works", "line-ground", "short") == pytest.approx(10.8, abs=0.05)
    assert size("pumps", "works", "line-ground", "one-cable") == pytest.approx(7.9, abs=0.05)


def test_ridge_earth_current_comes_home_through_many_neutrals() -> None:
    paths = home(fault("ridge", "ridge-110"))
    assert abs(paths["TR1.lv"]) > abs(paths["TE.hv"]) > abs(paths["NL-C"]) > 400
    assert abs(paths["TR2.lv"]) == 0


def test_ridge_states() -> None:
    def share(state: str | None) -> float:
        line_ground = size("ridge", "ridge-110", "line-ground", state)
        return line_ground / size("ridge", "ridge-110", "three-phase", state)

    assert share(None) == pytest.approx(0.88, abs=0.005)
    assert share("tr1-out") == pytest.approx(0.60, abs=0.005)
    still = home(fault("ridge", "tollmere-220", "line-ground", "standstill"))
    assert abs(still["GT-tollmere.hv"]) > 1000
    assert size("ridge", "ridge-220", "three-phase", "line-out") < size("ridge", "ridge-220", "three-phase")


def test_ridge_high_resistance_and_no_earth() -> None:
    assert size("ridge", "tollmere-gen") == pytest.approx(10, abs=0.5)
    # 960 ohm at 1.05 of the phase voltage of 15.75 kV.
    driven = 1.05 * 15750 / sqrt(3) / 960
    assert abs(home(fault("ridge", "tollmere-gen"))["NR-T"]) == pytest.approx(driven, rel=5e-3)
    assert size("ridge", "eskerby-20") == 0
    assert factor("ridge", "eskerby-20") == pytest.approx(sqrt(3))


def flows(solution: FaultSolution) -> dict[tuple[str, str], complex]:
    """Earth current (3I0) into each terminal by element and bus, A."""
    ends = zip(solution.terminals.element, solution.terminals.bus, strict=True)
    return dict(zip(ends, solution.terminals.residual.tolist(), strict=True))


def test_moor_coil_leaves_its_loss_and_its_detuning() -> None:
    overhead, cables, town = (14 + 12 + 9 + 7) * 4.9e-9, 2 * 6.5 * 0.24e-6, (3.2 + 5.4) * 0.24e-6
    ampere_a_farad = sqrt(3) * 20e3 * 2 * pi * 50
    capacitive = ampere_a_farad * (overhead + cables)
    assert capacitive == pytest.approx(36.2, abs=0.05)
    left = capacitive * float(np.hypot(0.05, 1.05 * 0.025))
    for bus in ("moor-a", "tarn", "hollin", "hamlet", "cairn"):
        solution = fault("moor", bus)
        assert abs(charging(solution)) == pytest.approx(capacitive, rel=5e-3)
        coil = 1.05 * capacitive * float(np.hypot(1, 0.025))
        assert abs(home(solution)["PC"]) == pytest.approx(coil, rel=5e-3)
        assert abs(solution.residual) == pytest.approx(left, rel=0.02)
        assert abs(solution.residual) == pytest.approx(2.0, abs=0.05)
        assert factor("moor", bus) == pytest.approx(sqrt(3), rel=2e-3)
    # The scenario does not retune: what the town's cables draw is not compensated.
    tied = capacitive * (1 - 1.05) + ampere_a_farad * town
    assert size("moor", "tarn", "line-ground", "tied") == pytest.approx(21, abs=0.2)
    assert size("moor", "moor-b", "line-ground", "tied") == pytest.approx(tied, rel=0.02)
    # 20 kV across 190 ohm at phase voltage, beside the loss of the coil itself.
    resistive = 20e3 / sqrt(3) / 190 + 1.05 * 0.025 * capacitive
    assert size("moor", "moor-a", "line-ground", "resistor") == pytest.approx(resistive, rel=0.01)
    assert 58 < size("moor", "tarn", "line-ground", "resistor") < 62
    assert size("moor", "moor-a", "line-ground", "coil-out") == pytest.approx(capacitive, rel=5e-3)


def test_moor_tie_and_open_end() -> None:
    tied = fault("moor", "tarn", "line-ground", "tied")
    through = flows(tied)
    town = sqrt(3) * 20e3 * 2 * pi * 50 * (3.2 + 5.4) * 0.24e-6
    assert abs(through[("coupler", "moor-a")]) == pytest.approx(town, rel=0.05)
    assert through[("coupler", "moor-b")] == pytest.approx(-through[("coupler", "moor-a")], rel=1e-9)
    ring = flows(fault("moor", "moor-a"))
    assert ring[("hollin-tarn", "tarn")] == 0
    open_line = sqrt(3) * 20e3 * 2 * pi * 50 * 9 * 4.9e-9
    assert abs(ring[("hollin-tarn", "hollin")]) == pytest.approx(open_line, rel=0.01)


def test_moor_zigzag_windings() -> None:
    board = fault("moor", "moor-b")
    assert abs(board.residual) == pytest.approx(330, abs=1)
    assert abs(flows(board)[("ET", "moor-b")]) == pytest.approx(abs(home(board)["NR-B"]), rel=1e-9)
    assert flows(board)[("T2", "moor-b")] == pytest.approx(0, abs=1e-6)
    hamlet = fault("moor", "hamlet-lv")
    assert size("moor", "hamlet-lv") > 1.3 * size("moor", "hamlet-lv", "three-phase")
    # 0.5+j0.4 % of 160 kVA at 0.4 kV, whose base is 1 ohm.
    assert hamlet.impedance[0] == pytest.approx(0.005 + 0.004j, rel=1e-9)
    assert abs(flows(hamlet)[("T-hamlet", "hamlet")]) < 1e-6


def test_moor_coupled_lines() -> None:
    own, mutual = 22 * (0.30 + 1.24j), 18 * (0.17 + 0.74j)
    earthed = fault("moor", "moor-110", "line-ground", "tower-2-earthed")
    opened = fault("moor", "moor-110", "line-ground", "tower-2-open")
    assert abs(earthed.residual) == pytest.approx(2970, abs=5)
    assert abs(opened.residual) == pytest.approx(2745, abs=5)
    (induced,) = (line.residual for line in earthed.earthed_lines if line.name == "tower-2")
    # The currents of tower-1 at its two ends differ by its charging alone.
    through = flows(earthed)[("tower-1", "gate-110")]
    assert induced / through == pytest.approx(-mutual / own, rel=2e-3)
    assert 0.45 < abs(induced / through) < 0.5
    assert flows(opened)[("tower-2", "moor-110")] == 0
    # Of the loop over tower-1 the earthed circuit takes off Zm²/Z0; T2 and the station lie beside it.
    less = (opened.impedance[0] - earthed.impedance[0]).imag
    assert 0.7 * (mutual**2 / own).imag < less < (mutual**2 / own).imag


def test_moor_broken_conductor() -> None:
    here = network("moor", "winter")
    answers = {side: here.fault("tarn-hamlet@50%", "open-one", fallen=side) for side in ("source", "load")}
    assert abs(answers["source"].residual) == pytest.approx(1.95, abs=0.02)
    assert abs(answers["load"].residual) == pytest.approx(0.56, abs=0.01)
    for solution in answers.values():
        nominal = 400 / sqrt(3)
        left = np.sort(np.abs(solution.at("hamlet-lv"))) / nominal
        assert 0.4 < left[0] < left[1] < 0.6 < 0.95 < left[2]


def test_moor_star_points_at_110_kv() -> None:
    paths = home(fault("moor", "moor-110"))
    assert abs(paths["T2.hv"]) == pytest.approx(328, abs=1)
    assert abs(paths["AT.hv"]) > abs(paths["grid"]) > abs(paths["T2.hv"])
    assert "T1.hv" not in paths


def test_moor_turbines_feed_their_limit_nearby_only() -> None:
    limit = 1.1 * 9.2e6 / (sqrt(3) * 20e3)
    assert limit == pytest.approx(292, abs=0.5)
    near, far = fault("moor", "cairn", "three-phase"), fault("moor", "hamlet", "three-phase")
    at = near.terminals.element.index("turbines")
    assert abs(near.terminals.sequence[1, at]) == pytest.approx(limit, rel=1e-9)
    assert far.terminals.sequence[1, far.terminals.element.index("turbines")] == 0
    more = size("moor", "cairn", "three-phase") - size("moor", "cairn", "three-phase", "calm")
    assert 0.9 * limit < more < limit
    assert any('"turbines" feeds its limit' in note for note in near.notes)
    assert any('"turbines" stays silent' in note for note in far.notes)


def test_mill_both_resistors_feed_a_fault_on_the_ring() -> None:
    each = []
    for place in ("north", "south", "ring-2@50%"):
        solution = fault("mill", place)
        paths = home(solution)
        each += [abs(paths["NER-A"]), abs(paths["NER-B"])]
        assert abs(solution.residual) == pytest.approx(each[-2] + each[-1], rel=0.01)
    assert 650 < min(each) < max(each) < 760
    for state, left in (("t1-out", "NER-B"), ("t2-out", "NER-A")):
        solution = fault("mill", "south", state=state)
        assert left in home(solution)
        assert abs(solution.residual) == pytest.approx(700, rel=0.05)
    open_ring = fault("mill", "south", state="ring-open")
    assert "NER-A" not in home(open_ring)
