from __future__ import annotations

import csv
import io
from pathlib import Path

import pytest

from seqfault import Network, in_state, levels, read_case
from tests.cli.console import PLANT, Run

CASE = read_case(PLANT)


def test_page_tree_and_rows_are_those_of_networks_without_the_element(run: Run) -> None:
    tree = run("levels", PLANT, "--outages", "transformers", "--at", "main", "--format", "json").tree
    names = [name for name, record in CASE.transformers.items() if not record.out]
    assert [each["without"] for each in tree["outages"]] == [[], *([name] for name in names)]
    values = []
    for each in tree["outages"]:
        whole = levels(Network(in_state(CASE, without=each["without"])))
        values.append(float(whole.k3[whole.buses.index("main")]))
        assert each["k3"]["main"] == pytest.approx(values[-1], rel=1e-9)
    assert tree["range"][0]["k3"]["least"] == min(each["k3"]["main"] for each in tree["outages"])
    rows = csv.DictReader(
        io.StringIO(
            run("levels", PLANT, "--outages", "transformers", "--at", "main", "--format", "csv").out
        )
    )
    k3 = [float(row["value"]) for row in rows if row["kind"] == "three-phase"]
    assert k3 == pytest.approx(values, rel=1e-9)
    page = run("levels", PLANT, "--outages", "transformers", "--at", "main")
    assert "The least: ampere, and the outage that gives it" in page.out
    assert "by updates of one factorisation" in page.flat


def test_outages_of_a_file_are_pairs_too(run: Run, tmp_path: Path) -> None:
    first, second, *_ = CASE.transformers
    path = tmp_path / "outages.txt"
    path.write_text(f"# both\n{first}, {second}\n\n{first}\n", encoding="utf-8")
    tree = run("levels", PLANT, "--outages", path, "--format", "json").tree
    assert [each["without"] for each in tree["outages"]] == [[], [first, second], [first]]


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["--outages", "no-such-file"], "one outage a line"),
        (["--outages", "lines", "--scenario", "all"], "one state at a time"),
        (["--outages", "lines", "--workers", "2"], "--workers"),
        (["--outages", "lines", "--at", "mian"], "main"),
        (["--at", "main"], "--at: this goes with --outages"),
    ],
)
def test_what_cannot_be_asked(run: Run, words: list[str], message: str) -> None:
    answer = run("levels", PLANT, *words)
    assert answer.code == 2
    assert message in answer.err


@pytest.mark.parametrize("text", ["", "# none\n", "T1,,T2\n"])
def test_a_file_that_names_nothing(run: Run, tmp_path: Path, text: str) -> None:
    path = tmp_path / "outages.txt"
    path.write_text(text, encoding="utf-8")
    answer = run("levels", PLANT, "--outages", path)
    assert answer.code == 2
    assert "--outages" in answer.err
