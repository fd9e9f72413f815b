"""Spoilt files of every kind end in a case or in complaints, never in another exception."""

import json
import re
import tomllib
from collections.abc import Callable

from hypothesis import given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.case.text import parse_text
from seqfault.errors import CaseError, InputError
from tests.case.installation import GENERATOR, MOTOR, OTHERS, PROTECTION, third_winding
from tests.case.test_scenarios import STATES

TESTED = """
[transformers.T3]
vector_group = "YNyn0"
rating = "5 MVA"
hv = { bus = "grid", voltage = "33 kV" }
lv = { bus = "pump", voltage = "11 kV" }
impedance = "7 %"
x_over_r = 15
magnetic_circuit = "three-limb"
zero_tests = { from_hv = "80 %", from_lv = "75 %", from_hv_lv_shorted = "9 %" }

[neutrals.coil]
kind = "arc-suppression"
detuning = "+5 %"
"""
THIRD = third_winding("Dyn11d0", 'impedance_on = { hv_lv = "10 MVA" }\n')
TEXT = THIRD + STATES + GENERATOR + MOTOR + OTHERS + TESTED + PROTECTION
TREE = tomllib.loads(TEXT)
LINES = TEXT.splitlines()
SCRAPS = st.sampled_from(
    [*LINES, "[", "]", "=", "{}", '"', "[[lines]]", "[lines.F1.2]", "x = nan", "out = true"]
) | st.text(max_size=20)
VALUES = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.just(10**400)
    | st.floats()
    | st.text(max_size=10)
    | st.sampled_from(
        ["11 kV", "0.1+j0.4 ohm/km", "5 %", "solid", "main", "T1", "F1@main", "K1", "0.1 In", "200/1 A"]
    ),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner),
    max_leaves=5,
)


def read_bytes(content: bytes, name: str) -> Case:
    """Read what a file of this name would hold."""
    return case_from_tree(parse_text(content, name), name)


def read_or_complain(read: Callable[..., Case], *arguments: object) -> None:
    try:
        case = read(*arguments)
    except InputError as error:
        complaints = error.complaints if isinstance(error, CaseError) else [str(error)]
        assert complaints
        assert all(line and line.isprintable() for line in complaints)
    else:
        assert isinstance(case, Case)
        for scenario in ("base", *case.scenarios):
            assert in_state(case, scenario).state == scenario


@given(st.data())
@settings(max_examples=150)
def test_lines_dropped_doubled_and_replaced(data: st.DataObject) -> None:
    lines = list(LINES)
    for _ in range(data.draw(st.integers(1, 4))):
        place = data.draw(st.integers(0, len(lines) - 1))
        lines[place : place + 1] = data.draw(
            st.just([]) | st.just([lines[place]] * 2) | SCRAPS.map(lambda scrap: [scrap])
        )
    read_or_complain(read_bytes, "\n".join(lines).encode(errors="surrogatepass"), "case.toml")


@given(st.data())
@settings(max_examples=150)
def test_bytes_changed(data: st.DataObject) -> None:
    content = bytearray(TEXT.encode())
    for _ in range(data.draw(st.integers(1, 6))):
        place = data.draw(st.integers(0, len(content) - 1))
        content[place : place + data.draw(st.integers(0, 3))] = data.draw(st.binary(max_size=3))
    read_or_complain(read_bytes, bytes(content), "case.toml")


@given(st.binary(max_size=200) | st.text(max_size=200).map(lambda text: text.encode()))
@settings(max_examples=100)
def test_any_bytes(content: bytes) -> None:
    for name in ("case.toml", "case.json", "case"):
        read_or_complain(read_bytes, content, name)


@given(st.data())
@settings(max_examples=300)
def test_any_value_anywhere(data: st.DataObject) -> None:
    """One value of the tree, at any depth, becomes any value JSON can hold."""
    tree = json.loads(json.dumps(TREE))
    table, steps = tree, data.draw(st.integers(1, 5))
    for _ in range(steps):
        key = data.draw(st.sampled_from(sorted(table)))
        if not isinstance(table[key], dict) or not table[key]:
            break
        parent, table = table, table[key]
    else:
        table, key = parent if steps > 1 else tree, key
    if data.draw(st.booleans()):
        key = data.draw(
            st.text(max_size=8)
            | st.sampled_from(["z1", "2", "frequency", "tv", "in", "start", "z0", "loads"])
        )
    table[key] = data.draw(VALUES)
    read_or_complain(case_from_tree, tree)
    read_or_complain(read_bytes, json.dumps(tree).encode(), "case.json")


EXTREME = st.sampled_from(
    [
        "0",
        "-1",
        "1e-300",
        "5e-324",
        "1e150",
        "1e300",
        "1e308+j1e308",
        "j1e33",
        "1e-39",
        "1e-30-j1e-30",
        "1e30",
        "-j1",
    ]
)


def _respell(tree: dict[str, object], data: st.DataObject, changes: int) -> None:
    """Give quantities and numbers, at any depth, values at the ends of what a float holds."""
    found: list[tuple[dict[str, object], str, str]] = []

    def walk(table: dict[str, object]) -> None:
        for key, value in table.items():
            if isinstance(value, dict):
                walk(value)
            elif isinstance(value, str) and (unit := re.fullmatch(r"[-+]?[0-9][^ ]* (.+)", value)):
                found.append((table, key, unit[1]))
            elif isinstance(value, float | int) and not isinstance(value, bool):
                found.append((table, key, ""))

    walk(tree)
    for table, key, unit in data.draw(st.lists(st.sampled_from(found), min_size=1, max_size=changes)):
        number = data.draw(EXTREME)
        table[key] = f"{number} {unit}" if unit else float(number) if "j" not in number else 1e300


@given(st.data())
@settings(max_examples=300)
def test_numbers_of_any_size(data: st.DataObject) -> None:
    tree = json.loads(json.dumps(TREE))
    _respell(tree, data, 4)
    read_or_complain(case_from_tree, tree)


@given(VALUES)
def test_any_json(value: object) -> None:
    read_or_complain(read_bytes, json.dumps(value).encode(), "case.json")
    read_or_complain(read_bytes, json.dumps({"lines": value, "scenarios": value}).encode(), "x.json")


def test_deep_tables_inside_a_scenario() -> None:
    deep: dict[str, object] = {}
    for _ in range(900):
        deep = {"hv": deep}
    tree = TREE | {"transformers": {"T1": deep}, "scenarios": {"n": {"transformers": {"T1": deep}}}}
    read_or_complain(case_from_tree, tree)
