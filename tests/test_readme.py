"""What the README shows is what the program does."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def blocks(kind: str) -> list[str]:
    return re.findall(rf"^```{kind}\n(.*?)^```$", README, flags=re.M | re.S)


def test_the_output_shown_is_the_output():
    shown = blocks("text")[0]
    done = subprocess.run(
        [sys.executable, "-m", "seqfault", "compare", "cases/quarry.toml", "main-a", "--width", "80"],
        cwd=ROOT,
        capture_output=True,
        check=True,
        encoding="utf-8",
        env={"PYTHONIOENCODING": "utf-8", "PATH": ""},
    )
    assert done.stdout == shown


def test_there_are_two_commands_in_blocks_of_their_own():
    run, test = blocks("sh")
    assert "seqfault compare cases/quarry.toml main-a" in run
    assert test.strip().endswith("-m pytest")
    assert len(run.strip().splitlines()) == len(test.strip().splitlines()) == 1


def test_the_python_example_runs():
    (code,) = blocks("python")
    done = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, check=False, encoding="utf-8"
    )
    assert done.returncode == 0, done.stderr
    assert "NER-A" in done.stdout


def test_the_commands_named_run():
    for line in blocks("text")[1].splitlines():
        words = re.split(r"\s{2,}", line)[0]
        arguments = [w.strip('"') for w in re.findall(r'"[^"]*"|\S+', words)][1:]
        done = subprocess.run(
            [sys.executable, "-m", "seqfault", *arguments], cwd=ROOT, capture_output=True, check=False
        )
        assert done.returncode == 0, done.stderr
