"""The command ``neutral``: its page, its forms, its chart, its messages."""

from __future__ import annotations

import csv
import io
import sys
from pathlib import Path

import pytest

from seqfault import Network
from tests.cli.console import PLANT, Run

QUARRY = Path(__file__).parents[2] / "cases" / "quarry.toml"


@pytest.mark.parametrize("width", [80, 100])
def test_the_page_answers_and_keeps_its_width(run: Run, width: int) -> None:
    page = run("neutral", QUARRY, "NER-A", "--ohms", "2..200", "--target", "300 A", "--width", width)
    assert page.code == 0
    assert max(map(len, page.out.splitlines())) <= width
    for text in (
        "As it stands", "How that earth current gets home", "Charging current of what metal joins to it",
        "Coefficient of grounding", "What gives 300 A at main-a", "Over the ohms of a resistor",
        "When it fails", "Assumed", "nothing here is a setting ready to apply",
    ):  # fmt: skip
        assert text in page.flat
    assert page.row("megajoule in 10 s")[0] == "25.4"
    assert page.row("together", "Charging current")[0] == "8.19"
    assert page.row("21.10 target")[0] == "300"
    assert [len(page.row(end, "Over the ohms")) > 4 for end in ("solid", "15.88 now", "open")] == [True] * 3


def test_the_tree_holds_what_the_faults_hold(run: Run, plant: Network) -> None:
    tree = run("neutral", PLANT, "NER", "--ohms", "4..64", "--points", 5, "--format", "json").tree
    assert (tree["neutral"], tree["place"], tree["device"]) == ("NER", "main", "resistor")
    k1 = plant.fault("main", "line-ground")
    (state,) = tree["states"]
    assert state["cold"]["line-ground"]["residual"][0] == pytest.approx(abs(k1.residual))
    assert [row["ohms"] for row in tree["sweep"]][:2] == [[0, 0], [4, 0]]
    assert tree["sweep"][-1]["ohms"] is None
    middle = tree["sweep"][3]
    assert middle["ohms"][0] == pytest.approx(16)
    assert middle["to_earth"]["value"] == pytest.approx(abs(k1.residual))
    assert middle["to_earth"]["kind"] == "line-ground"
    assert [row["what"] for row in state["failures"]] == ["as it stands", "shorted", "open"]


def test_rows_for_a_spreadsheet(run: Run) -> None:
    rows = list(csv.DictReader(io.StringIO(run("neutral", PLANT, "NER", "--format", "csv").out)))
    of = {(r["kind"], r["quantity"], r["where"]): r["value"] for r in rows}
    assert float(of["line-ground", "current to earth", "NER open"]) > 0
    assert float(of["", "charging current", "F1"]) == pytest.approx(9.06, rel=0.01)


def test_the_target_can_be_written_into_the_case(run: Run, tmp_path: Path) -> None:
    target = run("neutral", PLANT, "NER", "--target", "250 A", "--format", "json").tree["target"]
    text = PLANT.read_text(encoding="utf-8").replace('"16 ohm"', f'"{target["ohms_to_state"][0]!r} ohm"')
    path = tmp_path / "again.toml"
    path.write_text(text, encoding="utf-8")
    fault = run("fault", path, "main", "--format", "json").tree
    assert fault["current"]["residual"][0] == pytest.approx(250, rel=1e-9)


