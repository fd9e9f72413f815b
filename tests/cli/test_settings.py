"""``settings`` on the command line: verdicts, sheet, proposal, file written; page, JSON and CSV agree."""

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


def passing(tmp_path: Path) -> Path:
    path = tmp_path / "passing.toml"
    path.write_text(RADIAL.read_text(encoding="utf-8").replace('"50 A"', '"40 A"'), encoding="utf-8")
    return path


def test_the_page_asks_its_questions_and_names_what_decides(run: Run) -> None:
    page = run("settings", RADIAL, "--width", "100")
    for question in (
        "Does it see what it must?",
        "Through what resistance is a fault still seen?",
        "Does it keep still for what is not its own?",
        "Does it wait for those it backs up?",
        "Does the neutral last until the backup has cleared?",
        "What does no relay see?",
    ):
        assert question in page.out
    assert page.row("board-earth", "Does it see")[-1] == "pass"
    assert page.code == 1  # tight is not pass
    assert "S-earth, protects: line-line-ground through 10 ohm at" in page.flat
    assert "board-earth behind N-earth: line-ground at" in page.flat
    assert "within 90 degrees" not in page.flat  # no relay here has a direction
    assert "signed by a licensed engineer" in page.flat


def test_exit_code_is_0_where_all_pass(run: Run, tmp_path: Path) -> None:
    page = run("settings", passing(tmp_path))
    assert page.code == 0, page.out
    assert "Verdict" in page.out


@pytest.mark.parametrize("width", ["60", "80", "100"])
@pytest.mark.parametrize("options", [(), ("--sheet",), ("--propose",)])
def test_pages_keep_their_width(run: Run, ring: Path, options: tuple[str, ...], width: str) -> None:
    for case in (RADIAL, ring):
        page = run("settings", case, *options, "--width", width, "--points", "2")
        assert max(map(len, page.out.splitlines())) <= int(width)


def test_json_and_csv_say_what_the_page_says(run: Run, ring: Path) -> None:
    tree = run("settings", ring, "--format", "json", "--points", "3").tree
    sees = {(row["relay"], row["duty"]): row for row in tree["sees"]}
    assert sees["E-east", "protects"]["reach"][0]["seen"] in ("none", "up to", "any")
    assert {row["verdict"] for row in tree["grades"]} <= {"pass", "tight", "fail", "not proven"}
    assert any("within 90 degrees" in text for text in tree["method"])
    text = run("settings", ring, "--format", "csv", "--points", "3").out
    rows = list(csv.DictReader(io.StringIO(text)))
    value = {
        (r["place"], r["kind"], r["quantity"]): r["value"]
        for r in rows
        if "greatest fault" not in r["quantity"]
    }
    for (relay, duty), row in sees.items():
        assert value[relay, duty, "verdict"] == row["verdict"]
        assert float(value[relay, duty, "least seen"]) == pytest.approx(row["current"])
    assert "nan" not in text
    assert ",inf," not in text
    reaches = [r for r in rows if r["quantity"] == "greatest fault resistance"]
    assert len(reaches) == sum(len(row["reach"]) for row in tree["sees"])


def test_the_sheet_has_both_sides_of_the_transformer(run: Run) -> None:
    page = run("settings", RADIAL, "--sheet", "--width", "100")
    assert page.code == 0
    cells = page.row("board-earth", "What is set")
    assert cells == ["51G", "200/1", "A", "50", "A", "0.25", "A", "IEC", "standard", "inverse", "×", "0.3"]
    rows = list(csv.DictReader(io.StringIO(run("settings", RADIAL, "--sheet", "--format", "csv").out)))
    value = {(r["place"], r["quantity"]): (r["value"], r["unit"]) for r in rows}
    assert value["S-earth", "pickup, secondary"] == ("0.3", "A")
    assert value["S-earth", "delay"] == ("0.2", "s")
    tree = run("settings", RADIAL, "--sheet", "--format", "json").tree
    least = next(row for row in tree["sheet"] if row["relay"]["name"] == "N-earth")["least"]
    # 0.14/(m^0.02 - 1) x 0.2 at what is seen, IEC 60255-151 curve A
    assert least["time"] == pytest.approx(0.2 * 0.14 / ((least["current"] / 10) ** 0.02 - 1))


