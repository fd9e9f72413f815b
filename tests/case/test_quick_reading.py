"""What is read quickly because nothing is wrong with it is what the thorough way makes of it."""

import copy
import json
import tomllib
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from unittest.mock import patch

import msgspec
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from seqfault.case.quantities import Dimensions, parse_quantity, read_quantities, read_quantity
from seqfault.case.reader import case_from_tree
from seqfault.case.records import Case, Line
from seqfault.case.scenarios import in_state
from seqfault.case.text import parse_text
from seqfault.case.units import KINDS, UNITS
from seqfault.errors import CaseError, QuantityError
from tests.bench.grid import grid
from tests.case.installation import entries
from tests.case.test_hostile import EXTREME, TREE, VALUES
from tests.strategies import base_powers, networks, quantity, to_case_tree

ROOT = Path(__file__).parents[2]
CASES = sorted([*ROOT.glob("cases/*.toml"), *ROOT.glob("tests/cli/*.toml")])
BAD = [
    pytest.param(text, id=f"{page.stem}-{name}")
    for page in sorted((Path(__file__).parent / "bad").glob("*.txt"))
    for name, text, _ in entries(page.read_text(encoding="utf-8"))
]


@contextmanager
def thoroughly() -> Iterator[None]:
    """Every table record by record, every rule on every record, JSON key by key."""
    with (
        patch("seqfault.case.draft.convert_table", lambda *_: None),
        patch("seqfault.case.branches.unremarkable", lambda *_: False),
        patch("seqfault.case.checks._all_plain", lambda *_: False),
        patch("seqfault.case.text._json_at_once", lambda *_: None),
    ):
        yield


def outcome(read: Callable[..., Case], *arguments: object) -> tuple[object, ...]:
    """The case to its last bit, or all complaints about it."""
    try:
        case = read(*arguments)
    except CaseError as error:
        return error.complaints
    return (case, repr(msgspec.structs.replace(case, tree={})))


def every_state(tree: dict[str, Any]) -> list[tuple[object, ...]]:
    found = [outcome(case_from_tree, tree)]
    if isinstance(case := found[0][0], Case):
        found += [outcome(in_state, case, name) for name in case.scenarios]
    return found


def agree(tree: dict[str, Any]) -> list[tuple[object, ...]]:
    """Assert that both ways read the same, and return it."""
    quick = every_state(tree)
    with thoroughly():
        assert quick == every_state(tree)
    return quick


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_shipped_cases(path: Path) -> None:
    assert isinstance(agree(tomllib.loads(path.read_text(encoding="utf-8")))[0][0], Case)


@pytest.mark.parametrize("text", BAD)
def test_files_with_faults_and_doubts(text: str) -> None:
    try:
        tree = parse_text(text.encode("utf-8", "surrogatepass"), "case.toml")
    except CaseError:
        return  # no tree
    agree(dict(tree))


@given(st.data())
@settings(max_examples=60)
def test_drawn_networks(data: st.DataObject) -> None:
    agree(to_case_tree(data.draw(networks()), base_power=data.draw(base_powers())))


@given(st.data())
@settings(max_examples=200)
def test_one_value_changed_anywhere(data: st.DataObject) -> None:
    tree = copy.deepcopy(TREE)
    for _ in range(data.draw(st.integers(1, 2))):
        table: Any = tree
        while True:
            key = data.draw(st.sampled_from(sorted(table)))
            if not isinstance(table[key], dict) or not table[key] or data.draw(st.integers(0, 5)) == 0:
                break
            table = table[key]
        table[key] = data.draw(VALUES | EXTREME.map("{} ohm/km".format))
    agree(tree)


def near(low: float, high: float) -> st.SearchStrategy[float]:
    """Mostly between two limits, sometimes a little outside."""
    return st.floats(-0.1, 1.1).map(lambda at: low * (high / low) ** at)


def seldom(usual: Any, *others: Any) -> st.SearchStrategy[Any]:
    return st.integers(0, 11).flatmap(lambda k: st.just(usual) if k else st.sampled_from(others))


@st.composite
def lines(draw: st.DrawFn) -> dict[str, Any]:
    """Usual lines and such as a rule has something to say about, at the ends of what is usual."""
    start, end = draw(st.sampled_from([("A", "A2"), ("D", "D2"), ("C", "C2")]))
    line: dict[str, Any] = {"from": start, "to": draw(seldom(end, start, "B", "nowhere"))}
    metres = draw(near(100, {"A": 10e3, "D": 150e3, "C": 400e3}[start]))
    per, size = draw(st.sampled_from([("/km", 1.0), ("", metres / 1e3)]))
    if draw(seldom(True, False)):
        line["length"] = quantity(metres, "m")
    one = draw(near(5e-3, 5.0))
    for field, ohms in (("z1", one), ("z0", one * draw(near(1.0, 4.0)))):
        direction = complex(draw(seldom(0.6, 0, -0.6)), draw(seldom(0.8, 0, -0.8)))
        line[field] = quantity(size * ohms * direction, f"ohm{per}")
    for letter, unit, omega in (("c", "F", 1.0), ("b", "S", 314.0)):
        farads = draw(near(2e-9, 5e-6))
        if draw(st.sampled_from([False, False, True])):
            for field, share in (("1", 1.0), ("0", draw(near(0.2, 1.0)))):
                if draw(seldom(True, False)):
                    text = quantity(size * omega * farads * share, f"{unit}{draw(seldom(per, '/km', ''))}")
                    line[letter + field] = text
    more: dict[str, tuple[Any, ...]] = {"count": (1, 0, 2), "open": ([], [start], ["B"])}
    more |= {"earthed": (False, True), "out": (False, True), "screen_current": ("1 kA", "0 A")}
    return line | {field: draw(seldom(*values)) for field, values in more.items()}