def test_a_ratio_is_gone_through(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "ratio.toml"
    text = PLANT.read_text(encoding="utf-8")
    path.write_text(text.replace('"16 ohm"', '"0.16 ohm"\nratio = 10'), encoding="utf-8")
    target = run("neutral", path, "NER", "--target", "250 A", "--format", "json").tree["target"]
    assert target["ohms"][0] == pytest.approx(100 * target["ohms_to_state"][0])
    assert "On its secondary" in run("neutral", path, "NER", "--target", "250 A").out


def test_exit_codes_of_targets(run: Run) -> None:
    assert run("neutral", PLANT, "NER", "--target", "250 A", "--sound-phase-below", "1.8 pu").code == 0
    conflict = run("neutral", PLANT, "NER", "--target", "250 A", "--sound-phase-below", "1.4 pu")
    assert conflict.code == 1
    assert "both cannot be had" in conflict.flat
    far = run("neutral", PLANT, "NER", "--target", "90 kA")
    assert (far.code, far.out) == (3, "")
    assert "out of reach" in far.err


def test_states_in_which_the_neutral_is_not_there_are_told(run: Run) -> None:
    page = run("neutral", QUARRY, "NER-A", "--scenario", "all", "--target", "500 A")
    assert page.code == 0
    assert "state standby: no winding in service has its star point there" in page.flat
    assert "(3) ring-closed" in page.flat
    assert "gives 500 A line-ground (3I0) at main-a, state ring-closed" in page.flat


def test_earthing_transformer_and_hot_ohms_over_all_states(run: Run) -> None:
    page = run("neutral", QUARRY.with_name("moor.toml"), "NR-B", "--scenario", "all", "--width", 80)
    assert page.code == 0
    assert max(map(len, page.out.splitlines())) <= 80
    assert page.row("Hot")[:2] == ["58.08", "ohm"]
    assert page.row("ET")[:2] == ["115", "A"]
    assert page.row("short-time")[:2] == ["3999", "kVA"]


def test_the_winding_of_a_generator(run: Run) -> None:
    page = run(
        "neutral", QUARRY, "NER-G", "--scenario", "standby", "--winding", "standby", "--pickup", "10 A",
        "--cover", "95 %",
    )  # fmt: skip
    assert page.code == 0
    assert page.row("the same without winding impedance") == ["10.0", "%"]
    assert page.row("resistor that covers 95 %") == ["31.73", "ohm"]


@pytest.mark.parametrize("form", ["svg", "png", "pdf"])
def test_a_chart(run: Run, tmp_path: Path, form: str) -> None:
    pytest.importorskip("matplotlib")
    path = tmp_path / f"ner.{form}"
    done = run("neutral", PLANT, "NER", "--ohms", "2..200", "--target", "250 A", "--plot", path)
    assert done.code == 0
    content = path.read_bytes()
    assert content.startswith({"svg": b"<?xml", "png": b"\x89PNG", "pdf": b"%PDF"}[form])
    again = run("neutral", PLANT, "NER", "--plot", path)
    assert again.code == 2
    assert "--plot" in again.err
    assert "the file exists" in again.err
    assert path.read_bytes() == content


def test_charts_without_matplotlib(run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    done = run("neutral", PLANT, "NER", "--plot", tmp_path / "x.svg")
    assert (done.code, done.out) == (2, "")
    assert "pip install 'seqfault[plot]'" in done.err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("NEK",), 'did you mean "NER"?'),
        (("NER", "--at", "mian"), 'did you mean "main"?'),
        (("NER", "--ohms", "5"), "as in 2..200"),
        (("NER", "--ohms", "50..2"), "less than the second"),
        (("NER", "--ohms", "2..x"), "as in 2..200"),
        (("NER", "--ohms", "2..9", "--points", "1"), "2 to 1000"),
        (("NER", "--points", "3"), "it goes with --ohms"),
        (("NER", "--target", "300"), 'write "300 A"'),
        (("NER", "--target", "0 A"), "more than zero"),
        (("NER", "--sound-phase-below", "1.4 kV"), "--sound-phase-below"),
        (("NER", "--winding", "G1"), "add --pickup"),
        (("NER", "--winding", "G1", "--pickup", "5 A"), 'its star point is "isolated"'),
        (("NER", "--winding", "G9", "--pickup", "5 A"), "no generator has this name"),
        (("NER", "--pickup", "5 A"), "add --winding"),
        (("NER", "--cover", "90 %"), "add --winding"),
        (("NER", "--winding", "G1", "--pickup", "5 A", "--cover", "100 %"), "less than the whole"),
        (("NER", "--temperature-coefficient", "5 %"), "as in 0.001"),
        (("NER", "--plot", "x.gif"), ".svg, .png, .pdf"),
    ],
)
def test_what_cannot_be_asked(run: Run, arguments: tuple[str, ...], words: str) -> None:
    done = run("neutral", PLANT, *arguments)
    assert (done.code, done.out) == (2, "")
    assert words in done.err
    assert "Traceback" not in done.err


RELAYS = """
[current_transformers.CB]
ratio = "100/1 A"
connection = "core-balance"

[relays.R1]
at = "F1@main"
measures = "core-balance"
ct = "CB"
pickup = "20 A"
curve = "definite"
delay = "0.3 s"
"""


def test_what_relays_see_and_ohms_that_make_them_see(run: Run, tmp_path: Path) -> None:
    path = tmp_path / "relays.toml"
    path.write_text(PLANT.read_text(encoding="utf-8") + RELAYS)
    far = ("--at", "F1@90%")
    page = run("neutral", path, "NER", *far, "--ohms", "2..200", "--see", "R1=10", "--width", 80)
    assert page.code == 0
    assert "What relays see of faults at F1@90%" in page.flat
    assert "What keeps R1 at 10 times its pickup or more" in page.flat
    tree = run(
        "neutral", path, "NER", *far, "--target", "100 A", "--see", "R1=10", "--format", "json"
    ).tree["target"]
    assert (tree["met"], tree["binds"], tree["see"]) == (False, "relay R1", {"R1": 10})
    assert run("neutral", path, "NER", *far, "--target", "100 A", "--see", "R1=10").code == 1
    for wrong, words in (("R1", "as in R1=2"), ("R1=x", "as in R1=2"), ("R2=2", "did you mean")):
        refused = run("neutral", path, "NER", "--see", wrong)
        assert refused.code == 2
        assert words in refused.err
    impossible = run("neutral", path, "NER", *far, "--see", "R1=100000")
    assert impossible.code == 3
    assert "the most is" in impossible.err
