from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from seqfault import (
    CaseError,
    Network,
    NoAnswerError,
    RequestError,
    case_from_tree,
    in_state,
    levels,
    read_case,
)
from seqfault.case.records import Case
from seqfault.studies.outages import CURRENTS, OutageSurvey, single_outages, survey_outages
from tests.bench.grid import grid
from tests.conditioning import well_conditioned
from tests.strategies import networks, to_case_tree

CASES = sorted((Path(__file__).parents[2] / "cases").glob("*.toml"))
AGREE = 1e-9


def against_rebuilt(
    case: Case, survey: OutageSurvey, which: list[int], phase: float = AGREE, earth: float = AGREE
) -> int:
    """Hold the outages ``which`` (from 1) to networks built without them; how many were updated.

    Currents of earth faults may differ by ``earth``, others by ``phase``.
    """
    rebuilt, failed = dict(survey.rebuilt), dict(survey.failed)
    compared = 0
    for number in which:
        outage = survey.outages[number - 1]
        try:
            whole = levels(Network(in_state(case, case.state, without=outage)))
        except (CaseError, NoAnswerError):
            assert outage in failed
            continue
        compared += outage not in rebuilt
        for k, bus in enumerate(survey.buses):
            at = whole.buses.index(bus)
            assert survey.dead[number, k] != whole.live[at], (outage, bus)
            if not whole.live[at]:
                assert np.isnan(survey.current[number, :, k]).all()
                continue
            for c, name in enumerate(CURRENTS):
                expected = float(getattr(whole, name)[at])
                agree = phase if name in ("k3", "k2") else earth
                least = agree * AGREE * float(whole.k3[at])  # rounding beside the three-phase current
                assert survey.current[number, c, k] == pytest.approx(expected, rel=agree, abs=least)
    return compared


def all_singles(network: Network) -> tuple[tuple[str, ...], ...]:
    return single_outages(network, "lines") + single_outages(network, "transformers")


@settings(max_examples=60, deadline=None)
@given(data=st.data())
def test_random_networks_agree_with_networks_built_without_the_element(data: st.DataObject) -> None:
    net = data.draw(networks(min_buses=3))
    try:
        assume(well_conditioned(net))
        case = case_from_tree(to_case_tree(net))
        network = Network(case)
        outages = all_singles(network)
        if len(outages) > 2:
            outages += ((outages[0][0], outages[-1][0]),)
        survey = survey_outages(network, outages)
    except NoAnswerError:
        return
    # Drawn data may cost eight digits; so do milliohms beside a part that capacitance alone ties to earth.
    against_rebuilt(case, survey, list(range(1, len(outages) + 1)), phase=1e-8, earth=1e-7)


@pytest.mark.parametrize("seed", [1, 2])
def test_a_grid_of_hundreds_of_buses_agrees(seed: int) -> None:
    case = case_from_tree(grid(420, seed))
    network = Network(case)
    outages = all_singles(network)
    chance = np.random.default_rng(seed)
    pairs = [chance.choice(len(outages), 2, replace=False).tolist() for _ in range(30)]
    outages += tuple((outages[i][0], outages[j][0]) for i, j in pairs)
    survey = survey_outages(network, outages, network.buses[::9])
    which = chance.choice(len(outages), 25, replace=False) + 1
    compared = against_rebuilt(case, survey, [*which.tolist(), len(outages)])
    assert compared > 18
    assert len(survey.rebuilt) < 0.2 * len(outages)


@pytest.mark.parametrize("path", CASES, ids=lambda path: path.stem)
def test_installations_agree(path: Path) -> None:
    case = read_case(path)
    network = Network(case)
    outages = all_singles(network)
    survey = survey_outages(network, outages)
    against_rebuilt(case, survey, list(range(1, len(outages) + 1)))


