"""``operate`` on the command line: pages, JSON and CSV agree; replay, exit codes, charts, bad input."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import pytest

from tests.cli.console import PLANT, Run
from tests.studies.setting_plants import RING

RADIAL = Path(__file__).parents[1] / "studies" / "radial.toml"


@pytest.fixture
def ring(tmp_path: Path) -> Path:
    path = tmp_path / "ring.toml"
    path.write_text(RING, encoding="utf-8")
    return path


def values(text: str) -> dict[tuple[str, str], str]:
    return {(r["where"], r["quantity"]): r["value"] for r in csv.DictReader(io.StringIO(text))}


def test_the_page_says_who_acts_and_who_does_not(run: Run) -> None:
    page = run("operate", RADIAL, "N@50%", "--width", "80")
    assert page.code == 0
    assert page.out.index("N-earth  51G") < page.out.index("board-earth  51G") < page.out.index("S-earth")
    assert page.row("N-earth")[-1] == "N@main"
    assert (
        "N-earth acts first, in 0.393 s; N@main would be open 0.493 s after the fault began." in page.flat
    )
    assert page.row("S-earth", "Which do not act")[-2:] == ["below", "pickup"]
    assert 'relay "board-earth": the case does not say what it trips' in page.flat
    assert "signed by a licensed engineer" in page.flat


def test_nobody_acts(run: Run, ring: Path) -> None:
    page = run("operate", ring, "low", "--width", "80")
    assert page.code == 0
    assert "No relay acts on this fault: it stands until somebody finds it." in page.flat
    assert "T1-neutral and board: no transformer between passes on any of the fault's" in page.flat


def test_only_one_acts(run: Run) -> None:
    page = run("operate", RADIAL, "T1@main")
    assert "No other relay acts: nothing backs up board-earth for this fault." in page.flat


def test_a_replay_that_clears_and_one_that_does_not(run: Run, ring: Path) -> None:
    page = run("operate", RADIAL, "N@50%", "--replay", "--width", "80")
    assert page.code == 0
    assert "0.493 s N@main opens, tripped by N-earth 0 A 0 A" in page.flat
    assert "Cleared 0.493 s after the fault began, with N@main open" in page.flat
    page = run("operate", RADIAL, "N@50%", "--replay", "--stuck", "N@main")
    assert page.code == 0
    assert "N-earth operates; N@main stays closed" in page.flat
    assert 'taken to stay closed: "N@main" (--stuck)' in page.flat
    page = run("operate", RADIAL, "T1@main", "--replay")
    assert page.code == 1
    assert "NOT cleared: 316 A still flow into the fault" in page.flat
    assert (
        "board-earth: operated at 1.118 s; T1@main is open, and the fault is still fed past it" in page.flat
    )
    page = run("operate", RADIAL, "T1@main", "--replay", "--trips", "board-earth=T1@grid")
    assert page.code == 0
    page = run("operate", ring, "E@50%", "--replay")
    assert "X-east lacked 0.5 ms when its current fell" in page.flat
    page = run("operate", RADIAL, "main", "--without", "utility")
    assert "there is nothing to clear" in page.flat
    assert "until somebody finds it" not in page.flat
    page = run("operate", RADIAL, "main", "--replay", "--without", "utility")
    assert page.code == 0
    assert "there is nothing to clear" in page.flat


def test_json_and_csv_say_what_the_page_says(run: Run, ring: Path) -> None:
    arguments = ("operate", ring, "E@50%", "--replay")
    tree = run(*arguments, "--format", "json").tree
    text = run(*arguments, "--format", "csv").out
    value = values(text)
    acting = [row["relay"] for row in tree["relays"] if row["acts"]]
    assert acting[:2] == ["E-main", "E-east"]
    for row in tree["relays"]:
        if row["acts"]:
            assert float(value[row["relay"], "operate time"]) == row["time"]
            assert row["time_with_breaker"] == pytest.approx(row["time"] + 0.08)
            assert row["why_not"] is None
        else:
            assert value[row["relay"], "operate time"] == "unlimited"
            assert value[row["relay"], "why it rests"] == row["why_not"]
    assert tree["replay"]["cleared"] == pytest.approx(0.38)
    assert float(value["", "time to clear"]) == tree["replay"]["cleared"]
    assert [e["what"] for e in tree["replay"]["events"]] == ["operates", "operates", "opens", "opens"]
    assert (tree["format"], tree["scenario"]) == (1, "base")
    assert any("begins anew at once" in text for text in tree["assumptions"])
    goes_on = run("operate", ring, "main", "--replay", "--format", "json")
    assert (goes_on.code, goes_on.tree["replay"]["cleared"]) == (1, None)
    assert run("operate", ring, "main", "--format", "json").code == 0


@pytest.mark.parametrize("width", ["60", "80", "100"])
@pytest.mark.parametrize("options", [(), ("--replay",)])
def test_pages_keep_their_width(run: Run, ring: Path, options: tuple[str, ...], width: str) -> None:
    for place in ("E@50%", "low", "main", "W@30%"):
        page = run("operate", ring, place, *options, "--width", width)
        assert max(map(len, page.out.splitlines())) <= int(width)


def test_all_states_and_workers(run: Run, ring: Path) -> None:
    one = run("operate", ring, "E@50%", "--scenario", "all", "--replay", "--format", "json")
    assert [answer["scenario"] for answer in one.tree["answers"]] == ["base", "open"]
    two = run(
        "operate", ring, "E@50%", "--scenario", "all", "--replay", "--format", "json", "--workers", "2"
    )
    assert two.out == one.out
    assert two.code == one.code
    page = run("operate", ring, "E@50%", "--scenario", "open", "--phases", "b", "--zf", "5 ohm")
    assert "zf 5 ohm" in page.flat
    assert page.row("X-east", "Which do not act")[-2:] == ["below", "pickup"]  # the far end alone is off


def test_several_faults_and_kinds(run: Run) -> None:
    page = run("operate", RADIAL, "N@50%", "--and", "S@20%", "--phases", "b", "--replay")
    assert page.code == 0
    assert "N@main and S@main open" in page.flat or "S@main and N@main open" in page.flat
    page = run("operate", RADIAL, "N@50%", "--kind", "line-line")
    assert "the fault is clear of earth and drives no earth current" in page.flat


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("N@150%",), "between 0 and 100"),
        (("N@50%", "--kind", "line"), "the kinds are"),
        (("N@50%", "--stuck", "N@main"), "it goes with --replay"),
        (("N@50%", "--replay", "--stuck", "N"), 'write "N@main" or "N@north"'),
        (("N@50%", "--trips", "N-earth"), "a relay and its breaker are wanted"),
        (("N@50%", "--trips", "N-erth=N@main"), "no relay is called"),
        (("N@50%", "--plot-at", "11 kV"), "it goes with --plot"),
        (("N@50%", "--plot", "x.jpg"), "the suffix is one of"),
        (("N@50%", "--plot", "x.svg", "--scenario", "all"), "a chart is of one state"),
        (("N@50%", "--phases", "d"), "takes a, b or c"),
    ],
)
def test_what_is_asked_wrongly_is_told(run: Run, options: tuple[str, ...], said: str) -> None:
    result = run("operate", RADIAL, *options)
    assert result.code == 2
    assert said in " ".join(result.err.split())


def test_a_case_without_relays(run: Run) -> None:
    result = run("operate", PLANT, "main")
    assert (result.code, "this case has no relays" in result.err) == (2, True)


def test_no_answer_is_exit_code_3(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "heavy.toml"
    load = '[loads.L]\nbus = "south"\npower = "300 MW"\npower_factor = 0.9\nconnection = "delta"\n'
    path.write_text(RADIAL.read_text(encoding="utf-8") + load, encoding="utf-8")
    for options in ((), ("--replay",)):
        result = run("operate", path, "N@50%", "--loaded", *options)
        assert (result.code, result.out) == (3, "")
        assert 'bus "south"' in result.err


def test_names_with_any_characters(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "odd.toml"
    text = RADIAL.read_text(encoding="utf-8").replace("[relays.N-earth]", '[relays."=[red] $x$ ümlaut"]')
    path.write_text(text.replace('"N-earth"', '"=[red] $x$ ümlaut"'), encoding="utf-8")
    for options in ((), ("--replay",)):
        assert "=[red] $x$ ümlaut" in run("operate", path, "N@50%", *options, "--width", "100").flat
        text = run("operate", path, "N@50%", *options, "--format", "csv").out
        assert any(where == "'=[red] $x$ ümlaut" for where, _ in values(text))
    stated = run("operate", path, "N@50%", "--replay", "--trips", "=[red] $x$ ümlaut=N@north")
    assert stated.code == 0  # the backup clears it
    assert "N@north opens, tripped by =[red]" in stated.flat
    pytest.importorskip("matplotlib")
    chart = tmp_path / "odd.svg"
    assert run("operate", path, "N@50%", "--plot", chart).code == 0
    assert chart.read_bytes().startswith(b"<?xml")


def test_charts(run: Run, ring: Path, tmp_path: Path) -> None:
    pytest.importorskip("matplotlib")
    for suffix, start in ((".svg", b"<?xml"), (".png", b"\x89PNG"), (".pdf", b"%PDF")):
        chart = tmp_path / f"x{suffix}"
        page = run("operate", ring, "X@40%", "--plot", chart)
        assert page.code == 0
        assert chart.read_bytes().startswith(start)
        assert "not drawn: board: measures a voltage" in page.err
    again = run("operate", ring, "X@40%", "--plot", tmp_path / "x.svg")
    assert (again.code, "the file exists" in again.err) == (2, True)
    first = (tmp_path / "x.svg").read_bytes()
    assert run("operate", ring, "X@40%", "--plot", tmp_path / "x.svg", "--overwrite", "--replay").code == 1
    assert (tmp_path / "x.svg").read_bytes() == first  # the fault as it stands at first
    other = run("operate", ring, "X@40%", "--plot", tmp_path / "y.svg", "--plot-at", "33 kV")
    assert other.code == 0
    assert "earth currents at 11 kV" in other.err
    assert "which no ratio refers in every fault" in other.err  # line-ground is no balanced fault
    three = run(
        "operate", ring, "west", "--kind", "three-phase", "--plot", tmp_path / "z.svg", "--plot-at", "33 kV"
    )
    assert "in every fault" not in three.err
    wrong = run("operate", ring, "X@40%", "--plot", tmp_path / "w.svg", "--plot-at", "20 kV")
    assert (wrong.code, "there are 33 kV, 11 kV, 0.4 kV" in wrong.err) == (2, True)
    none = run("operate", RADIAL, "N@50%", "--plot", tmp_path / "w.svg", "--plot-at", "33 kV")
    assert (none.code, "no relay can be drawn at 33 kV" in none.err) == (2, True)


def test_the_chart_of_settings(run: Run, tmp_path: Path) -> None:
    pytest.importorskip("matplotlib")
    for number, options in enumerate(((), ("--sheet",), ("--propose",))):
        chart = tmp_path / f"{number}.svg"
        assert run("settings", RADIAL, *options, "--plot", chart).code in (0, 1)
        assert chart.read_bytes().startswith(b"<?xml")
    wrong = run("settings", RADIAL, "--plot-at", "11 kV")
    assert (wrong.code, "it goes with --plot" in wrong.err) == (2, True)
