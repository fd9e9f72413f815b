"""Named states: what they change, what they leave, and what is wrong with them."""

import json
import tomllib
from pathlib import Path

import pytest

from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.errors import CaseError, RequestError
from tests.case.installation import BASE, OTHERS, PROTECTION, entries, read_text

PAGE = (Path(__file__).parent / "bad" / "scenarios.txt").read_text(encoding="utf-8")
STATES = """
[transformers.T2]
vector_group = "Dyn11"
rating = "5 MVA"
hv = { bus = "grid", voltage = "33 kV" }
lv = { bus = "main", voltage = "11 kV", neutral = "solid" }
impedance = "7 %"
x_over_r = 15
out = true

[scenarios.night]
note = "small unit alone"
in = ["T2"]
out = ["T1", "pump"]
open = ["F1@pump"]

[scenarios.night.infeeds.utility]
three_phase = "6 kA"

[scenarios.night.transformers.T2.lv]
neutral = "NER"

[scenarios.night.prefault]
voltage = "1.05 pu"

[scenarios.day.lines.F2]
from = "main"
to = "pump"
z1 = "0.125+j0.096 ohm/km"
z0 = "0.6+j0.3 ohm/km"
length = "2 km"
"""


@pytest.fixture
def case(tmp_path: Path) -> Case:
    return read_text(tmp_path, BASE + STATES)


@pytest.mark.parametrize(
    ("text", "messages"), [pytest.param(*rest, id=name) for name, *rest in entries(PAGE)]
)
def test_says_what_is_wrong(tmp_path: Path, text: str, messages: list[str]) -> None:
    with pytest.raises(CaseError) as caught:
        read_text(tmp_path, text)
    assert list(caught.value.complaints) == messages


def test_base_is_the_file_itself(case: Case) -> None:
    assert in_state(case) is case
    assert (case.state, case.scenarios) == ("base", ("night", "day"))


def test_a_scenario_changes_what_it_names_and_nothing_else(case: Case) -> None:
    night = in_state(case, "night")
    assert (night.state, night.scenarios) == ("night", case.scenarios)
    assert night.transformers["T1"].out
    assert not night.transformers["T2"].out
    assert night.buses["pump"].out
    assert night.buses["pump"].voltage.value == 11e3
    assert night.lines["F1"].open == ("pump",)
    assert night.infeeds["utility"].three_phase.value == 6e3
    assert night.infeeds["utility"].x_over_r == 10
    assert night.transformers["T2"].lv.neutral == "NER"
    assert night.transformers["T2"].lv.voltage.value == 11e3
    assert night.prefault.voltage.value == 1.05
    assert night.neutrals == case.neutrals
    assert (night.tree, night.sha256) == (case.tree, case.sha256)
    assert case.tree == tomllib.loads(BASE + STATES)


def test_a_scenario_may_add_a_record(case: Case) -> None:
    assert "F2" in in_state(case, "day").lines
    assert "F2" not in in_state(case, "night").lines


def test_states_start_from_the_file_whatever_the_state(case: Case) -> None:
    night = in_state(case, "night")
    assert in_state(night, "day") == in_state(case, "day")
    assert list(in_state(night).records()) == list(case.records())


def test_changes_on_top_of_a_scenario(case: Case) -> None:
    state = in_state(case, "night", without=["T2", "NER"], open=["F1@main"], close=["F1@pump"])
    assert state.state == "night, without T2 and NER, open F1@main, close F1@pump"
    assert state.transformers["T2"].out
    assert state.neutrals["NER"].out
    assert state.lines["F1"].open == ("main",)
    assert in_state(case, without=["F1"]).state == "base, without F1"


def test_ties_are_opened_and_closed(tmp_path: Path) -> None:
    text = BASE + OTHERS + '[scenarios.coupled]\nclose = ["K1"]\n'
    case = read_text(tmp_path, text)
    assert in_state(case, "coupled").ties["K1"].closed
    state = in_state(case, "coupled", open=["K1", "F1@main"], without=["M1", "E1", "PV"])
    assert state.state == "coupled, without M1, E1 and PV, open K1 and F1@main"
    assert not state.ties["K1"].closed
    assert state.lines["F1"].open == ("main",)
    assert state.mutual_couplings["M1"].out
    assert state.earthing_transformers["E1"].out
    assert state.converters["PV"].out
    assert not case.ties["K1"].closed


