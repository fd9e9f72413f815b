"""A neutral as it stands, its system, its failures, and earth faults over its ohms."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree, read_case
from seqfault.errors import RequestError
from seqfault.faults.network import Network
from seqfault.faults.neutral_ports import KINDS
from seqfault.studies.neutral import NeutralReport, Standing, study_neutral
from seqfault.studies.neutral_relays import relay_views
from seqfault.studies.neutral_states import OPEN
from seqfault.studies.neutral_sweep import spaced, sweep
from tests.faults.small import PLANT, changed, network
from tests.faults.test_neutral_ports import in_its_place, misfits

CASES = Path(__file__).parents[2] / "cases"


def study(tree: dict[str, Any], *changes: tuple[str, Any], place: str | None = None) -> NeutralReport:
    return study_neutral([network(tree, *changes)], "NER", place)


def impedances(r0: float, x0: float) -> Standing:
    """Z1 = Z2 = j1 ohm and Z0 = r0 + j x0 ohm at 11 kV, the resistance all in the neutral."""
    tree = {
        "title": "ratios", "frequency": "50 Hz", "buses": {"up": "11 kV", "board": "11 kV"},
        "infeeds": {"Q": {"bus": "up", "z1": "j0.5 ohm", "z0": "open"}},
        "transformers": {"T": {
            "vector_group": "Dyn11", "rating": "10 MVA", "impedance": "j0.5 ohm", "z0": f"j{x0} ohm",
            "hv": {"bus": "up", "voltage": "11 kV"},
            "lv": {"bus": "board", "voltage": "11 kV", "neutral": "NER"}}},
        "neutrals": {"NER": {"resistance": f"{r0 / 3!r} ohm"}},
    }  # fmt: skip
    return study(tree).standing[0]


def test_rows_of_a_sweep_are_faults_of_a_case_with_that_resistance() -> None:
    report = study(PLANT, place="far")
    swept = sweep(report.neutral, spaced(2, 200, 12, 1), 10.0)
    assert len(swept.ohms) == 14
    assert swept.ohms[[0, 1, 12, 13]].tolist() == [0, 2, 200, OPEN]
    for n, z in enumerate(swept.ohms):
        other = Network(case_from_tree(in_its_place(PLANT, "NER", complex(z))))
        assert misfits(other, swept.faults[0], n, "NER", "far") == []
        k1, k2e = (abs(other.fault("far", kind).residual) for kind in KINDS)
        assert swept.earth.value[n] == pytest.approx(max(k1, k2e), rel=1e-9)
        assert KINDS[swept.earth.kind[n]] == ("line-ground" if k1 > k2e else "line-line-ground")


def test_power_and_energy_are_those_of_the_neutral_current() -> None:
    swept = sweep(study(PLANT).neutral, spaced(5, 50, 3, 1), 4.0)
    resistance = np.array([0, 5, np.sqrt(250), 50, 0])
    assert swept.power.value == pytest.approx(swept.neutral.value**2 * resistance, rel=1e-12)
    assert swept.energy == pytest.approx(4 * swept.power.value, rel=1e-12)


def test_several_states_give_the_greatest_of_them_and_its_name() -> None:
    case = read_case(CASES / "quarry.toml")
    states = [Network(case), *(Network(case, name) for name in case.scenarios)]
    neutral = study_neutral(states, "NER-A", "main-b").neutral
    swept = sweep(neutral, np.array([10.0, 40.0]), 10.0)
    assert [s.name for s in neutral.states] == ["base", "minimum", "ring-closed"]
    assert "state standby: no winding in service has its star point there" in neutral.left_out[0]
    every = [[abs(s.network.fault("main-b").residual) for s in neutral.states]]
    assert np.argmax(every) == 2  # in base NER-A is no part of what main-b hangs on
    assert [neutral.states[k].name for k in swept.earth.state] == ["ring-closed", "ring-closed"]


def test_as_it_stands_cold_and_hot() -> None:
    plate = {"resistance": "16 ohm", "duration": "5 s", "temperature_rise": "500 K", "continuous": "20 A"}
    report = study_neutral([network(PLANT, ("neutrals.NER", plate))], "NER", coefficient=0.002)
    s = report.standing[0]
    assert s.ohms == (pytest.approx(16), pytest.approx(32))
    assert s.let_through == (pytest.approx(11e3 / np.sqrt(3) / 16), pytest.approx(11e3 / np.sqrt(3) / 32))
    assert s.heat[0] == pytest.approx(11e3**2 / 3 / 16)
    hot = Network(case_from_tree(in_its_place(PLANT, "NER", 32 + 0j)))
    assert s.faults.earth[0, 1] == pytest.approx(hot.fault("main").residual, rel=1e-9)
    assert (report.duty.duration, report.duty.continuous, report.duty.assumed) == (5, 20, ())


def test_what_the_record_does_not_state_is_said() -> None:
    texts = " ".join(study(PLANT).duty.assumed)
    for part in ("duration not stated, taken as 10 s", "0.001 of its cold value", "taken as 760 K"):
        assert part in texts
    long = study(PLANT, ("neutrals.NER", {"resistance": "16 ohm", "duration": "5 min"}))
    assert "taken as 610 K" in long.duty.assumed[1]


def test_a_reactor_is_as_warm_as_it_likes() -> None:
    report = study(PLANT, ("neutrals.NER", {"reactance": "16 ohm"}))
    assert report.standing[0].ohms == (16j, 16j)
    assert report.neutral.device == "reactor"


def test_each_feeder_has_its_own_charging_current() -> None:
    """3 ω C0 U/√3 (IEC 60071-2; common practice)."""
    more = {"from": "main", "to": "far", "length": "1 km", "count": 2, "z1": "0.1+j0.1 ohm/km",
            "z0": "0.5+j0.3 ohm/km", "c1": "0.3 uF/km", "c0": "0.3 uF/km"}  # fmt: skip
    bare = {"from": "main", "to": "far", "z1": "0.1+j0.1 ohm", "z0": "0.5+j0.3 ohm"}
    s = study(
        PLANT,
        ("lines.C2", more),
        ("lines.C3", bare),
        ("motors.M", {"bus": "far", "rating": "1 MVA", "locked_rotor": 5, "x_over_r": 6, "c0": "20 nF",
                      "count": 3}),
    ).standing[0]  # fmt: skip
    one = 2 * np.pi * 50 * np.sqrt(3) * 11e3
    shares = {share.name: share.current for share in s.charging.shares}
    assert shares == {
        "C1": pytest.approx(one * 3 * 0.42e-6),
        "C2": pytest.approx(one * 2 * 0.3e-6),
        "M": pytest.approx(one * 3 * 20e-9),
    }
    assert s.charging.silent == ("C3",)
    isolated = Network(case_from_tree(in_its_place(PLANT, "NER", OPEN)))
    alone = study(PLANT).standing[0].charging.total
    assert abs(isolated.fault("main").residual) == pytest.approx(alone, rel=5e-3)


def test_the_charging_current_stops_at_a_delta() -> None:
    more = {"from": "low", "to": "board", "z1": "1+j1 mohm", "z0": "1+j1 mohm", "c1": "1 uF", "c0": "1 uF"}
    s = study(PLANT, ("buses.board", "400 V"), ("lines.LV", more)).standing[0]
    assert [share.name for share in s.charging.shares] == ["C1"]


@pytest.mark.parametrize(
    ("x0", "r0", "factor", "kind"),
    [
        (1, 8, 1.8229, "line-ground"),
        (0.5, 8, 1.8438, "line-ground"),
        (3, 0.3, None, "line-line-ground"),
        (3, 1, 1.3473, "line-ground"),
        (10, 8, 1.6504, "line-ground"),
    ],
)
def test_the_factor_is_the_greater_of_both_kinds_and_phases(
    x0: float, r0: float, factor: float | None, kind: str
) -> None:
    """Grid of closed forms for Z1 = Z2 without resistance; nothing is capped at √3."""
    g = impedances(r0, x0).grounding
    z0 = r0 + 1j * x0
    k2e = abs(3 * z0 / (1j + 2 * z0))  # IEC 60071-2, line-line-ground with Z1 = Z2
    assert g.kind == kind
    assert g.factor == pytest.approx(k2e if factor is None else factor, rel=1e-4)
    assert g.coefficient == pytest.approx(g.factor / np.sqrt(3), rel=1e-12)
    assert (g.x0_over_x1, g.r0_over_x1) == (pytest.approx(x0), pytest.approx(r0))


@pytest.mark.parametrize(
    ("x0", "r0", "by_ratios", "effective", "name"),
    [
        (3, 1, True, True, "effectively earthed"),
        (5, 0.001, False, True, "low-reactance earthed"),  # COG 0.7954: the ratios alone would say no
        (5, 1, False, False, "low-reactance earthed"),
        (20, 1, False, False, "high-reactance earthed"),
        (2, 8, False, False, "low-resistance earthed"),
        (2, 600, False, False, "high-resistance earthed"),
    ],
)
def test_ratios_and_coefficient_are_two_things(
    x0: float, r0: float, by_ratios: bool, effective: bool, name: str
) -> None:
    g = impedances(r0, x0).grounding
    assert (g.within_ratios, g.effective, g.by_ratios) == (by_ratios, effective, name)


def test_ratios_may_promise_what_the_coefficient_does_not_keep() -> None:
    """With resistance in Z1 too, X0/X1 = 3 and R0/X1 = 1 are not enough."""
    tree = changed(
        {
            "title": "ratios", "frequency": "50 Hz", "buses": {"board": "11 kV"},
            "infeeds": {"Q": {"bus": "board", "z1": "0.001+j1 ohm", "z2": "1.2+j0.2 ohm", "z0": "open"}},
            "earthing_transformers": {"ET": {"bus": "board", "z0": "j3 ohm", "neutral": "NER"}},
            "neutrals": {"NER": {"resistance": "0.33 ohm"}},
        }
    )  # fmt: skip
    g = study(tree).standing[0].grounding
    assert g.within_ratios
    solved = network(tree)
    factors = [solved.fault("board", kind).earth_fault_factor for kind in KINDS]
    assert g.factor == pytest.approx(max(float(f[0]) for f in factors if f is not None), rel=1e-9)
    assert g.effective == (g.factor / np.sqrt(3) <= 0.8)


def test_a_system_that_only_capacitance_earths_when_its_neutral_fails() -> None:
    report = study(PLANT)
    rows = {failure.what: failure.faults for failure in report.failures[0]}
    assert list(rows) == ["as it stands", "shorted", "open"]
    for what, ohms in (("shorted", 0j), ("open", OPEN)):
        other = Network(case_from_tree(in_its_place(PLANT, "NER", ohms)))
        assert misfits(other, rows[what], 0, "NER", "main") == []


def test_losing_one_of_two_neutrals_is_a_row_of_its_own() -> None:
    case = read_case(CASES / "quarry.toml")
    report = study_neutral([Network(case, "ring-closed")], "NER-A")
    lost = report.failures[0][-1]
    assert (lost.what, lost.name) == ("lost", "NER-B")
    tree = changed(dict(case.tree), ("neutrals.NER-B.out", True))
    without = Network(case_from_tree(tree), "ring-closed")
    assert misfits(without, lost.faults, 0, "NER-A", "main-a") == []


def test_an_earthing_transformer_carries_a_third_in_each_phase() -> None:
    case = read_case(CASES / "moor.toml")
    (duty,) = study_neutral([Network(case)], "NR-B").standing[0].duties
    solution = Network(case).fault("moor-b")
    star = next(star for star in solution.star_points if star.name == "NR-B")
    assert duty.name == "ET"
    assert duty.neutral == pytest.approx(abs(star.current), rel=1e-9)
    assert duty.phase == pytest.approx(abs(star.current) / 3, rel=1e-9)
    assert duty.needed == pytest.approx(20e3 / np.sqrt(3) * abs(star.current), rel=1e-9)
    assert duty.hundred_percent == pytest.approx(20e3**2 / duty.needed)
    assert duty.z0 == pytest.approx(1.4 + 22j)
    assert (duty.rating, duty.duration) == (2.5e6, 10)


def test_a_coil_that_scenarios_do_not_retune() -> None:
    case = read_case(CASES / "moor.toml")
    states = [Network(case), Network(case, "tied")]
    one, two = study_neutral(states, "PC").standing
    assert one.ohms == two.ohms
    assert one.grounding.by_ratios == "resonant earthed"
    assert abs(two.faults.earth[0, 0]) == pytest.approx(abs(states[1].fault("moor-a").residual), rel=1e-9)


@pytest.mark.parametrize(
    ("name", "place", "text"),
    [
        (
            "NERR",
            None,
            'neutral "NERR": no record of the table neutrals has this name; did you mean "NER"?',
        ),
        ("NER", "mian", 'place "mian": no bus has this name; did you mean "main"?'),
        ("NEV", None, 'neutral "NEV": state base: no winding in service has its star point there'),
        ("NEO", None, 'neutral "NEO": state base: it is out of service'),
    ],
)
def test_names_that_are_not_there(name: str, place: str | None, text: str) -> None:
    net = network(
        PLANT,
        ("neutrals.NEV", {"resistance": "9 ohm"}),
        ("neutrals.NEO", {"resistance": "9 ohm", "out": True}),
    )
    with pytest.raises(RequestError) as error:
        study_neutral([net], name, place)
    assert text in str(error.value)


def test_a_dead_place_is_told() -> None:
    net = network(PLANT, ("buses.spare", "11 kV"))
    with pytest.raises(RequestError, match='place "spare" is dead'):
        study_neutral([net], "NER", "spare")


def test_a_place_along_a_line_and_its_relays() -> None:
    tree = changed(
        PLANT,
        ("current_transformers", {"CB": {"ratio": "100/1 A", "connection": "core-balance"}}),
        (
            "relays",
            {
                "R1": {
                    "at": "C1@main", "measures": "core-balance", "ct": "CB", "pickup": "20 A",
                    "curve": "definite", "delay": "0.3 s",
                }
            },
        ),
    )  # fmt: skip
    case = case_from_tree(tree)
    network = Network(case)
    report = study_neutral([network], "NER", "C1@40%", relays=relay_views(case)[0])
    standing = report.standing[0]
    full = network.fault("C1@40%", "line-ground")
    assert abs(standing.faults.earth[0, 0]) == pytest.approx(abs(full.residual), rel=1e-9)
    assert [share.name for share in standing.charging.shares] == ["C1"]
    t = full.terminals
    k = next(k for k in range(len(t.element)) if (t.element[k], t.bus[k]) == ("C1", "main"))
    two = network.fault("C1@40%", "line-line-ground").terminals
    least = min(abs(t.residual[k]), abs(two.residual[k]))
    assert standing.state.seen("R1", np.array([standing.ohms[0]]))[0] == pytest.approx(least, rel=1e-9)
    with pytest.raises(RequestError, match="name bus"):
        study_neutral([network], "NER", "T1@main")
