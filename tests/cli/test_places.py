"""Faults anywhere on the command line: places, open poles, several at once, steps, along a line."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import pytest

from seqfault import Network
from tests.cli.console import PLANT, Run, Write

RIDGE = Path(__file__).parents[2] / "cases" / "ridge.toml"
MOOR = Path(__file__).parents[2] / "cases" / "moor.toml"
LINE = "brindlow-ridge"


def test_a_point_along_a_line_is_fed_from_both_its_ends(run: Run) -> None:
    page = run("fault", RIDGE, f"{LINE}@37%", "--width", "100")
    assert page.code == 0
    assert page.row(f"{LINE} from brindlow-220")
    assert page.row(f"{LINE} from ridge-220")
    tree = run("fault", RIDGE, f"{LINE}@37%", "--format", "json").tree
    here = [f for f in tree["flows"] if f["bus"] == f"{LINE}@37%"]
    assert sorted(f["side"] for f in here) == ["from brindlow-220", "from ridge-220"]
    assert tree["voltages"][f"{LINE}@37%"]["a"] == [0, 0]


def test_options_behind_and_are_those_of_the_fault_named_there(run: Run) -> None:
    arguments = (
        "--kind",
        "line-ground",
        "--phases",
        "b",
        "--and",
        "tarn",
        "--phases",
        "c",
        "--zf",
        "2 ohm",
    )
    tree = run("fault", MOOR, "hollin", *arguments, "--format", "json").tree
    assert (tree["fault"]["place"], tree["fault"]["phases"], tree["fault"]["zf"]) == ("hollin", "b", [0, 0])
    (other,) = tree["also"]
    assert (other["fault"]["place"], other["fault"]["phases"]) == ("tarn", "c")
    assert other["fault"]["zf"] == [2, 0]
    page = run("fault", MOOR, "hollin", *arguments, "--width", "80")
    assert "Into each fault" in page.out
    assert "Who feeds tarn" in page.out


def test_a_broken_conductor_under_load_tells_what_passed_and_what_stands_across(run: Run) -> None:
    common = ("fault", MOOR, "tarn-hamlet@50%", "--kind", "open-one", "--scenario", "winter")
    page = run(*common, "--fallen", "load", "--width", "100")
    assert page.code == 0
    for words in ("Through the break", "Across the break", "Before the fault", "- by the fault"):
        assert words in page.out
    tree = run(*common, "--format", "json").tree
    assert tree["loaded"] is True
    assert tree["break"]["through"]["a"] == [0, 0]
    assert tree["break"]["through_before"]["a"][0] == pytest.approx(2.66, abs=0.01)
    assert "before" in tree["flows"][0]
    assert "before" in tree["voltages"]["tarn"]


def test_loaded_is_asked_for_on_the_command_line_too(run: Run) -> None:
    flat = run("fault", MOOR, "tarn-hamlet@tarn", "--kind", "open-one")
    assert "ask for the loaded state" in flat.flat
    loaded = run(
        "fault", MOOR, "tarn-hamlet@tarn", "--kind", "open-one", "--loaded", "--without", "turbines"
    )
    assert loaded.code == 0
    assert "ask for the loaded state" not in loaded.flat


def test_a_load_that_cannot_be_carried_ends_with_code_3(run: Run, tmp_path: Path) -> None:
    heavy = tmp_path / "heavy.toml"
    heavy.write_text(MOOR.read_text().replace('power = "310 kW"', 'power = "310 MW"'))
    result = run("fault", heavy, "tarn", "--scenario", "winter")
    assert result.code == 3
    assert 'bus "thwaite-lv"' in result.err
    assert "Mvar off" in result.err


def test_compare_shows_what_another_terminal_sees(run: Run, plant: Network) -> None:
    page = run("compare", PLANT, "main", "--at", "T1@supply", "--width", "100")
    assert page.code == 0
    seen = plant.fault("main", "line-line")
    t = seen.terminals
    k = next(k for k in range(len(t.element)) if (t.element[k], t.bus[k]) == ("T1", "supply"))
    tree = run("compare", PLANT, "main", "--at", "T1@supply", "--format", "json").tree
    assert tree["seen_at"] == "T1@supply"
    assert tree["seen"][1]["b"][0] == pytest.approx(abs(t.phases[1, k]), rel=1e-9)
    wrong = run("compare", PLANT, "main", "--at", "main")
    assert wrong.code == 2
    assert "ELEMENT@BUS" in wrong.err


STEPS = """
[[steps]]
title = "flashover"
faults = [{ place = "main", phases = "b", zf = "1 ohm" }]
[[steps]]
faults = [{ place = "main", kind = "line-line-ground", phases = "bc" }]
open = ["T1@main"]
"""


def test_steps_stand_side_by_side(run: Run, tmp_path: Path, plant: Network) -> None:
    path = tmp_path / "steps.toml"
    path.write_text(STEPS)
    page = run("fault", PLANT, "--steps", path, "--width", "100")
    assert page.code == 0
    assert "1 flashover: main line-ground (k1), phase b, zf 1 ohm" in page.flat
    tree = run("fault", PLANT, "--steps", path, "--format", "json").tree
    first, second = tree["steps"]
    alone = plant.fault("main", "line-ground", phases="b", zf=1)
    assert first["current"]["b"][0] == pytest.approx(abs(alone.current[1]), rel=1e-12)
    assert second["also"][0]["fault"]["kind"] == "open-three"
    rows = list(csv.DictReader(io.StringIO(run("fault", PLANT, "--steps", path, "--format", "csv").out)))
    assert {row["place"].partition(":")[0] for row in rows} == {"step 1", "step 2"}


def test_everything_wrong_with_steps_is_told_at_once(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "steps.toml"
    path.write_text(
        'other = 1\n[[steps]]\nfaults = [{ plaice = "main" }, { place = "main", zf = 3 }]\nopen = [4]\n'
        "[[steps]]\ntitle = 7\n"
    )
    result = run("fault", PLANT, "--steps", path)
    assert result.code == 2
    for words in (
        'there is no key "other"', 'step 1, faults 1: there is no field "plaice"; did you mean "place"?',
        "step 1, faults 1: its place is missing", "step 1, faults 2, zf: 3", "step 1, open 1: 4",
        "step 2, title: 7",
    ):  # fmt: skip
        assert words in result.err
    assert "Traceback" not in result.err
    result = run("fault", PLANT, "main", "--steps", path)
    assert result.code == 2
    assert "leave out PLACE" in result.err
    assert run("fault", PLANT, "--steps", tmp_path / "none.toml").code == 2
    path.write_text('[[steps]]\nfaults = ["nowhere"]\n[[steps]]\nfaults = ["mian"]\n')
    result = run("fault", PLANT, "--steps", path)
    assert result.code == 2
    assert "step 1:" in result.err
    assert "step 2:" in result.err


def test_along_scans_a_line(run: Run) -> None:
    page = run("along", RIDGE, LINE, "--points", "3", "--kind", "line-ground", "--width", "80")
    assert page.code == 0
    assert max(map(len, page.out.splitlines())) <= 80
    assert page.row("50 %")
    tree = run("along", RIDGE, LINE, "--points", "3", "--kind", "line-ground", "--format", "json").tree
    (scan,) = tree["scans"]
    assert [p["fraction"] for p in scan["points"]] == [0, 0.5, 1]
    one = run("fault", RIDGE, f"{LINE}@50%", "--format", "json").tree
    assert scan["points"][1]["current"]["a"] == one["current"]["a"]
    rows = list(csv.DictReader(io.StringIO(run("along", RIDGE, LINE, "--format", "csv").out)))
    assert len({row["place"] for row in rows}) == 11


def test_along_with_the_far_end_open(run: Run) -> None:
    tree = run(
        "along", RIDGE, LINE, "--far-end-open", "--kind", "line-ground", "--points", "2", "--format", "json"
    ).tree
    assert tree["opened"] == "ridge-220"
    far = [p["ends"][1]["residual"][0] for p in tree["scans"][0]["points"]]
    assert far == [0, 0]
    other = run("along", RIDGE, LINE, "--far-end-open", "brindlow-220", "--format", "json").tree
    assert other["opened"] == "brindlow-220"
    assert run("along", RIDGE, LINE, "--far-end-open", "nowhere").code == 2
    assert run("along", RIDGE, "TR1").code == 2
    assert run("along", RIDGE, LINE, "--points", "1").code == 2


@pytest.mark.parametrize("suffix", ["svg", "png", "pdf"])
def test_along_draws(run: Run, tmp_path: Path, suffix: str) -> None:
    pytest.importorskip("matplotlib")
    target = tmp_path / f"line.{suffix}"
    result = run("along", RIDGE, LINE, "--points", "3", "--plot", target)
    assert result.code == 0
    assert target.stat().st_size > 1000
    again = run("along", RIDGE, LINE, "--points", "3", "--plot", target)
    assert again.code == 2
    assert "the file exists" in again.err
    assert run("along", RIDGE, LINE, "--plot", tmp_path / "line.gif").code == 2


def test_places_with_names_of_markup_are_printed_as_they_are(run: Run, write: Write) -> None:
    tree = {
        "frequency": "50 Hz",
        "buses": {"[red]a": "10 kV", "=b": "10 kV"},
        "infeeds": {"Q": {"bus": "[red]a", "z1": "j1 ohm", "z0": "j1 ohm"}},
        "lines": {"[b]L": {"from": "[red]a", "to": "=b", "z1": "j1 ohm", "z0": "j3 ohm"}},
    }
    path = write(tree)
    page = run("fault", path, "[b]L@50%")
    assert page.code == 0
    assert "[b]L from [red]a" in page.out
    answer = run("fault", path, "[b]L@50%", "--format", "json").tree
    assert json.dumps(answer)
    assert "'=b" in run("fault", path, "[b]L@50%", "--format", "csv").out
