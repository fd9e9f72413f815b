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


# The one state that is there to show a warning of the trade.
EXPECTED = {
    ("quarry", "ring-closed"): (
        'neutrals "NER-A", "NER-B" earth the same network in this state: 400 A, 399 A each alone,'
        " 799 A together",
    )
}


@pytest.mark.parametrize(("name", "state"), states())
def test_every_fault_at_every_bus_solves(name: str, state: str | None) -> None:
    here = network(name, state)
    assert here.model.warnings == EXPECTED.get((name, state), ())
    for bus in here.buses:
        three_phase = abs(here.fault(bus, "three-phase").current[0])
        assert three_phase > 500
        for kind in KINDS:
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
