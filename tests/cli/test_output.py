from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from seqfault.cli import main
from tests.cli.console import PLANT, Run

ROOT = Path(__file__).parents[2]


def test_form_follows_the_suffix(run: Run, tmp_path: Path) -> None:
    for suffix, start in ((".json", "{"), (".csv", "place,kind"), (".txt", "Tern Holm")):
        target = tmp_path / f"answer{suffix}"
        result = run("compare", PLANT, "main", "--output", target)
        assert result.code == 0, result.err
        assert result.out == ""
        assert f"wrote {target}" in result.err
        assert target.read_text(encoding="utf-8").startswith(start)
    assert json.loads((tmp_path / "answer.json").read_text(encoding="utf-8"))["place"] == "main"


def test_format_wins_over_the_suffix(run: Run, tmp_path: Path) -> None:
    target = tmp_path / "answer.dat"
    assert run("levels", PLANT, "--output", target).code == 2
    assert run("levels", PLANT, "--output", target, "--format", "json").code == 0
    json.loads(target.read_text(encoding="utf-8"))


def test_a_file_is_replaced_only_when_told(run: Run, tmp_path: Path) -> None:
    target = tmp_path / "answer.json"
    target.write_text("mine", encoding="utf-8")
    target.chmod(0o640)
    result = run("levels", PLANT, "--output", target)
    assert result.code == 2
    assert "--overwrite" in result.err
    assert target.read_text(encoding="utf-8") == "mine"
    assert run("levels", PLANT, "--output", target, "--overwrite").code == 0
    assert json.loads(target.read_text(encoding="utf-8"))["format"] == 1
    assert target.stat().st_mode & 0o777 == 0o640
    assert [p.name for p in tmp_path.iterdir()] == ["answer.json"]


def test_the_case_file_is_never_replaced(run: Run, tmp_path: Path) -> None:
    case = tmp_path / "plant.toml"
    case.write_bytes(PLANT.read_bytes())
    link = tmp_path / "link.json"
    link.symlink_to(case)
    for target in (case, link):
        result = run("levels", case, "--output", target, "--format", "json", "--overwrite")
        assert result.code == 2
        assert "case file itself" in result.err
    assert case.read_bytes() == PLANT.read_bytes()


@pytest.mark.parametrize("target", ["nowhere/answer.json", "", "/dev/null"])
def test_targets_that_cannot_be(run: Run, tmp_path: Path, target: str) -> None:
    result = run("levels", PLANT, "--output", tmp_path / target, "--format", "json", "--overwrite")
    assert result.code == 2
    assert result.err.startswith("seqfault: --output")


def test_a_failed_answer_writes_nothing(run: Run, tmp_path: Path) -> None:
    assert run("fault", PLANT, "nowhere", "--output", tmp_path / "answer.json").code == 2
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("color", "no_color", "colored"),
    [("auto", "", False), ("always", "1", True), ("never", "", False)],
)
def test_color(run: Run, monkeypatch: pytest.MonkeyPatch, color: str, no_color: str, colored: bool) -> None:
    monkeypatch.setenv("NO_COLOR", no_color)
    page = run("compare", PLANT, "main", "--color", color)
    assert ("\x1b[" in page.out) == colored


def test_no_color_and_terminals(monkeypatch: pytest.MonkeyPatch) -> None:
    import io

    from seqfault.report.terminal import wants_color

    class Terminal(io.StringIO):
        def isatty(self) -> bool:
            return True

    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setenv("TERM", "xterm")
    assert wants_color(Terminal(), "auto")
    assert not wants_color(io.StringIO(), "auto")
    monkeypatch.setenv("NO_COLOR", "1")
    assert not wants_color(Terminal(), "auto")
    assert wants_color(Terminal(), "always")
    monkeypatch.delenv("NO_COLOR")
    monkeypatch.setenv("TERM", "dumb")
    assert not wants_color(Terminal(), "auto")


def test_colour_changes_no_character(run: Run) -> None:
    import re

    plain = run("fault", PLANT, "main", "--color", "never").out
    colored = run("fault", PLANT, "main", "--color", "always").out
    assert re.sub(r"\x1b\[[0-9;]*m", "", colored) == plain


def test_standard_input_and_a_pipe_that_closes() -> None:
    with PLANT.open("rb") as case:
        done = subprocess.run(
            [sys.executable, "-m", "seqfault", "levels", "-", "--format", "json"],
            stdin=case, capture_output=True, cwd=ROOT, check=False,
        )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout)["case"]["sha256"]
    reader, writer = os.pipe()
    os.close(reader)
    done = subprocess.run(
        [sys.executable, "-m", "seqfault", "levels", str(PLANT)],
        stdout=writer, stderr=subprocess.PIPE, cwd=ROOT, check=False,
    )  # fmt: skip
    os.close(writer)
    assert done.returncode == 0
    assert done.stderr == b""


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs a device that is always full")
def test_a_full_disk_is_said() -> None:
    with open("/dev/full", "wb") as full:
        done = subprocess.run(
            [sys.executable, "-m", "seqfault", "levels", str(PLANT)],
            stdout=full, stderr=subprocess.PIPE, cwd=ROOT, check=False,
        )  # fmt: skip
    assert done.returncode == 2
    assert done.stderr.decode().count("\n") == 1


def test_main_takes_arguments_of_the_process(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(sys, "argv", ["seqfault", "--version"])
    assert main() == 0
    assert capsys.readouterr().out.startswith("seqfault ")
