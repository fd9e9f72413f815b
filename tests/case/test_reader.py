"""From the bytes of a file to a case: forms, traps, names, complaints in the order of the file."""

import hashlib
import io
import json
import math
import re
import sys
import time
import tomllib
from pathlib import Path

import pytest

from seqfault.case.ct_class import parse_ct_class
from seqfault.case.protection import MultiplierScale
from seqfault.case.ratios import read_ratio
from seqfault.case.reader import case_from_tree, read_case
from seqfault.case.records import Pairs
from seqfault.case.schema import case_schema
from seqfault.errors import CaseError, RequestError
from tests.case.installation import (
    BASE,
    GENERATOR,
    MOTOR,
    OTHERS,
    PROTECTION,
    entries,
    read_text,
    spoilt,
    third_winding,
)

PAGE = (Path(__file__).parent / "bad" / "reading.txt").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("text", "messages"), [pytest.param(*rest, id=name) for name, *rest in entries(PAGE)]
)
def test_says_what_is_wrong(tmp_path: Path, text: str, messages: list[str]) -> None:
    with pytest.raises(CaseError) as caught:
        read_text(tmp_path, text)
    assert list(caught.value.complaints) == messages


def test_base_text_reads_without_a_word(tmp_path: Path) -> None:
    case = read_text(tmp_path, BASE)
    assert case.warnings == case.assumptions == ()
    assert (case.frequency, case.base_power, case.prefault.voltage.value) == (50.0, 100e6, 1.0)
    assert {name: bus.voltage.value for name, bus in case.buses.items()} == {
        "grid": 33e3,
        "main": 11e3,
        "pump": 11e3,
    }
    assert case.transformers["T1"].lv.neutral == "NER"
    assert case.lines["F1"].z1.value == 0.125e-3 + 0.096e-3j
    assert case.sha256 == hashlib.sha256(BASE.encode()).hexdigest()
    assert case.source == str(tmp_path / "case.toml")
    assert case.tree == tomllib.loads(BASE)
    assert [name for _, name, _ in case.records()] == [
        *("grid", "main", "pump"),
        *("utility", "F1", "T1", "NER"),
    ]


def test_every_kind_of_record_reads(tmp_path: Path) -> None:
    case = read_text(tmp_path, BASE + GENERATOR + 'note = "diesel"\nout = true\n' + MOTOR)
    assert case.generators["G1"].note == "diesel"
    assert case.generators["G1"].out
    assert case.motors["M1"].count == 1


def test_base_power_is_100_mva_when_not_stated(tmp_path: Path) -> None:
    case = read_text(tmp_path, spoilt(('base_power = "100 MVA"\n', "")))
    assert case.base_power == 100e6


def test_json_says_the_same_as_toml(tmp_path: Path) -> None:
    text = json.dumps(tomllib.loads(BASE))
    case, same = read_text(tmp_path, BASE), read_text(tmp_path, text, "case.json")
    assert list(case.records()) == list(same.records())


def test_null_in_json_is_not_stated(tmp_path: Path) -> None:
    tree = tomllib.loads(BASE)
    tree["transformers"]["T1"]["tap"] = tree["motors"] = tree["prefault"] = None
    assert read_text(tmp_path, json.dumps(tree), "case.json").transformers["T1"].tap is None


@pytest.mark.parametrize("form", ["toml", "json"])
def test_dash_reads_standard_input(monkeypatch: pytest.MonkeyPatch, form: str) -> None:
    text = BASE if form == "toml" else "\n " + json.dumps(tomllib.loads(BASE))
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(text.encode())))
    case = read_case("-")
    assert (case.source, len(case.buses)) == ("standard input", 3)


def test_byte_order_mark_and_other_line_ends_are_read(tmp_path: Path) -> None:
    assert read_text(tmp_path, "\ufeff" + BASE.replace("\n", "\r\n")).title.startswith("Small")


