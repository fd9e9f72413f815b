"""Relays, current transformers and demands in SI units: hand figures, assumptions, what blinds a relay."""

from __future__ import annotations

from math import inf, isnan, sqrt
from pathlib import Path

import pytest

from seqfault.case.protection import Demands, MarginTerms
from seqfault.case.scenarios import in_state
from seqfault.equations.grading import grading_margin
from seqfault.studies.protection import Protection, protection
from seqfault.studies.relays import operate_times
from tests.case.installation import BASE, OTHERS, PROTECTION, read_text


def made(folder: Path, more: str = "", text: str = BASE + PROTECTION, **state: list[str]) -> Protection:
    answer = protection(in_state(read_text(folder, text + more), **state))
    assert answer is not None
    return answer


def sentences(answer: Protection) -> list[str]:
    return [text for each in answer.assumptions for text in each.sentences()]


def test_none_without_relays_and_transformers(tmp_path: Path) -> None:
    assert protection(read_text(tmp_path, BASE + "[demands]\nsee = 2\n")) is None


def test_pickups_primary_and_secondary(tmp_path: Path) -> None:
    relays = made(tmp_path).relays
    core, residual = relays["F1-core"], relays["F1-residual"]
    # 0.2 In behind 50/1 A; 40 A behind 400/1 A, its fast stage at 4 In; 45 A behind 300/1 A
    assert (core.pickup.primary, core.pickup.secondary) == pytest.approx((10, 0.2))
    assert (residual.pickup.primary, residual.pickup.secondary) == pytest.approx((40, 0.1))
    assert residual.fast is not None
    assert (residual.fast.primary, residual.fast.secondary) == pytest.approx((1600, 4))
    assert relays["T1-neutral"].pickup.secondary == pytest.approx(0.15)
    assert [relay.device for relay in relays.values()] == ["51G", "67N", "51G", "59N"]
    assert (core.element, core.bus, core.star) == ("F1", "main", "")
    assert (relays["T1-neutral"].element, relays["T1-neutral"].star) == ("", "NER")
    assert (core.breaker_time, residual.fast_delay, relays["T1-neutral"].minimum_time) == (0.07, 0.1, 0.6)


def test_displacement_on_both_sides_of_its_transformer(tmp_path: Path) -> None:
    """Common practice: an open delta shows its rated voltage at full displacement, here 10 % of 110 V."""
    relay = made(tmp_path).relays["main-voltage"]
    assert relay.unit == "V"
    assert relay.pickup.primary == pytest.approx(0.1 * 11e3 / sqrt(3))
    assert relay.pickup.secondary == pytest.approx(11)
    star = """
[relays.R1]
at = "T1.lv"
measures = "neutral-voltage"
vt = "6.35 kV/110 V"
pickup = "5 %"
curve = "definite"
[relays.R2]
at = "T1.lv"
measures = "neutral-voltage"
pickup = "635 V"
curve = "definite"
"""
    relays = made(tmp_path, star, BASE.replace(', neutral = "NER"', "")).relays
    assert relays["R1"].pickup.primary == pytest.approx(0.05 * 6351, rel=1e-4)
    assert relays["R1"].pickup.secondary == pytest.approx(0.05 * 6351 / 6350 * 110, rel=1e-4)
    assert (relays["R2"].pickup.primary, relays["R2"].pickup.secondary) == (635, None)


def test_open_settings_are_left_open(tmp_path: Path) -> None:
    relays = made(tmp_path).relays
    assert relays["main-voltage"].delay is None
    assert [relay.complete for relay in relays.values()] == [True, True, True, False]


def test_operate_times_of_all_stages(tmp_path: Path) -> None:
    relays = made(tmp_path).relays
    # standard inverse at 2 and 10 times 40 A with 0.1: handbook 1.003 s and 0.297 s; fast above 1600 A
    times = operate_times(relays["F1-residual"], [39, 40, 80, 400, 1600, 1700])
    assert times[:2].tolist() == [inf, inf]
    assert times[2:4] == pytest.approx([1.003, 0.297], rel=2e-3)
    assert times[4:] == pytest.approx([0.1 * 0.14 / (40**0.02 - 1), 0.1])
    # long-time inverse, 12/(m - 1) s, and never below 0.6 s
    assert operate_times(relays["T1-neutral"], [90, 45 * 41]) == pytest.approx([12, 0.6])
    assert operate_times(relays["F1-core"], [10, 11]).tolist() == [inf, 0.1]
    with pytest.raises(ValueError, match='a setting of relay "main-voltage" is open'):
        operate_times(relays["main-voltage"], 1000)


