"""Fixtures of the command line."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from seqfault import Network, read_case
from seqfault.cli import main
from tests.cli.console import PLANT, Result, Run, Write


@pytest.fixture
def run(capsysbinary: pytest.CaptureFixture[bytes]) -> Run:
    def call(*arguments: str | Path) -> Result:
        code = main([str(a) for a in arguments])
        out, err = capsysbinary.readouterr()
        return Result(code, out.decode(), err.decode())

    return call


@pytest.fixture(scope="session")
def plant() -> Network:
    return Network(read_case(PLANT))


@pytest.fixture
def write(tmp_path: Path) -> Write:
    """A case file of a tree."""

    def call(tree: dict[str, Any]) -> Path:
        path = tmp_path / "case.json"
        path.write_text(json.dumps(tree), encoding="utf-8")
        return path

    return call