def test_a_sheet_with_open_settings_and_currents_below_the_pickup(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "open.toml"
    text = RADIAL.read_text(encoding="utf-8")
    text = text.replace('pickup = "50 A"\n', "").replace('pickup = "10 A"', 'pickup = "1 In"')
    text = text.replace('fault_resistances = ["0 ohm", "10 ohm"]', 'fault_resistances = ["500 ohm"]')
    path.write_text(text, encoding="utf-8")
    page = run("settings", path, "--sheet", "--width", "100")
    assert page.row("board-earth", "What is set").count("set") == 1
    assert "to be set" in " ".join(page.row("board-earth", "When it acts"))
    assert "never" in page.row("N-earth", "When it acts")
    study = run("settings", path, "--width", "100")
    assert study.code == 1
    assert "its pickup is still to be set" in study.flat


def test_a_proposal_is_written_with_the_comments_kept(run: Run, tmp_path: Path) -> None:
    target = tmp_path / "set.toml"
    page = run("settings", RADIAL, "--propose", "--write", target, "--width", "100")
    assert page.code == 0
    assert f"wrote {target}" in page.err
    assert "every pickup of the scales" in page.flat
    before, after = (
        RADIAL.read_text(encoding="utf-8").splitlines(),
        target.read_text(encoding="utf-8").splitlines(),
    )
    changed = [(a, b) for a, b in zip(before, after, strict=True) if a != b]
    assert changed
    assert all(a.split(" = ")[0] in ("pickup", "multiplier", "delay") for a, _ in changed)
    assert run("settings", target).code == 0
    again = run("settings", RADIAL, "--propose", "--write", target)
    assert (again.code, "the file exists" in again.err) == (2, True)
    assert run("settings", RADIAL, "--propose", "--write", target, "--overwrite").code == 0


def test_a_proposal_as_json_and_csv(run: Run) -> None:
    tree = run("settings", RADIAL, "--propose", "--format", "json").tree
    assert tree["study"]["verdict"] in ("pass", "tight")
    settings = {row["relay"]: row["setting"] for row in tree["proposed"]}
    rows = list(csv.DictReader(io.StringIO(run("settings", RADIAL, "--propose", "--format", "csv").out)))
    value = {(r["place"], r["quantity"]): r["value"] for r in rows if r["kind"] == "proposal"}
    assert float(value["board-earth", "multiplier"]) == settings["board-earth"]["time"]
    assert float(value["all", "sum of times"]) == pytest.approx(tree["sum_of_times"])


def test_contradictions_are_told_and_nothing_is_written(run: Run, ring: Path, tmp_path: Path) -> None:
    target = tmp_path / "none.toml"
    page = run("settings", ring, "--propose", "--write", target, "--points", "2")
    assert page.code == 1
    assert "No settings meet every condition. These contradict" in page.flat
    assert "so that it keeps still for" in page.flat
    assert "nothing written" in page.err
    assert not target.exists()


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--keep", "N-earth"), "they go with --propose"),
        (("--write", "x.toml"), "they go with --propose"),
        (("--propose", "--sheet"), "leave one of them out"),
        (("--points", "1"), "a whole number of places"),
        (("--propose", "--keep", "X"), 'no relay has this name; "N-earth"'),
        (("--propose", "--write", str(RADIAL)), "this is the case file itself"),
    ],
)
def test_what_is_asked_wrongly_is_told(run: Run, options: tuple[str, ...], said: str) -> None:
    result = run("settings", RADIAL, *options)
    assert result.code == 2
    assert said in " ".join(result.err.split())


def test_a_case_without_relays(run: Run) -> None:
    result = run("settings", PLANT)
    assert (result.code, "this case has no relays" in result.err) == (2, True)


