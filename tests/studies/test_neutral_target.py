"""Ohms for a wanted current, limits of the sound phases, cover of a winding."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree
from seqfault.errors import NoAnswerError, RequestError
from seqfault.faults.network import Network
from seqfault.faults.neutral_ports import KINDS
from seqfault.studies.neutral import study_neutral
from seqfault.studies.neutral_states import NeutralStates
from seqfault.studies.neutral_target import find_target
from seqfault.studies.winding_cover import winding_cover
from tests.conditioning import well_conditioned
from tests.faults.small import PLANT, changed, network
from tests.strategies import PlainNetwork, fractions, networks, to_case_tree


def neutral(tree: dict[str, Any], *changes: tuple[str, Any], place: str | None = None) -> NeutralStates:
    return study_neutral([network(tree, *changes)], "NER", place).neutral


def with_ohms(tree: dict[str, Any], name: str, ohms: complex) -> Network:
    record = {"resistance": f"{ohms.real!r} ohm", "reactance": f"{ohms.imag!r} ohm"}
    out = changed(tree)  # drawn names hold dots, so no path
    out["neutrals"][name] = record
    return Network(case_from_tree(out))


def factor(net: Network, place: str) -> float:
    k = net.model.index[place]
    found = [net.fault(place, kind).earth_fault_factor for kind in KINDS]
    return max(float(each[k]) for each in found if each is not None)


@settings(
    max_examples=80,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.filter_too_much],
)
@given(data=st.data(), net=networks())
def test_the_ohms_found_give_the_current_in_drawn_networks(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    resistors = [n for n, r in net.neutrals.items() if r.resistance and not r.reactance]
    resistors = sorted(n for n in resistors if net.star_points(n) and net.neutrals[n].detuning is None)
    assume(resistors)
    name = data.draw(st.sampled_from(resistors))
    tree = to_case_tree(net)
    try:
        built = study_neutral([Network(case_from_tree(tree))], name).neutral
    except (NoAnswerError, RequestError):  # series resonance, or a dead board
        assume(False)
        raise
    solid, open_ = np.abs(built.states[0].faults(np.array([0, complex(np.inf)])).earth[0])
    wanted = float(open_ + data.draw(fractions(0.02, 0.98)) * (solid - open_))
    assume(abs(solid - open_) > 1e-3 * max(solid, open_))
    target = find_target(built, wanted, None)
    assume(1e-6 < target.ohms < 1e9)
    for ohms in (target.ohms, *target.others):
        solved = with_ohms(tree, name, ohms + 0j).fault(built.place)
        assert abs(solved.residual) == pytest.approx(wanted, rel=1e-9)


def test_the_resistor_of_a_current_among_impedances() -> None:
    target = find_target(neutral(PLANT, place="far"), 150.0, None)
    assert target.binds == "current"
    assert target.met
    assert abs(with_ohms(PLANT, "NER", target.ohms + 0j).fault("far").residual) == pytest.approx(
        150, rel=1e-9
    )
    assert target.ohms == pytest.approx(11e3 / np.sqrt(3) / 150, rel=0.03)  # V_LN/I, nearly


def test_both_reactors_of_a_current_below_the_charging_current() -> None:
    """A coil below and one above its tuning leave the same current."""
    tree = changed(PLANT, ("neutrals.NER", {"reactance": "100 ohm"}))
    target = find_target(neutral(tree), 2.0, None)
    found = (target.ohms, *target.others)
    assert len(found) == 2
    for ohms in found:
        assert abs(with_ohms(tree, "NER", 1j * ohms).fault("main").residual) == pytest.approx(2, rel=1e-9)
    (reach,) = target.reach
    assert reach.least_ohms == pytest.approx(np.sqrt(found[0] * found[1]), rel=0.05)
    deepest = with_ohms(tree, "NER", 1j * reach.least_ohms).fault("main")
    assert abs(deepest.residual) == pytest.approx(reach.least, rel=1e-6)


@pytest.mark.parametrize(
    ("current", "words"),
    [
        (50e3, ("even the star point solidly earthed lets no more than", "to ")),
        (1.0, ("even with the neutral open", "from ")),
    ],
)
def test_an_unreachable_current_says_what_is_reachable(current: float, words: tuple[str, str]) -> None:
    states = neutral(PLANT)
    with pytest.raises(NoAnswerError) as error:
        find_target(states, current, None)
    ends = np.abs(states.states[0].faults(np.array([0, complex(np.inf)])).earth[0])
    text = str(error.value)
    assert f"{current:.6g} A is out of reach" in text
    assert all(word in text for word in words)
    assert f"to {ends[0]:.4g} A" in text
    assert f"from {ends[1]:.4g} A" in text


def test_a_neutral_without_a_say_says_so() -> None:
    with pytest.raises(NoAnswerError, match="no say in earth faults at this place"):
        find_target(neutral(PLANT, place="low"), 100.0, None)


def test_ends_of_the_range_are_reached_exactly() -> None:
    states = neutral(PLANT)
    solid, open_ = np.abs(states.states[0].faults(np.array([0, complex(np.inf)])).earth[0])
    assert find_target(states, float(solid), None).ohms == 0
    assert find_target(states, float(open_), None).ohms == np.inf


def test_several_states_are_served_by_one_resistor() -> None:
    tree = changed(
        PLANT, ("scenarios.weak.infeeds.utility", {"three_phase": "90 MVA", "line_ground": "1 kA"})
    )
    case = case_from_tree(tree)
    both = study_neutral([Network(case), Network(case, "weak")], "NER").neutral
    target = find_target(both, 900.0, None)
    again = case_from_tree(changed(tree, ("neutrals.NER", {"resistance": f"{target.ohms!r} ohm"})))
    currents = [abs(Network(again, state).fault("main").residual) for state in ("base", "weak")]
    assert max(currents) == pytest.approx(900, rel=1e-9)
    assert target.state == ("base", "weak")[int(np.argmax(currents))]
    assert target.ohms == max(target.for_current)
    assert min(currents) < 899


def test_the_sound_phases_bind_where_there_is_no_room() -> None:
    target = find_target(neutral(PLANT), 400.0, 1.3)
    assert not target.met
    assert target.binds == "sound-phase"
    assert factor(with_ohms(PLANT, "NER", target.ohms + 0j), "main") == pytest.approx(1.3, rel=1e-9)
    assert target.ohms < target.for_current[0]


def test_the_current_binds_where_there_is_room() -> None:
    target = find_target(neutral(PLANT), 400.0, 1.8)
    assert target.met
    assert target.binds == "current"
    solved = with_ohms(PLANT, "NER", target.ohms + 0j)
    assert abs(solved.fault("main").residual) == pytest.approx(400, rel=1e-9)
    assert factor(solved, "main") < 1.8


def test_a_limit_alone_gives_the_greatest_ohms_that_keep_it() -> None:
    target = find_target(neutral(PLANT), None, 1.4)
    assert factor(with_ohms(PLANT, "NER", target.ohms + 0j), "main") == pytest.approx(1.4, rel=1e-9)
    assert factor(with_ohms(PLANT, "NER", 1.001 * target.ohms + 0j), "main") > 1.4
    assert find_target(neutral(PLANT), None, 1.9).ohms == np.inf


def test_a_limit_nothing_keeps_says_the_least() -> None:
    with pytest.raises(NoAnswerError, match="no resistor keeps that; the least is"):
        find_target(neutral(PLANT), 400.0, 0.5)


def test_converters_are_settled_on_the_way() -> None:
    more = {"bus": "far", "rating": "6 MVA", "fault_current": 1.2, "threshold": "0.98 pu"}
    tree = changed(PLANT, ("converters.PV", more), ("neutrals.NER", {"resistance": "2 ohm"}))
    target = find_target(neutral(tree, place="far"), 1200.0, None)
    solved = with_ohms(tree, "NER", target.ohms + 0j).fault("far")
    assert abs(solved.residual) == pytest.approx(1200, rel=1e-9)


MACHINE: dict[str, Any] = {
    "title": "machine", "frequency": "50 Hz", "buses": {"bar": "11 kV", "other": "11 kV"},
    "neutrals": {"NER": {"resistance": "6 ohm"}},
    "generators": {
        "G": {"bus": "bar", "rating": "20 MVA", "subtransient": "15 %", "x0": "5 %", "resistance": "1 %",
              "neutral": "NER"},
        "H": {"bus": "bar", "rating": "20 MVA", "subtransient": "15 %"},
    },
}  # fmt: skip


def test_what_is_left_of_a_winding_solves_its_equation() -> None:
    found = winding_cover(neutral(MACHINE), "G", 180.0, 0.95)
    phase, whole = 11e3 / np.sqrt(3), 11e3**2 / 20e6 * (0.01 + 0.15j)
    assert found.winding == pytest.approx(whole)
    x = found.unprotected
    assert 180 * abs(6 + x * whole) == pytest.approx(x * phase, rel=1e-12)
    assert found.simple == pytest.approx(180 * 6 / phase, rel=1e-12)
    assert found.resistor is not None
    assert 180 * abs(found.resistor + 0.05 * whole) == pytest.approx(0.05 * phase, rel=1e-12)


def test_a_cover_no_resistor_gives() -> None:
    with pytest.raises(NoAnswerError, match="its winding alone drives no more than"):
        winding_cover(neutral(MACHINE), "G", 20e3, 0.9)


@pytest.mark.parametrize(
    ("generator", "text"),
    [
        ("GG", 'no generator has this name; did you mean "G"?'),
        ("H", 'its star point is "isolated", not "NER"'),
    ],
)
def test_generators_that_are_not_on_this_neutral(generator: str, text: str) -> None:
    with pytest.raises(RequestError) as error:
        winding_cover(neutral(MACHINE), generator, 100.0)
    assert text in str(error.value)