BYTES = [
    (b"", "case.toml", "the file is empty"),
    (b" \r\n\t", "case.toml", "the file is empty"),
    (b"\xef\xbb\xbf", "case.toml", "the file is empty"),
    (
        BASE.encode("utf-16"),
        "case.toml",
        "the file is not plain text in UTF-8; save it as UTF-8",
    ),
    (b"\0\1\2", "case.toml", "the file is not plain text in UTF-8; save it as UTF-8"),
    (
        'title = "x"\n# Süd'.encode("latin-1"),
        "case.toml",
        "line 2: byte 0xfc is not UTF-8; save the file as UTF-8",
    ),
    (b"[1]", "case.json", "the JSON file is not an object in braces, { }"),
    (b'{"a": 1,}', "case.json", "line 1, column 9: JSON breaks here: "),
    (b'{"a": {"b": 1, "b": 2}}', "case.json", '"b" stands twice in one JSON object'),
    (b"[" * 100_000, "case.json", "the tables are nested too deeply"),
    (b"a = " + b"[" * 100_000, "case.toml", "the tables are nested too deeply"),
    (b"a = " + b"9" * 5000, "case.toml", "a number has too many digits to be read"),
    (b'{"a": ' + b"9" * 5000 + b"}", "case.json", "a number has too many digits to be read"),
]


@pytest.mark.parametrize(("content", "name", "message"), BYTES, ids=lambda value: value[:15])
def test_files_that_are_no_case(tmp_path: Path, content: bytes, name: str, message: str) -> None:
    path = tmp_path / name
    path.write_bytes(content)
    with pytest.raises(CaseError) as caught:
        read_case(path)
    (complaint,) = caught.value.complaints
    assert complaint == message or (message[-2:] == ": " and complaint.startswith(message))


def test_files_that_are_not_there(tmp_path: Path) -> None:
    (tmp_path / "quarry.toml").write_text(BASE)
    for name, message in [
        ("quary.toml", 'there is no such file; did you mean "quarry.toml"?'),
        ("", "this is a directory; a case file is wanted"),
        ("a\0b", "this cannot be the name of a file"),
    ]:
        path = str(tmp_path / name)
        with pytest.raises(RequestError) as caught:
            read_case(path)
        assert str(caught.value) == f'"{path}": {message}'.replace("\0", "\\u0000")


def test_all_complaints_at_once_in_the_order_of_the_file(tmp_path: Path) -> None:
    text = spoilt(
        ('main = "11 kV"', 'main = "11 KV"'),
        ("x_over_r = 10", "x_over_r = -10"),
        ("Dyn11", "Dyn13"),
        ('to = "pump"', 'to = "pmup"'),
        ('length = "1.8 km"', 'length = "1.8"'),
        ("15.9 ohm", "15.9"),
        more="\n[cables]\n",
    )
    with pytest.raises(CaseError) as caught:
        read_text(tmp_path, text)
    assert list(caught.value.complaints) == [
        'there is no table "cables"; write lines',
        'bus "main", voltage: "11 KV": there is no unit "KV"; write "11 kV"',
        'infeed "utility", x_over_r: -10: this cannot be negative',
        'transformer "T1", vector_group: "Dyn13": the clock number is 0 to 11',
        'line "F1", length: "1.8": the unit is missing; write "1.8 km" or "1.8 m"',
        'line "F1", to: there is no bus "pmup"; did you mean "pump"?',
        'neutral "NER", resistance: "15.9": the unit is missing; write "15.9 ohm"',
    ]


NAMES = [
    *("[bold]", "[51N]", "\x1b[31mred", 'the "old" one', "back\\slash", "Süd 110", "変電所"),
    *("a.b", " leading", "x" * 200, "\u202eright-to-left", "new\nline", "12", "T1.hv", "J", "%"),
]