def test_names_with_any_characters(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "odd.toml"
    text = RADIAL.read_text(encoding="utf-8").replace("[relays.N-earth]", '[relays."=[red] ümlaut"]')
    path.write_text(text.replace('"N-earth"', '"=[red] ümlaut"'), encoding="utf-8")
    assert "=[red] ümlaut" in run("settings", path, "--width", "100").out
    rows = list(csv.DictReader(io.StringIO(run("settings", path, "--format", "csv").out)))
    assert any(row["place"] == "'=[red] ümlaut" for row in rows)
    target = tmp_path / "out.toml"
    assert run("settings", path, "--propose", "--write", target).code == 0
    assert run("settings", target).code == 0


MILL = Path(__file__).parents[2] / "cases" / "mill.toml"


def changed(tmp_path: Path, relay: str, *changes: tuple[str, str]) -> Path:
    """The plant with lines of one relay replaced."""
    head, tail = MILL.read_text(encoding="utf-8").split(f"[relays.{relay}]")
    for old, new in changes:
        assert old in tail
        tail = tail.replace(old, new, 1)
    path = tmp_path / "changed.toml"
    path.write_text(f"{head}[relays.{relay}]{tail}", encoding="utf-8")
    return path


def test_a_curve_asked_below_its_pickup_says_so_and_fails(run: Run, tmp_path: Path) -> None:
    path = changed(
        tmp_path, "T1-neutral", ('pickup = "0.2 In"', 'pickup = "0.6 In"')
    )  # 180 A, and 5 ohm leave less
    page = run("settings", path, "--points", "2", "--width", "100")
    assert page.code == 1
    assert "below its pickup: the relay rests, and its curve has no time" in page.flat
    assert page.row("T1-neutral", "Does it see")[-1] == "fail"
    sheet = run("settings", path, "--points", "2", "--width", "100", "--sheet")
    assert "never" in sheet.row("T1-neutral", "When it acts")


def test_a_relay_that_sees_nothing_at_all_leaves_its_backup_alone(run: Run, tmp_path: Path) -> None:
    path = changed(tmp_path, "water-earth", ('pickup = "0.1 In"', 'pickup = "40 In"'))
    page = run("settings", path, "--points", "2", "--width", "100")
    assert page.code == 1
    assert "water-earth sees none there, ring-3-south sees faults there up to" in page.flat
    assert "not even a bolted fault" in page.flat or "below its pickup" in page.flat


def test_a_pickup_under_the_error_of_its_transformers_says_so_and_fails(run: Run, tmp_path: Path) -> None:
    path = changed(
        tmp_path,
        "ring-3-south",
        ('vt = "11 kV/110 V"\n', ""),
        ('direction = "forward"\n', ""),
        ('characteristic_angle = "-15 deg"\n', ""),
        ('polarisation = "residual-voltage"\n', ""),
    )
    page = run("settings", path, "--points", "2", "--width", "100")
    assert page.code == 1
    assert "the errors of its current transformers alone may show" in page.flat
    assert page.row("ring-3-south", "Does it keep still")[-1] == "fail"


def test_a_relay_on_a_dead_element_says_so_and_fails(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "dead.toml"
    text = MILL.read_text(encoding="utf-8")
    path.write_text(text.replace("[lines.f-water] ", "[lines.f-water]\nout = true "), encoding="utf-8")
    page = run("settings", path, "--points", "2", "--width", "100")
    assert page.code == 1
    assert 'state base: "f-water" is out' in page.flat
    assert page.row("water-earth", "Does it see")[-1] == "fail"


def test_the_plant_has_two_mistakes_and_the_written_proposal_none(run: Run, tmp_path: Path) -> None:
    page = run("settings", MILL, "--points", "2", "--width", "100")
    assert page.code == 1
    assert page.row("water-earth", "Does it keep still")[-1] == "fail"
    assert page.row("ring-2-south behind ring-1-north", "Does it wait")[-1] == "fail"
    assert "in the states base, t1-out, t2-out; not asked in ring-open" in page.flat
    assert "it would keep still with a pickup of 10 A or more" in page.flat  # 1.3 x 7.69 A
    assert "the backup acts 0.11 s too early" in page.flat
    target = tmp_path / "mended.toml"
    assert run("settings", MILL, "--propose", "--write", target).code == 0
    assert run("settings", target).code == 0
