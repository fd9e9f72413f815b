"""The raw tree of a file to records, before any rule across records has been applied."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from seqfault.case.columns import convert_table
from seqfault.case.conversion import STRAY, TOP_LEVEL, AnyStruct, convert_record
from seqfault.case.fields import fields_of
from seqfault.case.findings import Findings
from seqfault.case.protection import Demands
from seqfault.case.quantities import Dimensions, missing_unit, read_quantity, wanted
from seqfault.case.records import TABLES, Bus, Case, Prefault, Record
from seqfault.case.synonyms import LATER_TABLES, table_for
from seqfault.case.values import proper_text
from seqfault.case.wording import shown
from seqfault.errors import FieldError, quoted

_BASE_POWER = 100e6  # VA, where the file states none
_KEYS = (*TOP_LEVEL, "prefault", *TABLES, "demands", "scenarios")


@dataclass(frozen=True, slots=True)
class Draft:
    """What could be read: a case without the ``broken`` records, and the tree it came from.

    ``names`` gives every name of the file its table, broken records included.
    """

    case: Case
    tree: Mapping[str, Any]
    names: Mapping[str, str]
    broken: frozenset[str]


def draft(tree: Mapping[str, Any], findings: Findings, source: str, earlier: Draft | None = None) -> Draft:
    """Return the records of ``tree``; what cannot be read is told to ``findings``.

    Records whose raw table is the very same object as in ``earlier`` are taken over from it.
    """
    for key in tree:
        if key not in _KEYS:
            findings.error("", "", "", _unknown_key(str(key)))
    names: dict[str, str] = {}
    broken: set[str] = set()
    strays: set[str] = set()
    tables: dict[str, Any] = {}
    for table, kind in TABLES.items():
        raw = tree.get(table)
        before = earlier.tree.get(table) if earlier else None
        known: Mapping[str, Record] = getattr(earlier.case, table) if earlier else {}
        entries = _entries(table, raw, findings)
        whole: Mapping[str, Record] | None
        if isinstance(before, Mapping):
            whole = known if raw is before and len(known) == len(entries) else None
        else:
            before, whole = {}, _sound_table(kind, entries)
        if whole is not None:
            tables[table] = whole
            owners = dict.fromkeys(entries, table)
            for name in entries.keys() & names.keys():  # two tables, and the first keeps the name
                owners[name] = names[name]
            names |= owners
            continue
        records: dict[str, Record] = {}
        tables[table] = records
        for name, value in entries.items():
            if name in TOP_LEVEL and not isinstance(value, Mapping):
                findings.error("", "", f"[{table}], {name}", STRAY)
                strays.add(name)
                continue
            if kind is not Bus and name in fields_of(kind) and not isinstance(value, Mapping):
                findings.error("", "", f"[{table}], {name}", _nameless(table))
                break
            names.setdefault(name, table)
            record = known.get(name) if before.get(name) is value else None
            if record is None:
                record = _record(kind, table, name, value, findings, strays)
            if record is None:
                broken.add(name)
            else:
                records[name] = record
    prefault = _single(Prefault, "prefault", tree, findings, strays)
    demands = _single(Demands, "demands", tree, findings, strays)
    case = Case(
        title=_title(tree, findings),
        frequency=_frequency(tree, findings, strays),
        base_power=_positive(tree, "base_power", "power", findings) or _BASE_POWER,
        prefault=prefault,
        demands=demands,
        scenarios=tuple(_entries("scenarios", tree.get("scenarios"), findings)),
        tree=tree,
        source=source,
        **tables,
    )
    return Draft(case, tree, names, frozenset(broken))


def _sound_table(kind: type[Record], entries: Mapping[str, Any]) -> dict[str, Record] | None:
    """Return the records of a table without any fault, read as columns; None for any other."""
    if kind is not Bus:
        return convert_table(kind, entries)
    if not entries.keys().isdisjoint(TOP_LEVEL):
        return None
    return convert_table(
        kind,
        {
            name: {"voltage": value} if isinstance(value, (str, int, float)) else value
            for name, value in entries.items()
        },
    )


def _record(
    kind: type[Record], table: str, name: str, value: object, findings: Findings, strays: set[str]
) -> Record | None:
    def complain(field: str, problem: str) -> None:
        if problem is STRAY:
            strays.add(field)
        findings.error(table, name, field, problem)

    if kind is Bus:
        if isinstance(value, (str, int, float)):
            value = {"voltage": value}
        elif not isinstance(value, Mapping):
            complain("", f'{shown(value)}: the voltage is wanted, as in "11 kV"')
            return None
    return convert_record(kind, value, complain, table, name)


def _entries(table: str, raw: object, findings: Findings) -> Mapping[str, Any]:
    """Return the named entries of a table; none, after a complaint, when it is no table."""
    if raw is None:
        return {}
    if isinstance(raw, Mapping):
        return {str(name): value for name, value in raw.items() if value is not None}
    problem = f"{shown(raw)}: a table keyed by name is wanted, as in [{table}.NAME]"
    if isinstance(raw, list):
        problem = f"records are keyed by name; write [{table}.NAME], not [[{table}]]"
    findings.error("", "", table, problem)
    return {}


def _nameless(table: str) -> str:
    return f"this is a field of a record, and the record has no name; write [{table}.NAME] above it"


def _unknown_key(key: str) -> str:
    if key in LATER_TABLES:
        return f"the table {quoted(key)} is not read by this version"
    meant = table_for(key, _KEYS)
    if meant in TOP_LEVEL:
        return f"there is no key {quoted(key)}; write {meant}"
    if meant is not None:
        return f"there is no table {quoted(key)}; write {meant}"
    return f"there is no key or table {quoted(key)}; there are {', '.join(_KEYS)}"


def _title(tree: Mapping[str, Any], findings: Findings) -> str:
    title = tree.get("title", "")
    if not isinstance(title, str):
        findings.error("", "", "title", f"{shown(title)}: a text in quotes is wanted")
        return ""
    try:
        return proper_text(title)
    except FieldError as error:
        findings.error("", "", "title", str(error))
        return ""


def _frequency(tree: Mapping[str, Any], findings: Findings, strays: set[str]) -> float:
    if tree.get("frequency") is None:
        if "frequency" not in strays:
            findings.error(
                "",
                "",
                "frequency",
                'this is missing; write frequency = "50 Hz" or "60 Hz" above the first [table]',
            )
        return 0.0
    return _positive(tree, "frequency", "frequency", findings) or 0.0


def _positive(tree: Mapping[str, Any], key: str, dimension: str, findings: Findings) -> float | None:
    """Return a top-level quantity in SI units; None when not stated or wrong."""
    value, dimensions = tree.get(key), Dimensions(dimension)
    if value is None:
        return None
    problem = None
    if isinstance(value, str):
        try:
            quantity = read_quantity(value, dimensions)
        except FieldError as error:
            problem = str(error)
        else:
            if not isinstance(quantity.value, complex) and quantity.value > 0:
                return quantity.value
            problem = f"{quoted(value, 80)}: this must be more than zero"
    elif isinstance(value, (int, float)) and not isinstance(value, bool):
        problem = f"{shown(value)}: {missing_unit(shown(value), (dimension,))}"
    else:
        problem = f"{shown(value)}: {wanted(dimensions)}"
    findings.error("", "", key, problem)
    return None


def _single(
    kind: type[AnyStruct], key: str, tree: Mapping[str, Any], findings: Findings, strays: set[str]
) -> AnyStruct:
    """Return a table that is one record, as it is when not stated where it is not or is broken."""
    raw = tree.get(key)
    if raw is None:
        return kind()

    def complain(field: str, problem: str) -> None:
        if problem is STRAY:
            strays.add(field)
        findings.error(key, "", field, problem)

    return convert_record(kind, raw, complain, key) or kind()
