from __future__ import annotations

import re

import numpy as np
import pytest

from seqfault import Network, compare
from seqfault.report.numbers import figures
from tests.cli.console import PLANT, Run, Write, unearthed


def test_currents_are_those_of_the_solutions(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main", "--width", "100")
    assert page.code == 0
    solutions = compare(plant, "main").solutions
    for k, phase in enumerate("abc"):
        cells = [c.lstrip(">") for c in page.row(f"phase {phase} ")[::2]]
        expected = [abs(s.current[k]) for s in solutions]
        assert cells == [figures(v) if v > 1e-6 else "0" for v in expected]
    earth = [c.lstrip(">") for c in page.row("to earth (3I0)")[::2]]
    assert earth == [figures(abs(s.residual)) for s in solutions]


def test_shares_refer_to_the_three_phase_current(run: Run, plant: Network) -> None:
    three, _, _, ground = compare(plant, "main").solutions
    share = abs(ground.current[0]) / abs(three.current[0])
    assert run("compare", PLANT, "main").row("phase a ")[-1] == f"{share:.3f}"


def test_paths_home_carry_what_the_solution_says(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main")
    ground = compare(plant, "main").solutions[-1]
    for path in ground.home:
        current, share = page.row(path.path)[-2:]
        assert current.lstrip(">") == figures(abs(path.current))
        assert share == f"{abs(path.current) / abs(ground.residual):.3f}"


def test_voltages_are_per_cent_of_the_phase_voltage(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main")
    ground = compare(plant, "main").solutions[-1]
    phase_voltage = 11e3 / np.sqrt(3)
    for k, phase in enumerate("abc"):
        cell = page.row(f"phase {phase} to earth")[-1].lstrip(">")
        assert float(cell) == pytest.approx(100 * abs(ground.at("main")[k]) / phase_voltage, abs=0.6)


def test_closing_lines_name_kind_and_value(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main")
    answer = compare(plant, "main")
    assert page.row("Greatest current")[:3] == [figures(answer.greatest.value), "A", "three-phase"]
    assert page.row("Least current")[:2] == [figures(answer.least.value), "A"]
    clear = answer.least_clear_of_earth
    factor = answer.earth_fault_factor
    assert clear is not None
    assert factor is not None
    assert f"without earth: {figures(clear.value)} A, line-line" in page.out
    assert page.row("Earth-fault factor")[0] == f"{factor.value:.2f}"


def test_the_greatest_of_a_row_is_marked_without_colour(run: Run) -> None:
    page = run("compare", PLANT, "main", "--color", "never")
    assert "\x1b" not in page.out
    assert page.row("phase a to earth") == ["0", "100", ">150", "0"]
    assert sum(cell.startswith(">") for cell in page.row("to earth (3I0)")) == 1


def test_every_assumption_and_the_caution_are_said(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main", "--width", "200")
    flat = page.flat
    for assumption in plant.model.assumptions:
        assert str(assumption) in flat
    assert "licensed engineer" in flat


@pytest.mark.parametrize("width", [60, 80, 100, 132])
def test_no_line_is_wider_than_asked(run: Run, width: int) -> None:
    page = run("compare", PLANT, "main", "--width", str(width))
    assert max(map(len, page.out.splitlines())) <= width
    assert page.out.count("line-ground") >= 2


def test_panels_lose_no_number(run: Run) -> None:
    def numbers(text: str) -> list[str]:
        return sorted(re.findall(r"\d+\.?\d*", text.partition("Greatest")[0]))

    wide = run("compare", PLANT, "main", "--width", "120").out
    narrow = run("compare", PLANT, "main", "--width", "50").out
    assert set(numbers(wide)) <= set(numbers(narrow))


def test_fault_impedance_is_used_and_said(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main", "--zf", "0.5 ohm", "--zg", "2 ohm", "--width", "120")
    assert "zf 0.5 ohm, zg 2 ohm to earth" in page.out
    ground = compare(plant, "main", zf=0.5, zg=2).solutions[-1]
    assert page.row("phase a ")[-2].lstrip(">") == figures(abs(ground.current[0]))


def test_json_holds_four_faults_and_the_extremes(run: Run, plant: Network) -> None:
    tree = run("compare", PLANT, "main", "--format", "json").tree
    answer = compare(plant, "main")
    assert [f["fault"]["kind"] for f in tree["faults"]] == [s.fault.kind.name for s in answer.solutions]
    assert tree["greatest"]["value"] == answer.greatest.value
    assert tree["scenario"] == "base"
    assert tree["format"] == 1


def test_all_scenarios_give_an_answer_each(run: Run) -> None:
    page = run("compare", PLANT, "main", "--scenario", "all")
    for state in ("base", "one-transformer", "island"):
        assert f"state: {state}" in page.out
    tree = run("compare", PLANT, "main", "--scenario", "all", "--format", "json").tree
    assert [a["scenario"] for a in tree["answers"]] == ["base", "one-transformer", "island"]
    assert "case" not in tree["answers"][0]


def test_states_without_the_place_are_left_out_aloud(run: Run, write: Write) -> None:
    path = write(unearthed(scenarios={"cut": {"out": ["main"]}, "same": {}}))
    result = run("compare", path, "main", "--scenario", "all", "--format", "json")
    assert [a["scenario"] for a in result.tree["answers"]] == ["base", "same"]
    assert "state cut" in result.err
