from __future__ import annotations

import csv
import io
import json
import math
import os
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from seqfault.errors import RequestError
from seqfault.report.data import Quantity, QuantityColumn
from seqfault.report.files import FORMULA, as_csv, as_json, write_whole

TREES = st.recursive(
    st.none() | st.booleans() | st.floats(allow_nan=False, allow_infinity=False) | st.text(),
    lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
    max_leaves=20,
)


@given(st.dictionaries(st.text(), TREES))
def test_json_reads_back_to_the_last_bit(tree: dict[str, Any]) -> None:
    assert json.loads(as_json(tree)) == tree


def test_json_has_no_token_for_what_is_not_finite() -> None:
    text = as_json({"a": [math.nan, math.inf], "b": math.nan}).decode()
    assert json.loads(text) == {"a": [None, None], "b": None}


def test_lists_of_numbers_stay_on_one_line() -> None:
    assert '"a": [1.5, -30.0]' in as_json({"a": [1.5, -30.0]}).decode()


def quantity(place: str, value: float | None = -1.5) -> Quantity:
    return Quantity(place, "line-ground", "fault current", "a", value, "A", -30.0, place, "base")


@given(st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), min_size=1))
@example("a\rb")
def test_csv_reads_back_and_no_text_is_a_formula(place: str) -> None:
    written = b"".join(as_csv([quantity(place)])).decode()
    (row,) = csv.DictReader(io.StringIO(written, newline=""))
    assert not row["place"].startswith(FORMULA)
    assert row["place"].removeprefix("'") == place.removeprefix("'")
    assert float(row["value"]) == -1.5


NAMES = st.text(st.characters(codec="utf-8")) | st.text("=-,\"'\n\r ab")


@given(
    st.lists(st.tuples(NAMES, NAMES, st.none() | st.floats(allow_nan=False)), max_size=5),
    NAMES,
)
def test_csv_of_a_column_is_that_of_its_lines(
    values: list[tuple[str, str, float | None]], kind: str
) -> None:
    rows = [Quantity(p, kind, "current", "", v, "A", None, w, "base") for p, w, v in values]
    column = QuantityColumn(
        [p for p, _, _ in values],
        kind,
        "current",
        [v for _, _, v in values],
        "A",
        [w for _, w, _ in values],
        "base",
    )
    assert b"".join(as_csv([*rows, column])) == b"".join(as_csv([*rows, *rows]))


def test_long_csv_comes_in_pieces_of_whole_lines() -> None:
    names = [f"B {k}, bay" for k in range(20_000)]
    column = QuantityColumn(names, "three-phase", "current", [0.1] * len(names), "A", names, "base")
    pieces = list(as_csv(column if k % 2 else quantity("x") for k in range(4)))
    assert max(map(len, pieces)) < 1e6
    assert all(piece.endswith(b"\n") for piece in pieces[:-1])
    read = list(csv.DictReader(io.StringIO(b"".join(pieces).decode())))
    assert [row["place"] for row in read] == ["x", *names] * 2


def test_csv_leaves_what_is_undefined_empty() -> None:
    (row,) = csv.DictReader(io.StringIO(b"".join(as_csv([quantity("x", None)])).decode()))
    assert row["value"] == ""


def test_a_write_that_fails_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "answer.json"
    target.write_bytes(b"old")

    def fail(_: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", fail)
    with pytest.raises(RequestError, match="No space left"):
        write_whole(str(target), [b"new"], overwrite=True)
    assert target.read_bytes() == b"old"
    assert [p.name for p in tmp_path.iterdir()] == ["answer.json"]


def test_a_file_whose_last_piece_fails_is_not_begun(tmp_path: Path) -> None:
    def pieces() -> Iterator[bytes]:
        yield b"half"
        raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        write_whole(str(tmp_path / "answer.csv"), pieces(), overwrite=False)
    assert list(tmp_path.iterdir()) == []


def test_a_file_that_appears_meanwhile_is_kept(tmp_path: Path) -> None:
    target = tmp_path / "answer.json"
    target.write_bytes(b"of another")
    with pytest.raises(RequestError, match="exists"):
        write_whole(str(target), [b"new"], overwrite=False)
    assert target.read_bytes() == b"of another"
    assert len(list(tmp_path.iterdir())) == 1


def test_without_hard_links(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: str) -> None:
        raise OSError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", fail)
    target = tmp_path / "answer.json"
    write_whole(str(target), [b"new"], overwrite=False)
    assert target.read_bytes() == b"new"
    with pytest.raises(RequestError, match="exists"):
        write_whole(str(target), [b"newer"], overwrite=False)