@pytest.mark.parametrize("name", NAMES)
def test_names_hold_any_characters(name: str) -> None:
    tree = tomllib.loads(BASE)
    tree["buses"][name] = tree["buses"].pop("pump")
    tree["lines"]["F1"]["to"] = name
    case = case_from_tree(tree)
    assert case.buses[name].voltage.value == 11e3
    assert case.lines["F1"].to == name


def test_names_are_quoted_on_one_line_and_whole() -> None:
    tree = tomllib.loads(BASE)
    tree["buses"] |= {'a "b"\n\x1b[31m\\': "11", "x" * 200: "11"}
    with pytest.raises(CaseError) as caught:
        case_from_tree(tree)
    problem = 'voltage: "11": the unit is missing; write "11 kV" or "11 V"'
    assert list(caught.value.complaints) == [
        f'bus "a \\"b\\"\\n\\u001b[31m\\\\", {problem}',
        f'bus "{"x" * 200}", {problem}',
    ]


def test_half_a_character_is_refused() -> None:
    tree = tomllib.loads(BASE)
    tree["buses"]["\ud800"] = {"voltage": "11 kV", "note": "\udfff"}
    tree["title"] = "\ud800"
    with pytest.raises(CaseError) as caught:
        case_from_tree(tree)
    assert list(caught.value.complaints) == [
        'title: "\\ud800": the text holds half a character',
        'bus "\\ud800", note: "\\udfff": the text holds half a character',
        'bus "\\ud800": the name holds half a character',
    ]


def test_a_large_file_reads_in_proportion() -> None:
    """Twenty times the lines take some twenty times as long, a hundred at the most."""

    def seconds(count: int) -> float:
        buses = {f"B{k}": "11 kV" for k in range(count + 1)}
        line = {"z1": "0.125+j0.096 ohm/km", "z0": "0.6+j0.3 ohm/km"}
        tree = tomllib.loads(BASE)
        tree["buses"] |= buses
        tree["lines"] = {
            f"L{k}": line | {"from": f"B{k}", "to": f"B{k + 1}", "length": f"{k + 1} m"}
            for k in range(count)
        }
        start = time.perf_counter()
        assert len(case_from_tree(tree).lines) == count
        return time.perf_counter() - start

    seconds(100)
    small = min(seconds(500) for _ in range(3))
    assert seconds(10_000) < 100 * small


def test_schema_knows_every_table_and_field() -> None:
    schema = case_schema()
    json.dumps(schema)
    assert schema["required"] == ["frequency", "buses"]
    line = schema["$defs"]["line"]
    assert line["required"] == ["from", "to", "z1", "z0"]
    assert line["properties"]["out"] == {"type": "boolean"}
    assert schema["$defs"]["transformer"]["properties"]["hv"]["required"] == ["bus", "voltage"]
    assert schema["$defs"]["infeed"]["properties"]["z0"]["anyOf"][1] == {"enum": ["open"]}
    assert set(tomllib.loads(BASE + OTHERS + PROTECTION)) <= set(schema["properties"])
    assert schema["$defs"]["earthing_transformer"]["required"] == ["bus", "z0"]
    assert schema["properties"]["ties"]["additionalProperties"] == {"$ref": "#/$defs/tie"}
    alone, pairs = schema["$defs"]["transformer"]["properties"]["impedance"]["anyOf"]
    assert alone["type"] == "string"
    assert pairs["required"] == ["hv_lv", "hv_tv", "lv_tv"]
    relay = schema["$defs"]["relay"]
    assert relay["required"] == ["at", "measures", "curve"]
    assert re.search(relay["properties"]["pickup"]["pattern"], "0.1 In")
    assert re.search(schema["$defs"]["current_transformer"]["properties"]["ratio"]["pattern"], "200/1 A")
    assert schema["$defs"]["demands"]["properties"]["least"]["items"] == {"type": "string"}
    start = schema["$defs"]["mutual_coupling"]["properties"]["start"]
    assert re.search(start["additionalProperties"]["pattern"], "0.5 km")