def test_scales_of_a_relay(tmp_path: Path) -> None:
    more = """
[relays.S1]
at = "T1@main"
measures = "neutral-voltage"
pickup = "10 %"
curve = "definite"
steps = { pickup = { step = "1 %", greatest = "60 %" }, delay = "10 ms" }
"""
    answer = made(tmp_path, more)
    scales = answer.relays["F1-residual"].scales
    assert set(scales) == {"pickup", "multiplier"}
    # 0.05 In behind 400/1 A is 20 A
    assert (scales["pickup"].step, scales["pickup"].least) == pytest.approx((20, 20))
    assert scales["pickup"].at_least(41) == pytest.approx(60)
    assert scales["pickup"].at_most(41) == pytest.approx(40)
    assert isnan(scales["pickup"].at_most(19))
    assert scales["multiplier"].at_least(0.01) == pytest.approx(0.05)
    assert scales["multiplier"].at_least(0.123) == pytest.approx(0.13)
    assert isnan(scales["multiplier"].at_least(1.001))
    volts = answer.relays["S1"].scales
    assert volts["pickup"].step == pytest.approx(63.51, rel=1e-4)
    assert volts["pickup"].greatest == pytest.approx(0.6 * 6351, rel=1e-4)
    assert (volts["delay"].least, volts["delay"].greatest) == (0, None)
    said = [text for text in sentences(answer) if "setting of its" in text]
    assert sorted(said) == [
        'relay "F1-residual": greatest setting of its pickup not stated, taken as without limit',
        'relay "F1-residual": least setting of its pickup not stated, taken as one step',
        'relay "S1": greatest setting of its delay not stated, taken as without limit',
        'relay "S1": least setting of its delay not stated, taken as 0 s',
        'relay "S1": least setting of its pickup not stated, taken as one step',
    ]


def test_accuracy_limit_with_what_is_connected(tmp_path: Path) -> None:
    more = """
[current_transformers.C5]
ratio = "100/5 A"
class = "10P10"
burden = "7.5 VA"
winding_resistance = "0.2 ohm"
connection = "residual"
[current_transformers.C6]
ratio = "300/1 A"
class = "PX"
knee_point = "200 V"
winding_resistance = "2 ohm"
connected_burden = "2 VA"
connection = "residual"
[current_transformers.C8]
ratio = "300/1 A"
class = "5P20"
burden = "0 VA"
winding_resistance = "0 ohm"
connection = "residual"
[current_transformers.C7]
ratio = "300/1 A"
connection = "residual"
"""
    answer = made(tmp_path, more)
    cts = answer.transformers
    # 5P20, 10 VA at 1 A: 20 (2 + 10)/(2 + 2.5), and 0.8 of 20 x 1 A x 12 ohm
    assert cts["C3"].limit_factor_connected == pytest.approx(53.333, rel=1e-4)
    assert cts["C3"].limit == pytest.approx(21333, rel=1e-4)
    assert (cts["C3"].knee_point, cts["C3"].knee_estimated) == (pytest.approx(192), True)
    assert cts["C3"].composite_error == 0.05
    # 7.5 VA at 5 A is 0.3 ohm, taken as connected
    assert (cts["C5"].burden, cts["C5"].connected_burden) == (pytest.approx(0.3), pytest.approx(0.3))
    assert cts["C5"].limit == pytest.approx(1000)
    # the knee of 200 V over 1 A x 4 ohm; without a burden it cannot be told
    assert (cts["C6"].limit_factor, cts["C6"].limit_factor_connected) == (None, pytest.approx(50))
    assert cts["CN"].limit is None
    assert (cts["C8"].limit, cts["C8"].knee_point) == (None, None)  # no ohms at all tell nothing
    assert (cts["C7"].ct_class, cts["C7"].limit, cts["C7"].composite_error) == ("", None, None)
    said = sentences(answer)
    rated = "connected_burden not stated, taken as the rated burden"
    assert f'current transformer "C5": {rated}' in said
    assert f'current transformer "C3": {rated}' not in said
    assert any('"C3": knee_point not stated, taken as 0.8' in text for text in said)
    assert not any('"C7"' in text or '"CN"' in text for text in said)


