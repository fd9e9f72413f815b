"""Rules across records: names, the whole file, then record by record."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from typing import Any

from seqfault.case.branches import check_line, check_series_reactor, check_tie
from seqfault.case.couplings import check_coupling, check_couplings
from seqfault.case.current_transformers import check_current_transformer
from seqfault.case.demands import check_demands, check_least
from seqfault.case.draft import Draft
from seqfault.case.earthing import (
    check_earthing_transformer,
    check_neutral,
    star_point_named,
    star_points,
)
from seqfault.case.fields import references
from seqfault.case.findings import Findings, one_of
from seqfault.case.quantities import parse_quantity
from seqfault.case.records import TABLES
from seqfault.case.relays import check_relays
from seqfault.case.shunts import check_capacitor, check_converter, check_load
from seqfault.case.sources import check_generator, check_infeed, check_motor
from seqfault.case.subject import Site, Subject, real
from seqfault.case.transformers import check_parallel, check_transformer
from seqfault.case.units import normalised
from seqfault.errors import QuantityError, quoted

RESERVED = ("base", "all")
# Begins as no quantity does, without @, each on a line of its own.
_PLAIN_NAMES = re.compile(r"(?:[A-Za-ik-z][A-Za-z0-9_ ./-]*\n)*[A-Za-ik-z][A-Za-z0-9_ ./-]*")
_PREFAULT = (0.8, 1.2)
_RULES: dict[str, Callable[[Subject, Any], None]] = {
    "infeeds": check_infeed,
    "generators": check_generator,
    "motors": check_motor,
    "lines": check_line,
    "mutual_couplings": check_coupling,
    "transformers": check_transformer,
    "earthing_transformers": check_earthing_transformer,
    "series_reactors": check_series_reactor,
    "capacitors": check_capacitor,
    "loads": check_load,
    "converters": check_converter,
    "ties": check_tie,
    "current_transformers": check_current_transformer,
}


def check(draft: Draft, findings: Findings) -> None:
    """Tell ``findings`` every rule that the records break, and what looks doubtful."""
    case, site = draft.case, Site(draft, findings)
    _names(draft, findings)
    _whole(draft, site)
    for name, bus in case.buses.items():
        if not bus.voltage.value.real > 0:
            Subject(site, "buses", name).positive({"voltage": bus.voltage})
    for table, rule in _RULES.items():
        for name, record in getattr(case, table).items():
            rule(Subject(site, table, name), record)
    _broken_records(draft, site)
    check_couplings(site)
    check_parallel(site)
    check_relays(site)
    check_demands(site)
    users = star_points(case)
    for name, neutral in case.neutrals.items():
        check_neutral(Subject(site, "neutrals", name), neutral, users.get(name, ()))


def check_file(draft: Draft, findings: Findings) -> None:
    """Tell ``findings`` what concerns the file with its scenarios, beyond each state of it."""
    check_least(Site(draft, findings))


def _names(draft: Draft, findings: Findings) -> None:
    for table in ("neutrals",) if _all_plain(draft) else TABLES:
        records = draft.tree.get(table)
        for name in records if isinstance(records, Mapping) else ():
            problem = name_problem(name)
            owner = draft.names.get(name, table)
            if problem is None and owner != table:
                problem = f"{one_of(owner)} has this name already; names are unique over all tables"
            if problem is None and table == "neutrals":
                problem = _neutral_name(draft, name)
            if problem is not None:
                findings.error(table, name, "", problem)


def _all_plain(draft: Draft) -> bool:
    """Tell whether no name can break a rule of all tables; quick, false where it takes more to know."""
    names = draft.names
    tables = [records for table in TABLES if isinstance(records := draft.tree.get(table), dict)]
    if sum(map(len, tables)) != len(names) or not names.keys().isdisjoint(RESERVED):
        return False
    return _PLAIN_NAMES.fullmatch("\n".join(names)) is not None


def name_problem(name: str) -> str | None:
    """Return what is wrong with the name of a record or a scenario, or None."""
    if not name.strip():
        return "a name cannot be empty"
    if "@" in name:
        return "a name cannot hold @, which joins an element to its bus in the name of a place"
    if name in RESERVED:
        return f"the name is reserved; {' and '.join(RESERVED)} are words of the program"
    if (not name[0].isalpha() or name[0] == "j") and _reads_as_quantity(name):
        return f"this name reads as a quantity; add a word, as in {quoted(f'at {name}')}"
    try:
        name.encode()
    except UnicodeEncodeError:
        return "the name holds half a character"
    return None


def _reads_as_quantity(name: str) -> bool:
    try:
        parse_quantity(name)
    except QuantityError:
        return False
    return True


def _neutral_name(draft: Draft, name: str) -> str | None:
    if name in ("solid", "isolated"):
        return f"the name is reserved; neutral = {quoted(name)} has a meaning of its own"
    return star_point_named(draft.case, name)


def _broken_records(draft: Draft, site: Site) -> None:
    """Check what the records refer to that cannot be read for another reason."""
    for name in draft.broken:
        table = draft.names[name]
        records = draft.tree.get(table)
        subject = Subject(site, table, name)
        for field, mark, other in references(TABLES[table], records.get(name) if records else None):
            subject.refers(field, mark, other)


def _whole(draft: Draft, site: Site) -> None:
    case, findings = draft.case, site.findings
    if "buses" not in draft.names.values():
        findings.error("", "", "", 'there is no bus; write one below [buses], as in main = "11 kV"')
    sources = [*case.infeeds.values(), *case.generators.values()]
    broken = any(draft.names[name] in ("infeeds", "generators") for name in draft.broken)
    if not broken and all(source.out for source in sources):
        findings.warn("", "", "", "no infeed or generator is in service, so no current can flow")
    prefault, subject = case.prefault.voltage, Subject(site, "prefault", "")
    voltage = real(prefault)
    if voltage is not None and subject.positive({"voltage": prefault}):
        text = f"{normalised(prefault.text)} is outside the usual 0.8 to 1.2 pu"
        subject.usual("voltage", voltage, _PREFAULT, text, 100)