def test_schema_leads_to_its_definitions_alone() -> None:
    schema = case_schema()
    found = set(re.findall(r'"#/\$defs/(\w+)"', json.dumps(schema)))
    assert found == set(schema["$defs"])


def test_every_other_table_reads(tmp_path: Path) -> None:
    case = read_text(tmp_path, BASE + OTHERS)
    assert case.warnings == ()
    coupling = case.mutual_couplings["M1"]
    assert (coupling.lines, coupling.z0.value) == (("F1", "F2"), 0.05e-3 + 0.12e-3j)
    assert coupling.start is not None
    assert {name: place.value for name, place in coupling.start.items()} == {"F1": 500.0, "F2": 0.0}
    assert case.earthing_transformers["E1"].z0.value == 0.04
    assert case.series_reactors["R1"].to == "pump"
    assert case.capacitors["C1"].power.value == 2e6
    assert case.converters["PV"].angle.value == pytest.approx(math.pi / 2)
    assert not case.ties["K1"].closed
    tables = {table for table, _, _ in case.records()}
    assert {"mutual_couplings", "earthing_transformers", "ties"} <= tables


def test_protection_reads(tmp_path: Path) -> None:
    case = read_text(tmp_path, BASE + PROTECTION)
    assert case.warnings == ()
    core = case.current_transformers["C3"].ratio
    assert (core.primary, core.secondary, core.text) == (400, 1, "400/1 A")
    relay = case.relays["F1-residual"]
    assert relay.vt is not None
    assert (relay.vt.primary, relay.vt.secondary) == (11e3, 110)
    assert relay.instant is not None
    assert (relay.instant.pickup.value, relay.instant.pickup.dimension) == (4, "rated current")
    assert relay.steps is not None
    assert relay.steps.multiplier == MultiplierScale(step=0.01, least=0.05, greatest=1)
    assert case.relays["T1-neutral"].backs_up == ("F1-core", "F1-residual")
    assert case.relays["main-voltage"].delay is None
    demands = case.demands
    assert [ohms.value for ohms in demands.fault_resistances] == [0, 10]
    assert (demands.see, demands.keep_still, demands.least) == (2, None, ("base",))
    assert demands.margin is not None
    assert demands.margin.breaker is not None
    assert demands.margin.breaker.value == 0.08


@pytest.mark.parametrize(
    ("text", "primary", "secondary"),
    [
        ("200/1 A", 200, 1),
        ("200 A/1 A", 200, 1),
        ("200 / 1A", 200, 1),
        ("1.2 kA/5 A", 1200, 5),
        ("2 kA / 500 mA", 2000, 0.5),
        ("2/1 kA", 2000, 1000),
    ],
)
def test_forms_of_a_ratio(text: str, primary: float, secondary: float) -> None:
    ratio = read_ratio(text, "current")
    assert (ratio.primary, ratio.secondary) == (primary, secondary)


@pytest.mark.parametrize(
    ("text", "error", "rated", "factor"),
    [("5P20", 0.05, 0.01, 20), ("10P10", 0.1, 0.03, 10), ("5PR15", 0.05, 0.01, 15)],
)
def test_classes_of_iec_61869_2(text: str, error: float, rated: float, factor: float) -> None:
    """Composite error at the accuracy limit and current error at rated current, from memory."""
    kind = parse_ct_class(text)
    assert (kind.kind, kind.composite_error, kind.rated_error) == ("P", error, rated)
    assert (kind.limit_factor, kind.gapped) == (factor, "R" in text)
    assert parse_ct_class("PX").kind == "PX"


def test_three_windings_read(tmp_path: Path) -> None:
    unit = read_text(tmp_path, third_winding("YNyn0d11")).transformers["T1"]
    assert unit.tv.bus == "pump"
    assert isinstance(unit.impedance, Pairs)
    assert (unit.impedance.hv_lv.value, unit.impedance.lv_tv.value) == (0.1, 0.06)