def station(**more: Any) -> dict[str, Any]:
    """Two transformers on a 33 kV bus, the first alone earthed on its lower side."""

    def unit(group: str, **star: str) -> dict[str, Any]:
        return {
            "vector_group": group,
            "rating": "10 MVA",
            "impedance": "10 %",
            "x_over_r": 15,
            "hv": {"bus": "intake", "voltage": "33 kV"},
            "lv": {"bus": "main", "voltage": "11 kV", **star},
        }

    return {
        "title": "Foss Gill pumping station",
        "frequency": "50 Hz",
        "buses": {"intake": "33 kV", "main": "11 kV", "end": "11 kV"},
        "infeeds": {"utility": {"bus": "intake", "three_phase": "500 MVA", "x_over_r": 10, "z0": "open"}},
        "neutrals": {"NER": {"resistance": "16 ohm"}},
        "transformers": {
            "earthed": unit("Dyn11", neutral="NER"),
            "other": unit("Dyn11", neutral="isolated"),
        },
        "lines": {
            "cable": {"from": "main", "to": "end", "length": "2 km", "z1": "0.2+j0.1 ohm/km"}
            | {"z0": "0.5+j0.3 ohm/km", "c1": "3 nF/km", "c0": "3 nF/km"}
        },
        **more,
    }


def test_what_cuts_off_and_what_takes_the_earth_is_told() -> None:
    case = case_from_tree(station())
    survey = survey_outages(Network(case), [("earthed",), ("other",), ("cable",), ("earthed", "other")])
    assert [o for o, _ in survey.rebuilt] == [("earthed",)]
    assert "takes the earth" in survey.rebuilt[0][1]
    assert survey.dead.tolist() == [
        [False, False, False],
        [False, False, False],
        [False, False, False],
        [False, False, True],
        [False, True, True],
    ]
    assert against_rebuilt(case, survey, [1, 2, 3, 4]) == 3
    value, at = survey.extreme(least=True)
    k1 = CURRENTS.index("k1")
    assert at[k1, 1] == 1  # without the resistor only the capacitance is left
    assert value[k1, 1] == survey.current[1, k1, 1]


def test_coupled_lines_are_left_coupled_with_one_another() -> None:
    line = {"from": "main", "to": "end", "length": "2 km", "z1": "0.2+j0.1 ohm/km", "z0": "0.5+j0.3 ohm/km"}
    names = ("one", "two", "three")
    pairs = {"a": ("one", "two"), "b": ("two", "three"), "c": ("one", "three")}
    tree = station(
        lines=dict.fromkeys(names, line),
        mutual_couplings={
            name: {"lines": list(pair), "z0": f"0.1+j0.1{k} ohm/km", "length": "2 km"}
            for k, (name, pair) in enumerate(pairs.items(), 1)
        },
    )
    network = Network(case_from_tree(tree))
    survey = survey_outages(network, [(name,) for name in names] + [("one", "three"), names])
    assert survey.rebuilt == ((names, "it takes the earth from a part"),)
    assert against_rebuilt(network.case, survey, [1, 2, 3, 4, 5]) == 4


def test_an_infeed_out_is_built_anew_and_the_loaded_state_always() -> None:
    case = case_from_tree(station())
    survey = survey_outages(Network(case), [("utility",)])
    assert survey.rebuilt == ((("utility",), "no line or transformer"),)
    assert survey.dead[1].all()


@pytest.mark.parametrize(
    ("outages", "at", "message"),
    [
        ([("earthd",)], None, 'did you mean "earthed"|earthed'),
        ([("cable", "cable")], None, "each element once"),
        ([("cable",)], ["mian"], "main"),
        ([("cable",)], ["cable@main"], "a bus is wanted"),
    ],
)
def test_what_cannot_be_asked(outages: Any, at: Any, message: str) -> None:
    with pytest.raises(RequestError, match=message):
        survey_outages(Network(case_from_tree(station())), outages, at)


def test_a_line_beside_a_closed_tie_carries_nothing() -> None:
    tree = station(
        lines={"feeder": {"from": "main", "to": "end", "z1": "0.2+j0.1 ohm", "z0": "0.5+j0.3 ohm"}},
        ties={"bypass": {"from": "main", "to": "end", "closed": True}},
    )
    network = Network(case_from_tree(tree))
    survey = survey_outages(network, [("feeder",)])
    assert survey.rebuilt == ()
    assert against_rebuilt(network.case, survey, [1]) == 1
