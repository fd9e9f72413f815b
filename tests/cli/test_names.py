"""Names may hold any characters: they must neither break a screen nor act on it."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from rich.cells import cell_len

from tests.cli.console import Run, Write

LONG = "a very long name of a bus " * 7 + "with its very end here"
NAMES = {
    "markup": "[bold]main[/bold]",
    "code": "[51N]",
    "escape": "main\x1b[31mred",
    "newline": "two\nlines",
    "quotes": "the \"main\" 'board'",
    "formula": "=HYPERLINK(1)",
    "wide": "変電所 北",
    "right to left": "a\u202eb",
    "long": LONG,
    "unbroken": "x" * 200,
    "omega": "Ω-room ∠",
}


def tree(bus: str) -> dict[str, Any]:
    return {
        "title": f"[red]{bus}",
        "frequency": "50 Hz",
        "buses": {"intake": "33 kV", bus: "11 kV"},
        "infeeds": {"[dim]u": {"bus": "intake", "three_phase": "500 MVA", "x_over_r": 10, "z0": "open"}},
        "neutrals": {bus + " R": {"resistance": "16 ohm"}},
        "transformers": {
            bus + " T": {
                "vector_group": "Dyn11",
                "rating": "10 MVA",
                "impedance": "10 %",
                "x_over_r": 15,
                "hv": {"bus": "intake", "voltage": "33 kV"},
                "lv": {"bus": bus, "voltage": "11 kV", "neutral": bus + " R"},
            }
        },
        "scenarios": {bus + " state": {}},
    }


@pytest.mark.parametrize("width", [80, 100])
@pytest.mark.parametrize("name", NAMES.values(), ids=NAMES)
def test_every_page_keeps_its_width_and_the_whole_name(
    run: Run, write: Write, name: str, width: int
) -> None:
    path = write(tree(name))
    shown = "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in name)
    for arguments in (
        ("compare", path, name),
        ("fault", path, name, "--flows", "--components"),
        ("levels", path),
        ("levels", path, "--scenario", "all"),
        ("inspect", path),
    ):
        page = run(*arguments, "--width", str(width), "--color", "never")
        assert page.code == 0, page.err
        assert "\x1b" not in page.out
        assert "\u202e" not in page.out
        for line in page.out.splitlines():
            assert cell_len(line) <= width, line
        assert "".join(shown.split()) in "".join(page.out.split()), arguments


@pytest.mark.parametrize("name", NAMES.values(), ids=NAMES)
def test_json_and_csv_keep_the_name_exactly(run: Run, write: Write, name: str) -> None:
    path = write(tree(name))
    assert name in run("fault", path, name, "--format", "json").tree["voltages"]
    rows = list(csv.DictReader(io.StringIO(run("fault", path, name, "--format", "csv").out)))
    expected = f"'{name}" if name[0] in "=+-@" else name
    assert {row["place"] for row in rows} == {expected}


def test_colour_interprets_no_markup(run: Run, write: Write) -> None:
    path = write(tree("[bold]main[/bold]"))
    page = run("compare", path, "[bold]main[/bold]", "--color", "always")
    assert "\x1b[" in page.out
    assert "[bold]main[/bold]" in page.out
    assert "[red][bold]main" in page.out


def test_error_messages_are_one_safe_line(run: Run, write: Write) -> None:
    path = write(tree("main"))
    result = run("fault", path, "no\x1b[2Jsuch\nbus")
    assert result.code == 2
    assert "\x1b" not in result.err
    assert len(result.err.splitlines()) == 1


def process(*arguments: str, **environment: str) -> subprocess.CompletedProcess[bytes]:
    return subprocess.run(
        [sys.executable, "-m", "seqfault", *arguments],
        capture_output=True,
        env={**os.environ, **environment},
        check=False,
        cwd=Path(__file__).parents[2],
    )


@pytest.mark.parametrize("encoding", ["ascii", "latin-1"])
def test_streams_that_cannot_encode(write: Write, encoding: str) -> None:
    path = write(tree("Ω-room ∠"))
    done = process("fault", str(path), "Ω-room ∠", "--width", "80", PYTHONIOENCODING=encoding)
    assert done.returncode == 0, done.stderr
    text = done.stdout.decode(encoding)
    assert "ohm-room at" in text
    assert " at -" in text
    assert max(map(len, text.splitlines())) <= 80
    done = process("fault", str(path), "Ω-room ∠", "--format", "json", PYTHONIOENCODING=encoding)
    assert json.loads(done.stdout.decode())["fault"]["place"] == "Ω-room ∠"
