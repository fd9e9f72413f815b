"""``inspect`` of a case with relays: page, JSON and CSV say the same."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import pytest

from tests.case.installation import BASE, PROTECTION
from tests.cli.console import PLANT, Run


@pytest.fixture
def guarded(tmp_path: Path) -> Path:
    path = tmp_path / "guarded.toml"
    states = '[scenarios.night]\nout = ["F1"]\n'
    path.write_text(BASE + PROTECTION + states, encoding="utf-8")
    return path


def test_page_shows_relays_transformers_and_demands(run: Run, guarded: Path) -> None:
    page = run("inspect", guarded, "--width", "100")
    cells = {name: " ".join(page.row(name)) for name in ("F1-core", "F1-residual", "main-voltage")}
    assert cells == {
        "F1-core": "F1@main 51G 10 A 0.2 A definite, 0.1 s",
        "F1-residual": "F1@main 67N 40 A 0.1 A IEC standard inverse × 0.1",
        "main-voltage": "T1@main 59N 635.1 V 11 V definite, to be set",
    }
    assert "IEC long-time inverse × 0.1, at least 0.6 s" in page.flat
    assert " ".join(page.row("C3")) == "400/1 A residual 5P20 53.3 In, 21330 A 192 V estimated"
    assert " ".join(page.row("CN")) == "300/1 A neutral PX not known 200 V"
    assert "F1-core: measures core-balance behind 50/1 A; protects F1, pump; breaker 0.07 s" in page.flat
    assert "forward at -15°, polarised by residual-voltage; fast stage above 1600 A primary" in page.flat
    assert "in steps of 20 A of pickup, 0.01 of multiplier; protects F1;" in page.flat
    assert "backs up F1-core, F1-residual" in page.flat
    assert "to see 2 times the pickup through 0, 10 ohm in the states base" in page.flat
    assert "0.23 s behind 0.5 s" in page.flat  # (2 x 5 % + 10 %) 0.5 s + 0.08 s + 0.02 s + 0.03 s
    assert 'relay "F1-residual": polarisation not stated' in page.flat
    assert "signed by a licensed engineer" in page.flat
    assert "sees nothing" not in page.err


@pytest.mark.parametrize("width", ["60", "80", "100"])
def test_page_keeps_its_width(run: Run, guarded: Path, width: str) -> None:
    page = run("inspect", guarded, "--width", width)
    assert max(map(len, page.out.splitlines())) <= int(width)


def test_a_relay_on_an_element_that_is_out_is_warned_of(run: Run, guarded: Path) -> None:
    page = run("inspect", guarded, "--scenario", "night")
    assert 'warning: relay "F1-core", at: it sees nothing in this state; "F1" is out' in page.err
    assert 'sees nothing in this state: "F1" is out' in page.flat
    tree = run("inspect", guarded, "--scenario", "night", "--format", "json").tree
    assert 'relay "F1-core", at: it sees nothing in this state; "F1" is out' in tree["warnings"]


def test_json_and_csv(run: Run, guarded: Path) -> None:
    tree = run("inspect", guarded, "--format", "json").tree
    relays = {relay["name"]: relay for relay in tree["relays"]}
    assert relays["F1-core"]["pickup"] == {"primary": 10.0, "secondary": 0.2}
    assert relays["F1-residual"]["characteristic_angle_deg"] == pytest.approx(-15)
    assert relays["main-voltage"]["delay"] is None
    assert relays["T1-neutral"]["backs_up"] == ["F1-core", "F1-residual"]
    core = next(ct for ct in tree["current_transformers"] if ct["name"] == "C3")
    assert core["limit"] == pytest.approx(400 * 20 * 12 / 4.5)
    assert tree["demands"]["see"] == 2
    rows = list(csv.DictReader(io.StringIO(run("inspect", guarded, "--format", "csv").out)))
    values = {(r["place"], r["quantity"]): (r["value"], r["unit"], r["where"]) for r in rows}
    assert values["F1-core", "pickup, primary"] == ("10.0", "A", "F1@main")
    assert values["main-voltage", "pickup, secondary"][1:] == ("V", "T1@main")
    assert float(values["C3", "accuracy limit"][0]) == pytest.approx(core["limit"])


def test_a_case_without_relays_says_nothing_of_them(run: Run) -> None:
    page = run("inspect", PLANT)
    assert "Relays" not in page.out
    assert "Demanded" not in page.out
    tree = run("inspect", PLANT, "--format", "json").tree
    assert (tree["relays"], tree["current_transformers"], tree["demands"]) == ([], [], None)


def test_names_with_any_characters(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "odd.toml"
    relay = '[relays."[51N] =1+1"]\nat = "F1@main"\nmeasures = "residual"\ncurve = "definite"\n'
    path.write_text(BASE + relay, encoding="utf-8")
    assert "[51N] =1+1" in run("inspect", path).out
    rows = list(csv.DictReader(io.StringIO(run("inspect", path, "--format", "csv").out)))
    assert any(row["place"] == "[51N] =1+1" for row in rows)