def test_every_default_of_the_demands_is_an_assumption(tmp_path: Path) -> None:
    bare = '[relays.R1]\nat = "F1@main"\nmeasures = "residual"\ncurve = "definite"\n'
    states = '[scenarios.night]\nout = ["F1"]\n'
    answer = made(tmp_path, bare + states, BASE)
    d = answer.demands
    assert (d.fault_resistances, d.see, d.keep_still, d.tight) == ((0.0,), 1.5, 1.3, 0.1)
    assert d.least == ("base", "night")
    assert d.margin(0.5) == pytest.approx(0.25)  # common practice
    named = {text.partition('"')[2].partition('"')[0] for text in sentences(answer) if "demands" in text}
    fields = {*Demands.__struct_fields__} - {"margin"}
    assert named == fields | {f"margin.{term}" for term in MarginTerms.__struct_fields__}


def test_demands_stated_are_no_assumptions(tmp_path: Path) -> None:
    more = PROTECTION.replace(
        'margin = { relay_error = "5 %", breaker = "80 ms" }',
        'keep_still = 1.2\ntight = "5 %"\nmargin = { relay_error = "7.5 %", ct_error = "5 %", '
        'breaker = "60 ms", overshoot = "30 ms", safety = "50 ms" }',
    )
    answer = made(tmp_path, "", BASE + more)
    d = answer.demands
    assert not any("demands" in text for text in sentences(answer))
    assert (d.fault_resistances, d.see, d.keep_still, d.tight, d.least) == (
        (0.0, 10.0), 2, 1.2, 0.05, ("base",),
    )  # fmt: skip
    assert d.margin(0.4) == pytest.approx(0.2 * 0.4 + 0.14)  # (2 x 7.5 % + 5 %) t + 0.06 + 0.03 + 0.05
    assert d.margin(0.4, breaker=0.1) == pytest.approx(0.2 * 0.4 + 0.18)
    assert grading_margin(0.4, 0.075, 0.05, 0.06, 0.03, 0.05) == pytest.approx(d.margin(0.4))


def test_assumptions_of_a_relay(tmp_path: Path) -> None:
    more = PROTECTION.replace('delay = "0.1 s" }', "}").replace('pickup = "4 In", }', 'pickup = "4 In" }')
    said = sentences(made(tmp_path, "", BASE + more))
    assert 'relay "F1-residual": polarisation not stated, taken as residual-voltage' in said
    assert 'relay "F1-residual": instant.delay not stated, taken as 0 s' in said
    taken = "breaker_time not stated, taken as that of the margin, 0.08 s"
    assert [text for text in said if taken in text] == [
        f'relay "{name}": {taken}' for name in ("F1-residual", "T1-neutral", "main-voltage")
    ]


BLIND = [
    ({"without": ["F1"]}, {"F1-core": '"F1" is out', "F1-residual": '"F1" is out'}),
    ({"without": ["pump"]}, {"F1-core": '"F1" is out', "F1-residual": '"F1" is out'}),
    ({"open": ["F1@main"]}, dict.fromkeys(("F1-core", "F1-residual"), '"F1" is switched off at "main"')),
    ({"open": ["F1@pump"]}, {}),
    ({"without": ["NER"]}, {"T1-neutral": 'nothing joins "NER" to earth, so no current flows there'}),
    (
        {"without": ["T1"]},
        {"T1-neutral": 'no winding in service ends in "NER"', "main-voltage": '"T1" is out'},
    ),
    ({"without": ["CB"]}, {"F1-core": 'its current transformer "CB" is out'}),
    ({"without": ["F1", "F1-core", "F1-residual"]}, {}),
]


@pytest.mark.parametrize(("state", "blind"), BLIND)
def test_relays_that_see_nothing_in_a_state(
    tmp_path: Path, state: dict[str, list[str]], blind: dict[str, str]
) -> None:
    answer = made(tmp_path, **state)
    assert {name: relay.blind for name, relay in answer.relays.items() if relay.blind} == blind
    assert answer.warnings == tuple(
        f'relay "{name}", at: it sees nothing in this state; {why}' for name, why in blind.items()
    )


def test_ties_and_isolated_star_points(tmp_path: Path) -> None:
    more = """
[relays.P1]
at = "K1@main"
measures = "residual"
curve = "definite"
[relays.P2]
at = "T1.lv"
measures = "neutral"
curve = "definite"
[relays.P3]
at = "T1.lv"
measures = "neutral-voltage"
curve = "definite"
"""
    text = (BASE + OTHERS).replace('"11 kV", neutral = "NER"', '"11 kV", neutral = "isolated"')
    relays = made(tmp_path, more, text).relays
    assert relays["P1"].blind == '"K1" is open'
    assert relays["P2"].blind == 'nothing joins "T1.lv" to earth, so no current flows there'
    assert relays["P3"].blind == ""
    assert made(tmp_path, more, text, close=["K1"]).relays["P1"].blind == ""
