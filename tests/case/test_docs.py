"""The page of the case format is held to the reader: its examples, its fields, its units."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, get_args

import msgspec
import pytest

from seqfault.case.conversion import fields_of
from seqfault.case.protection import CurveName, Demands, Instant, MarginTerms, Measures, Steps
from seqfault.case.quantities import Dimensions, parse_quantity, read_quantity
from seqfault.case.reader import case_from_tree
from seqfault.case.records import TABLES, Case, Prefault, Record, Winding
from seqfault.case.units import UNITS
from seqfault.equations.relay_curves import CURVES
from seqfault.errors import CaseError, QuantityError
from seqfault.faults.kinds import KINDS
from seqfault.faults.network import Network

PAGE = (Path(__file__).parents[2] / "docs" / "case-format.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```toml( fragment)?\n(.*?)^```$", PAGE, re.MULTILINE | re.DOTALL)
COMPLETE = [text for mark, text in BLOCKS if not mark]
FRAGMENTS = [text for mark, text in BLOCKS if mark]
EXAMPLE = tomllib.loads(COMPLETE[0])


def section(heading: str) -> str:
    """What stands below a heading, up to the next one of any depth."""
    found = re.search(rf"^#+ {re.escape(heading)}\n(.*?)(?=^#+ |\Z)", PAGE, re.M | re.S)
    assert found, heading
    return found[1]


def rows(text: str) -> list[list[str]]:
    """Cells of all Markdown tables in a text, headings and rules left out."""
    lines = [line for line in text.splitlines() if line.startswith("|")]
    cells = [[cell.strip() for cell in line.strip("|").split("|")] for line in lines]
    return [row for k, row in enumerate(cells) if not _rule(row) and not _rule_follows(cells, k)]


def _rule(row: list[str]) -> bool:
    return all(set(cell) <= set("-: ") for cell in row)


def _rule_follows(cells: list[list[str]], k: int) -> bool:
    return k + 1 < len(cells) and _rule(cells[k + 1])


def merged(raw: Any, change: Any) -> Any:
    if not isinstance(raw, Mapping) or not isinstance(change, Mapping):
        return change
    return {**raw, **{key: merged(raw.get(key), value) for key, value in change.items()}}


def solved(case: Case) -> None:
    """Build the network of every state and ask it for a fault."""
    for state in (None, *case.scenarios):
        network = Network(case, state)
        assert abs(network.fault("main", "three-phase").current[0]) > 1000


@pytest.mark.parametrize("text", COMPLETE)
def test_complete_examples_read_and_solve(text: str) -> None:
    case = case_from_tree(tomllib.loads(text))
    assert case.warnings == ()
    assert case.scenarios
    solved(case)


@pytest.mark.parametrize("text", FRAGMENTS)
def test_fragments_belong_to_the_example(text: str) -> None:
    change = tomllib.loads(text)
    tree = merged(EXAMPLE, change)
    assert tree != EXAMPLE
    solved(case_from_tree(tree))


def test_json_is_the_same_tree() -> None:
    case = case_from_tree(json.loads(json.dumps(EXAMPLE)))
    assert case.transformers == case_from_tree(EXAMPLE).transformers


@pytest.mark.parametrize("table", [*TABLES, "prefault", "demands"])
def test_every_field_has_its_row(table: str) -> None:
    kind = TABLES.get(table) or {"prefault": Prefault, "demands": Demands}[table]
    found = rows(section(f"`{table}`"))
    if table == "transformers":
        size = len(fields_of(Winding))
        _same_fields(Winding, found[-size:])
        found = found[:-size]
    _same_fields(kind, found)


def test_tables_inside_the_records_of_protection_have_their_fields() -> None:
    _same_fields(MarginTerms, rows(section("Terms of the margin")))
    found = dict(rows(section("Fast stage and scales of a relay")))
    for name, kind in (("instant", Instant), ("steps", Steps)):
        assert set(fields_of(kind)) == set(re.findall("`([a-z_]+)`", found[f"`{name}`"]))


def test_curves_and_what_is_measured_are_listed() -> None:
    listed = {row[0].strip('`"') for row in rows(section("Curves of a relay"))}
    assert listed == set(get_args(CurveName)) == set(CURVES)
    measured = rows(section("What a relay measures"))
    assert {row[0].strip("`") for row in measured} == set(get_args(Measures))


def test_every_record_field_has_its_row() -> None:
    _same_fields(Record, rows(section("Records and their names")), common=True)


def _same_fields(kind: type[msgspec.Struct], found: list[list[str]], common: bool = False) -> None:
    shared = set() if common or not issubclass(kind, Record) else set(fields_of(Record))
    wanted = {key: field for key, field in fields_of(kind).items() if key not in shared}
    assert [row[0].strip("`") for row in found if row[0].strip("`") not in wanted] == []
    assert {row[0].strip("`") for row in found} == set(wanted)
    for row in found:
        assert (row[2] == "yes") == wanted[row[0].strip("`")].required, row


def test_all_plain_units_are_listed() -> None:
    listed = {unit for row in rows(section("Quantities")) for unit in re.findall("`([^`]+)`", row[1])}
    plain = {unit for unit, (dimension, _, _) in UNITS.items() if "/" not in dimension}
    assert plain - listed == set()
    for row in rows(section("Quantities"))[:15]:
        for unit in re.findall("`([^`]+)`", row[1]):
            assert unit in UNITS


def test_forms_of_a_complex_value_read() -> None:
    forms = {
        text
        for row in rows(section("Quantities"))
        for text in re.findall('`"([^"]+)"`', row[1])
        if "j" in text or "∠" in text or " at " in text
    }
    assert len(forms) == 6
    assert all(isinstance(parse_quantity(form).value, complex) for form in forms)


def test_answers_to_what_cannot_be_read() -> None:
    found = [row for row in rows(section("Quantities")) if row[0].startswith('`"')]
    assert len(found) == 6
    for written, answer in found:
        text = written.strip("`")
        with pytest.raises(QuantityError) as error:
            read_quantity(text.strip('"'), Dimensions("voltage"))
        assert str(error.value) == f"{text}: {answer}"


def test_messages_shown_are_those_given() -> None:
    shown = re.findall("^```text\n(.*?)^```$", section("Errors and warnings"), re.M | re.S)[0]
    wrong = {
        "transformers": {"T1": {"vector_group": "Dyn13"}},
        "lines": {"F1": {"to": "Far"}},
        "motors": {"pumps": {"efficiency": 95.2}},
        "neutrals": {"NER": {"current": "300 amps"}},
    }
    with pytest.raises(CaseError) as error:
        case_from_tree(merged({**EXAMPLE, "scenarios": {}}, wrong))
    assert sorted(error.value.complaints) == sorted(shown.splitlines())


def test_kinds_of_fault_are_listed() -> None:
    found = rows(section("Places and kinds of fault"))
    assert {row[0].strip("`") for row in found} == set(KINDS)
    for name, phases, _ in found:
        kind = KINDS[name.strip("`")]
        assert phases.split(",")[0].replace(" ", "") == kind.phases
        assert ("earth" in phases) == kind.earth


def test_links_within_the_page_lead_somewhere() -> None:
    anchors = {
        re.sub(r"[^\w -]", "", heading).strip().lower().replace(" ", "-")
        for heading in re.findall(r"^#+ (.*)$", PAGE, re.M)
    }
    assert set(re.findall(r"\]\(#([^)]+)\)", PAGE)) <= anchors


def test_what_the_page_says_of_states() -> None:
    def line_ground(change: Mapping[str, Any]) -> float:
        case = case_from_tree({**EXAMPLE, "scenarios": {"asked": change}})
        return float(abs(Network(case, "asked").fault("main", "line-ground").residual))

    assert line_ground({}) == pytest.approx(300, rel=0.02)
    charging = line_ground({"out": ["NER"]})  # a neutral that is out earths nothing
    assert charging == pytest.approx(5.98 * 1.8 * 0.37, rel=0.01)  # 5.98 A/uF at 11 kV, 50 Hz
    assert line_ground({"out": ["NER", "far"]}) == pytest.approx(0)  # the cable is out with its bus
    assert line_ground({"out": ["utility"]}) == 0
    added = {"N2": {"resistance": "63.5 ohm"}}
    moved = {"T1": {"lv": {"neutral": "N2"}}}
    assert line_ground({"neutrals": added, "transformers": moved}) == pytest.approx(100, rel=0.01)


def test_null_takes_a_field_away_in_json() -> None:
    level = {"three_phase": None, "x_over_r": None, "z1": "0.1+j1.4 ohm"}
    scenarios = {"asked": {"infeeds": {"utility": level}}}
    case = case_from_tree(json.loads(json.dumps({**EXAMPLE, "scenarios": scenarios})))
    current = abs(Network(case, "asked").fault("grid", "three-phase").current[0])
    motors = 2 * 6 * 400e3 / (0.952 * 0.88) / (33e3 * 3**0.5)  # at most, behind cable and T1
    at_least = 33e3 / 3**0.5 / abs(0.1 + 1.4j)
    assert at_least < current < at_least + motors