@given(st.dictionaries(st.sampled_from("KLMNOP"), lines(), min_size=1))
@settings(max_examples=300)
def test_lines_around_the_limits_of_their_rules(drawn: dict[str, Any]) -> None:
    infeed = {"bus": "A", "z1": "0.1+j1 ohm", "z0": "open"}
    volts = {"A": "0.4 kV", "D": "11 kV", "C": "110 kV"}
    buses = {"B": "33 kV"} | volts | {f"{name}2": volt for name, volt in volts.items()}
    agree({"frequency": "50 Hz", "buses": buses, "infeeds": {"Q": infeed}, "lines": drawn})


def test_every_field_of_a_line_is_drawn() -> None:
    """A field more in ``Line`` wants a look at ``unremarkable``, and a place in ``lines`` above."""
    drawn = {"from", "to", "z1", "z0", "length", "c1", "c0", "b1", "b0", "count", "open", "earthed"}
    assert set(Line.__struct_encode_fields__) == drawn | {"out", "screen_current", "note"}


def test_a_grid_takes_the_quick_way() -> None:
    """Else nothing above would compare two ways."""
    tree = grid(300)
    looked_at: list[object] = []
    with (
        patch("seqfault.case.draft._record", looked_at.append),
        patch("seqfault.case.branches._line_values", lambda _, line: looked_at.append(line)),
        patch("seqfault.case.checks.name_problem", lambda name: looked_at.append(name)),
        patch("seqfault.case.text._json", lambda *_: looked_at.append("text")),
    ):
        case = case_from_tree(parse_text(json.dumps(tree).encode(), "grid.json"))
    thorough = [line for line in looked_at if isinstance(line, Line)]
    assert len(thorough) < len(case.lines) / 4
    assert set(looked_at[len(thorough) :]) <= set(case.neutrals) | set(thorough)
    agree(tree)


def test_null_is_not_stated_in_either_way() -> None:
    tree = grid(60)
    for record in tree["transformers"].values():
        record["tap"] = None
        record["hv"]["neutral"] = None
    tree["lines"]["L1"]["c0"] = None
    agree(tree)


def test_one_record_with_a_fault_among_many() -> None:
    tree = grid(60)
    tree["buses"]["B3"] = "eleven"
    assert "eleven" in str(agree(tree))


PLAIN = st.from_regex(r"[0-9]{1,25}(\.[0-9]{0,25})?", fullmatch=True)
NUMBERS = PLAIN | PLAIN | st.floats(0).map(repr) | st.just("0." + 400 * "0" + "1") | st.just("." * 2)


@st.composite
def texts(draw: st.DrawFn, kinds: tuple[str, ...]) -> str:
    """Mostly quantities of ``kinds``, with everything that can be wrong about one."""
    odd = ["", "kv", "j", "°", "ohm / km", *UNITS]
    fitting = [unit for unit, (kind, _, _) in UNITS.items() if kind in kinds]
    unit = draw(st.sampled_from(fitting) | st.sampled_from(fitting) | st.sampled_from(odd))
    second = st.builds("{}j{}".format, st.sampled_from("+-"), NUMBERS)
    return f"{draw(NUMBERS)}{draw(st.just('') | second)} {unit}"


@given(st.data(), st.booleans())
@settings(max_examples=1000)
def test_quantities_at_once_or_one_by_one(data: st.DataObject, is_complex: bool) -> None:
    kinds = tuple(data.draw(st.lists(st.sampled_from(sorted(KINDS)), min_size=1, max_size=3)))
    drawn = data.draw(st.lists(texts(kinds) | st.text(max_size=8), max_size=3))
    dimensions = Dimensions(*kinds, complex=is_complex)

    def told(read: Callable[[], object]) -> str:
        try:
            return repr(read())
        except QuantityError as error:
            return f"refused: {error}"

    parse_quantity.cache_clear()
    one_by_one = told(lambda: {text: read_quantity(text, dimensions) for text in drawn})
    assert told(lambda: read_quantities(drawn, dimensions)) == one_by_one


KEYS = st.sampled_from(["a", "b", ":", '":', "a\\", "\u00e9"])
SCRAPS = st.lists(
    st.one_of(
        st.builds("{}:{}".format, KEYS.map(json.dumps), st.sampled_from(["1", '"x"', '":"', "[1]"])),
        st.builds("{} : {}".format, KEYS.map(json.dumps), st.just('{"a": 1, "a": {"b": ""}}')),
        st.builds("{}\n:{}".format, KEYS.map(json.dumps), st.just('[{"a": 1, "a": 2}]')),
        st.builds('"{}":{}'.format, st.sampled_from(["a", "\\u0061", "\\ud800"]), st.just("-0.0")),
        st.builds('"n":{}'.format, st.sampled_from(["1e400", "NaN", "1e-400", "9" * 30, "01", "1."])),
    ),
    max_size=4,
)


@given(SCRAPS, st.sampled_from([b"", b"\xef\xbb\xbf", b" \n"]))
@settings(max_examples=500)
def test_json_at_once_or_key_by_key(scraps: list[str], before: bytes) -> None:
    content = before + ("{" + ",".join(scraps) + "}").encode()

    def read() -> str:
        try:
            return repr(parse_text(content, "case.json"))
        except CaseError as error:
            return f"refused: {error}"

    quick = read()
    with thoroughly():
        assert quick == read()


def test_two_tables_with_one_name() -> None:
    tree = grid(60)
    tree["lines"]["B1"] = tree["lines"].pop("L1")
    assert "B1" in str(agree(tree))
