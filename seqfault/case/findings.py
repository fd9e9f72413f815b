"""What is wrong with a case file, or doubtful: sentences, each with the record it is about."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from seqfault.errors import quoted

SINGULAR = {
    "buses": "bus",
    "infeeds": "infeed",
    "generators": "generator",
    "motors": "motor",
    "lines": "line",
    "mutual_couplings": "mutual coupling",
    "transformers": "transformer",
    "earthing_transformers": "earthing transformer",
    "neutrals": "neutral",
    "series_reactors": "series reactor",
    "capacitors": "capacitor",
    "loads": "load",
    "converters": "converter",
    "ties": "tie",
    "relays": "relay",
    "current_transformers": "current transformer",
}


def place(table: str, name: str = "", field: str = "") -> str:
    """Return ``transformer "T1", vector_group``: where in the file something stands."""
    where = f"{SINGULAR.get(table, table)} {quoted(name)}" if name or table in SINGULAR else table
    return ", ".join(part for part in (where, field) if part)


def one_of(table: str) -> str:
    """Return ``an infeed``: a record of a table, with its article."""
    word = SINGULAR[table]
    return f"{'an' if word[0] in 'aeiou' else 'a'} {word}"


class Findings:
    """Complaints and warnings as they are found, told in the order of the file."""

    def __init__(self) -> None:
        self._errors: list[tuple[str, str, str]] = []
        self._warnings: list[tuple[str, str, str]] = []

    def error(self, table: str, name: str, field: str, problem: str) -> None:
        """Add a complaint about a field of a record; table and name may be empty."""
        self._errors.append((table, name, _sentence(table, name, field, problem)))

    def warn(self, table: str, name: str, field: str, problem: str) -> None:
        """Add a warning about a field of a record."""
        self._warnings.append((table, name, _sentence(table, name, field, problem)))

    def errors(self, tree: Mapping[str, Any]) -> tuple[str, ...]:
        """Return the complaints in the order of ``tree``, those about the whole file first."""
        return _in_order(self._errors, tree)

    def warnings(self, tree: Mapping[str, Any]) -> tuple[str, ...]:
        """Return the warnings in the order of ``tree``."""
        return _in_order(self._warnings, tree)


def _sentence(table: str, name: str, field: str, problem: str) -> str:
    where = place(table, name, field) if table else field
    return f"{where}: {problem}" if where else problem


def _in_order(found: Iterable[tuple[str, str, str]], tree: Mapping[str, Any]) -> tuple[str, ...]:
    found = list(found)
    if not found:
        return ()
    tables = {table: index for index, table in enumerate(tree, 1)}
    rows: dict[str, dict[str, int]] = {}
    for table in {table for table, _, _ in found}:
        records = tree.get(table)
        if isinstance(records, Mapping):
            rows[table] = {name: index for index, name in enumerate(records, 1)}
    found.sort(key=lambda row: (tables.get(row[0], 0), rows.get(row[0], {}).get(row[1], 0)))
    return tuple(dict.fromkeys(sentence for _, _, sentence in found))
