from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pytest

from seqfault import Network
from tests.cli.console import PLANT, Run
from tests.cluster import running_cluster


@pytest.mark.parametrize(
    "command", [["compare", PLANT, "main"], ["fault", PLANT, "main"], ["levels", PLANT]]
)
@pytest.mark.parametrize("form", ["json", "csv", "table"])
def test_the_command_answers_the_same_with_workers(run: Run, command: list[Any], form: str) -> None:
    asked = [*command, "--scenario", "all", "--format", form]
    one, two = run(*asked), run(*asked, "--workers", "2")
    assert one.code == two.code == 0
    assert (one.out, one.err) == (two.out, two.err)


@pytest.mark.parametrize(
    ("more", "message"),
    [
        (["--workers", "0"], "a whole number of processes"),
        (["--workers", "two"], "a whole number of processes"),
        (["--workers", "2", "--scheduler", "tcp://127.0.0.1:1"], "not allowed with"),
    ],
)
def test_what_cannot_be_asked(run: Run, more: list[str], message: str) -> None:
    answer = run("levels", PLANT, "--scenario", "all", *more)
    assert answer.code == 2
    assert message in answer.err


def test_the_command_works_on_a_cluster(run: Run) -> None:
    pytest.importorskip("distributed")
    asked = ["levels", PLANT, "--scenario", "all"]
    with running_cluster() as address:
        one, other = run(*asked), run(*asked, "--scheduler", address)
    assert (one.code, one.out) == (0, one.out) == (other.code, other.out)


@pytest.mark.parametrize("address", ["nowhere", "tcp://127.0.0.1:1"])
def test_no_scheduler_is_an_error_in_plain_words(run: Run, address: str) -> None:
    answer = run("levels", PLANT, "--scenario", "all", "--scheduler", address)
    assert answer.code == 2
    assert "seqfault: --scheduler" in answer.err


def waiting(network: Network, started: str) -> None:
    Path(started).touch()
    time.sleep(60)


INTERRUPTED = """
import sys
from seqfault.cli.batches import over_states
from seqfault.cli.run import run
import seqfault.cli.levels
import seqfault.studies.levels
from functools import partial
from tests.cli.test_batches import waiting
if __name__ == "__main__":
    seqfault.studies.levels.levels = partial(waiting, started=sys.argv[1])
    sys.exit(run(["levels", sys.argv[2], "--scenario", "all", "--workers", "2"]))
"""


def test_an_interrupt_ends_the_command_and_its_workers_at_once(tmp_path: Path) -> None:
    script, started = tmp_path / "interrupted.py", tmp_path / "started"
    script.write_text(INTERRUPTED, encoding="utf-8")
    environment = os.environ | {"PYTHONPATH": os.pathsep.join(p for p in sys.path if p)}
    process = subprocess.Popen(
        [sys.executable, str(script), str(started), str(PLANT)],
        stderr=subprocess.PIPE,
        stdout=subprocess.PIPE,
        env=environment,
        start_new_session=True,
    )
    for _ in range(600):
        if started.exists():
            break
        time.sleep(0.1)
    assert started.exists()
    begun = time.monotonic()
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=50)
    assert process.returncode == 130
    assert time.monotonic() - begun < 40  # the items would have slept for a minute
    assert b"interrupted" in err
    assert b"Traceback" not in err
    assert out == b""