def test_a_scenario_changes_fields_of_other_tables(tmp_path: Path) -> None:
    text = BASE + OTHERS + '[scenarios.weak.mutual_couplings.M1.start]\nF1 = "0.7 km"\n'
    coupling = in_state(read_text(tmp_path, text), "weak").mutual_couplings["M1"]
    assert coupling.start is not None
    assert {name: place.value for name, place in coupling.start.items()} == {"F1": 700.0, "F2": 0.0}


def test_relays_have_settings_of_a_state_and_demands_stay(tmp_path: Path) -> None:
    text = (
        BASE
        + PROTECTION
        + """
[scenarios.second-group]
out = ["main-voltage"]
[scenarios.second-group.relays.F1-residual]
multiplier = 0.2
[scenarios.second-group.relays.F1-residual.instant]
pickup = "6 In"
"""
    )
    case = read_text(tmp_path, text)
    state = in_state(case, "second-group")
    relay = state.relays["F1-residual"]
    assert (relay.multiplier, relay.instant.pickup.value, relay.instant.delay.value) == (0.2, 6, 0.1)
    assert state.relays["main-voltage"].out
    assert state.demands == case.demands
    assert case.relays["F1-residual"].multiplier == 0.1


def test_parallel_units_are_doubted_in_the_state_that_has_them(tmp_path: Path) -> None:
    case = read_text(tmp_path, BASE + STATES.replace('out = ["T1", "pump"]', 'out = ["pump"]'))
    assert case.warnings == ()
    (doubt,) = in_state(case, "night").warnings
    assert doubt.startswith('transformer "T2", impedance: its 7 % and the 10 % of "T1"')


def test_opening_twice_is_opening_once(case: Case) -> None:
    assert in_state(case, "night", open=["F1@pump"]).lines["F1"].open == ("pump",)
    assert in_state(case, close=["F1@pump"]).lines["F1"].open == ()


def test_a_state_has_its_own_warnings(case: Case) -> None:
    assert case.warnings == ()
    assert in_state(case, without=["utility"]).warnings == (
        "no infeed or generator is in service, so no current can flow",
    )


def test_null_in_json_takes_a_field_or_a_record_away(tmp_path: Path) -> None:
    tree = tomllib.loads(BASE)
    tree["scenarios"] = {"bare": {"lines": {"F1": None}, "infeeds": {"utility": {
        "line_ground": None, "x0_over_r0": None, "z0": "open"
    }}}}  # fmt: skip
    bare = in_state(read_text(tmp_path, json.dumps(tree), "case.json"), "bare")
    assert bare.lines == {}
    assert bare.infeeds["utility"].z0 == "open"
    assert bare.infeeds["utility"].line_ground is None


REFUSED = [
    ({"scenario": "nigth"}, 'there is no scenario "nigth"; did you mean "night"?'),
    ({"scenario": "zzz"}, 'there is no scenario "zzz"; there are "base", "night" and "day"'),
    ({"without": ["F9"]}, 'without: there is no record "F9"; did you mean "F1"?'),
    (
        {"open": ["F1@grid"]},
        'open: "F1@grid": this is no end of the line; write "F1@main" or "F1@pump"',
    ),
    ({"close": ["T1@main"]}, 'close: "T1@main": "T1" is a transformer; a line is wanted'),
    (
        {"open": ["F1@main"], "close": ["F1@main"]},
        '"F1@main" is both opened and closed',
    ),
]


@pytest.mark.parametrize(("asked", "message"), REFUSED)
def test_a_state_that_cannot_be(case: Case, asked: dict[str, object], message: str) -> None:
    with pytest.raises(RequestError) as caught:
        in_state(case, **asked)
    assert str(caught.value) == message
