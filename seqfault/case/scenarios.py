"""The case in a named operating state: its ``[scenarios.NAME]`` laid over the file, checked again.

A scenario lists records ``in`` and ``out`` of service, ties and line ends (``LINE@BUS``) to ``open``
and ``close``, and states any other table of the file in part: a field stated replaces the field.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import msgspec

from seqfault.case.checks import check, name_problem
from seqfault.case.draft import Draft, draft
from seqfault.case.findings import Findings, one_of
from seqfault.case.records import TABLES, Case
from seqfault.case.synonyms import LATER_TABLES
from seqfault.case.wording import Spelling, listed, shown
from seqfault.errors import CaseError, RequestError, quoted

_SWITCHING = ("in", "out", "open", "close")
_KEYS = ("note", *_SWITCHING, "title", "frequency", "base_power", "prefault", *TABLES)


def in_state(
    case: Case,
    scenario: str = "base",
    without: Iterable[str] = (),
    open: Iterable[str] = (),
    close: Iterable[str] = (),
) -> Case:
    """Return ``case`` in a scenario of its file, with further records out, ties and line ends switched.

    ``base`` is the file itself. ``without`` names records, ``open`` and ``close`` ties, or line ends
    as ``LINE@BUS``. Raises RequestError for a scenario, record or place that is not there, and
    CaseError when the state breaks a rule of the case file.
    """
    without, open, close = tuple(without), tuple(open), tuple(close)
    if scenario == case.state == "base" and not (without or open or close):
        return case
    if scenario != "base" and scenario not in case.scenarios:
        hint = Spelling(("base", *case.scenarios)).hint(scenario)
        raise RequestError(f"there is no scenario {quoted(scenario)}{hint}")
    change = case.tree["scenarios"][scenario] if scenario != "base" else {}
    tree, problems = _overlaid(case.tree, change)
    complaints = [f"scenario {quoted(scenario)}: {problem}" for problem in problems]
    asked = {"out": without, "open": open, "close": close}
    if refused := _switched(tree, asked, out="without"):
        raise RequestError("\n".join(refused))
    findings = Findings()
    base = Draft(case, case.tree, {}, frozenset()) if case.state == "base" else None
    state = draft(tree, findings, case.source, base)
    check(state, findings)
    complaints += [f"scenario {quoted(scenario)}: {line}" for line in findings.errors(tree)]
    if complaints:
        raise CaseError(complaints, case.source)
    words = {"without": without, "open": open, "close": close}
    changes = [f"{word} {listed(names, 'and')}" for word, names in words.items() if names]
    return msgspec.structs.replace(
        state.case,
        scenarios=case.scenarios,
        state=", ".join([scenario, *changes]),
        tree=case.tree,
        sha256=case.sha256,
        assumptions=case.assumptions,
        warnings=findings.warnings(tree),
    )


def check_scenarios(base: Draft, known: Iterable[str]) -> list[str]:
    """Return the complaints about every scenario of a file that are not ``known`` without it."""
    known, complaints = set(known), []
    for name in base.case.scenarios:
        where = f"scenario {quoted(name)}"
        if problem := name_problem(name):
            complaints.append(f"{where}: {problem}")
        tree, problems = _overlaid(base.tree, base.tree["scenarios"][name])
        findings = Findings()
        check(draft(tree, findings, base.case.source, base), findings)
        problems += [line for line in findings.errors(tree) if line not in known]
        complaints += [f"{where}: {problem}" for problem in problems]
    return complaints


def _overlaid(tree: Mapping[str, Any], change: object) -> tuple[dict[str, Any], list[str]]:
    """Return the tree with a scenario laid over it, and what is wrong with the scenario.

    Tables and records that do not change are the same objects as in ``tree``.
    """
    made = {key: value for key, value in tree.items() if key != "scenarios"}
    if not isinstance(change, Mapping):
        return made, [f"{shown(change)}: a table is wanted, as in [scenarios.NAME]"]
    problems = []
    for key, value in change.items():
        if key in TABLES:
            made[key] = _table_overlaid(key, made.get(key), value)
        elif key == "prefault":
            made[key] = _merged(made.get(key), value)
        elif key in ("title", "frequency", "base_power"):
            made[key] = value
        elif key == "note":
            if not isinstance(value, str):
                problems.append(f"note: {shown(value)}: a text in quotes is wanted")
        elif key == "demands":
            problems.append("the demands hold for all states; state them in [demands] of the file alone")
        elif key not in _SWITCHING:
            problems.append(_unknown_key(key))
    switching = {}
    for key in _SWITCHING:
        names = change.get(key)
        if names is None:
            continue
        if not isinstance(names, (list, tuple)) or not all(isinstance(n, str) for n in names):
            problems.append(f'{key}: {shown(names)}: a list of names is wanted, as in ["T1"]')
        else:
            switching[key] = tuple(names)
    return made, problems + _switched(made, switching)


def _unknown_key(key: str) -> str:
    if key in LATER_TABLES:
        return f"the table {quoted(key)} is not read by this version"
    hint = Spelling(_KEYS).hint(key)
    return f"there is no key {quoted(key)} of a scenario{hint or '; there are ' + ', '.join(_KEYS)}"


def _table_overlaid(table: str, records: object, change: object) -> object:
    if not isinstance(records, Mapping) or not isinstance(change, Mapping):
        return change
    made = dict(records)
    for name, value in change.items():
        if table == "buses" and isinstance(value, str):
            value = {"voltage": value}
        made[name] = _merged(_as_table(table, made.get(name)), value)
    return made


def _as_table(table: str, raw: object) -> object:
    """Return a bus written as its voltage alone as a table."""
    return {"voltage": raw} if table == "buses" and isinstance(raw, str) else raw


def _merged(raw: object, change: object) -> object:
    """Return ``raw`` with the fields of ``change`` in place of its own, tables inside merged."""
    if not isinstance(raw, Mapping) or not isinstance(change, Mapping):
        return change
    return {**raw, **{key: _merged(raw.get(key), value) for key, value in change.items()}}


def _switched(
    tree: dict[str, Any], switching: Mapping[str, tuple[str, ...]], out: str = "out"
) -> list[str]:
    """Put records in or out, open or close ties and line ends, in place; return what cannot be done.

    ``out`` is the word of the messages for taking a record out.
    """
    problems = []
    both = set(switching.get("in", ())) & set(switching.get("out", ()))
    problems += [f"{quoted(name)} is put both in and out" for name in sorted(both)]
    both = set(switching.get("open", ())) & set(switching.get("close", ()))
    problems += [f"{quoted(name)} is both opened and closed" for name in sorted(both)]
    tables = {
        name: table for table in TABLES if isinstance(tree.get(table), Mapping) for name in tree[table]
    }
    for key in ("in", "out"):
        for name in switching.get(key, ()):
            if name not in tables:
                hint = Spelling(tables).hint(name)
                word = out if key == "out" else key
                problems.append(f"{word}: there is no record {quoted(name)}{hint}")
            else:
                _changed(tree, tables[name], name, {"out": key == "out"})
    for key in ("open", "close"):
        for place in switching.get(key, ()):
            problem = _switch(tree, tables, place, key == "open")
            if problem:
                problems.append(f"{key}: {problem}")
    return problems


def _changed(tree: dict[str, Any], table: str, name: str, change: dict[str, Any]) -> None:
    raw = _as_table(table, tree[table][name])
    if isinstance(raw, Mapping):
        tree[table] = {**tree[table], name: {**raw, **change}}


def _switch(tree: dict[str, Any], tables: Mapping[str, str], place: str, opened: bool) -> str | None:
    """Open or close a tie or one end of a line; return what is wrong with the place, or None."""
    name, at, bus = place.partition("@")
    if name not in tables:
        fitting = ("lines",) if at else ("lines", "ties")
        hint = Spelling([one for one, table in tables.items() if table in fitting]).hint(name)
        return f"{quoted(place)}: there is no {'line' if at else 'line or tie'} {quoted(name)}{hint}"
    if tables[name] == "ties":
        if at:
            return f"{quoted(place)}: a tie is opened and closed as a whole; write {quoted(name)}"
        _changed(tree, "ties", name, {"closed": not opened})
        return None
    if tables[name] != "lines":
        wanted = "a line is wanted" if at else "a tie is wanted, or the end of a line as LINE@BUS"
        return f"{quoted(place)}: {quoted(name)} is {one_of(tables[name])}; {wanted}"
    line = tree["lines"][name]
    if not isinstance(line, Mapping):
        return None  # told already
    ends = [end for end in (line.get("from"), line.get("to")) if isinstance(end, str)]
    if not at or bus not in ends:
        places = listed(quoted(f"{name}@{end}") for end in ends)
        return f"{quoted(place)}: this is no end of the line; write {places}"
    before = line.get("open", ())
    if not isinstance(before, (list, tuple)):
        return None
    others = [end for end in before if end != bus]
    _changed(tree, "lines", name, {"open": [*others, bus] if opened else others})
    return None
