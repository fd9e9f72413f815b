"""Traps of windings and star points, each with the answer worked out by hand."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree
from seqfault.errors import CaseError
from seqfault.faults.network import Network
from tests.faults.small import changed, network

PAIR: dict[str, Any] = {
    "title": "star-star", "frequency": "50 Hz", "base_power": "10 MVA",
    "buses": {"hv": "33 kV", "lv": "11 kV"},
    "infeeds": {"Q": {"bus": "hv", "z1": "j4 ohm", "z0": "j9 ohm"}},
    "transformers": {
        "T": {
            "vector_group": "YNyn0", "rating": "10 MVA", "impedance": "j10 %", "z0_over_z1": 1,
            "magnetic_circuit": "five-limb",
            "hv": {"bus": "hv", "voltage": "33 kV", "neutral": "solid"},
            "lv": {"bus": "lv", "voltage": "11 kV", "neutral": "solid"},
        }
    },
}  # fmt: skip
BASE = 11e3**2 / 10e6  # ohm at 11 kV
Z_Q0 = 9j / 9 / BASE  # the infeed's zero sequence seen from 11 kV, per unit


def z0_at_lv(tree: dict[str, Any], *changes: tuple[str, Any]) -> complex:
    return complex(network(tree, *changes).fault("lv", "line-ground").impedance_pu[0])


def test_a_solid_star_star_unit_is_a_series_branch_and_no_path_of_its_own():
    assert z0_at_lv(PAIR) == pytest.approx(Z_Q0 + 0.1j, rel=1e-12)
    assert np.isinf(z0_at_lv(PAIR, ("infeeds.Q.z0", "open")))


@pytest.mark.parametrize("side", ["hv", "lv"])
def test_one_isolated_star_point_opens_the_unit_rather_than_earthing_it(side):
    """Kron against striking out: a struck-out row would leave a false path through the leakage."""
    tree = changed(PAIR, (f"transformers.T.{side}.neutral", "isolated"))
    assert np.isinf(z0_at_lv(tree))
    assert network(tree).fault("lv", "line-ground").residual == 0


def test_an_isolated_star_point_takes_the_induced_voltage():
    """lv star isolated, hv side faulted: the lv bus has no zero sequence, its star point all of it."""
    tree = changed(PAIR, ("transformers.T.lv.neutral", "isolated"), ("lines.C", {
        "from": "lv", "to": "end", "z1": "j1 ohm", "z0": "j1 ohm", "c1": "1 uF", "c0": "1 uF"}),
        ("buses.end", "11 kV"))  # fmt: skip
    solution = network(tree).fault("hv", "line-ground")
    star = next(p for p in solution.star_points if p.name == "T.lv")
    v0 = {bus: solution.voltage_sequence[0, solution.index[bus]] for bus in ("hv", "lv")}
    assert star.current == 0
    assert abs(v0["lv"]) < 1e-9
    # winding voltages are equal per unit: lv bus minus star point = hv bus minus 0, over the ratio 3
    assert star.voltage == pytest.approx(-v0["hv"] / 3, rel=1e-9)


@pytest.mark.parametrize(("clock", "turns"), [(0, 1 - 1 / 3), (6, 1 + 1 / 3)])
def test_star_points_on_one_electrode_add_by_their_polarity(clock, turns):
    """YNyn0 and YNyn6 with both star points on one resistor R.

    Seen from lv at 11 kV the ampere-turns fix hv's I0 at a third of lv's; the electrode carries
    3 (1 ∓ 1/3) I0 and drives its voltage through both windings: Z0 = z_T + z_Q + 3 R (1 ∓ 1/3)².
    Worked by hand (common practice: star points of one substation joined).
    """
    tree = changed(
        PAIR,
        ("transformers.T.vector_group", f"YNyn{clock}"),
        ("transformers.T.hv.neutral", "R"),
        ("transformers.T.lv.neutral", "R"),
        ("neutrals.R", {"resistance": "5 ohm"}),
    )
    expected = Z_Q0 + 0.1j + 3 * (5 / BASE) * turns**2
    assert z0_at_lv(tree) == pytest.approx(expected, rel=1e-12)


def test_unequal_ratios_in_parallel_are_a_path_and_equal_ones_float():
    """Two YNyn0 units in parallel, all stars solid, between floating buses.

    Equal ratios leave the pair free; ratios 1 to 1.05 and 1 to 1 contradict each other and tie both
    buses to earth through the loop of their leakages.
    """
    tree = changed(
        PAIR,
        ("infeeds.Q.z0", "open"),
        ("transformers.U", {**PAIR["transformers"]["T"]}),
    )
    assert np.isinf(z0_at_lv(tree))
    tree = changed(tree, ("transformers.U.lv.voltage", "11.55 kV"))
    z = z0_at_lv(tree)
    assert np.isfinite(z)
    # Nodal equations by hand, per unit at nominal voltages: y = −j10, windings 1:1 and 1:1/1.05.
    y, r = -10j, 1 / 1.05
    matrix = y * np.array([[2, -1 - r], [-1 - r, 1 + r * r]])
    assert z == pytest.approx(np.linalg.inv(matrix)[1, 1], rel=1e-9)


def test_several_free_vectors_of_one_part():
    """A star-star unit whose neutral resistor is open on one side leaves two potentials free."""
    tree = changed(
        PAIR,
        ("infeeds.Q.z0", "open"),
        ("transformers.T.hv.neutral", "N"),
        ("neutrals.N", {"resistance": "20 ohm"}),
    )
    zero = network(tree).sequences[0]
    assert zero.free.dimension.tolist() == [2]
    for place in ("hv", "lv"):
        assert network(tree).fault(place, "line-ground").residual == 0


def test_an_off_nominal_ratio_is_kept():
    """33/11.55 kV between nominal 33 and 11 kV: no-load ratio and impedance both follow it."""
    tree = changed(PAIR, ("transformers.T.lv.voltage", "11.55 kV"))
    z1 = complex(network(tree).fault("lv", "three-phase").impedance[1])
    expected = (4j * (11.55 / 33) ** 2) + 0.1j * 11.55e3**2 / 10e6
    assert z1 == pytest.approx(expected, rel=1e-12)


def test_a_tap_changes_hv_turns_and_leaves_lv_ohms():
    plain = network(PAIR).fault("lv", "three-phase").impedance[1]
    tapped = network(PAIR, ("transformers.T.tap", "+5 %")).fault("lv", "three-phase").impedance[1]
    lv_ohms = 0.1j * BASE
    assert plain - lv_ohms == pytest.approx(4j / 9, rel=1e-12)
    assert tapped - lv_ohms == pytest.approx(4j / 9 / 1.05**2, rel=1e-12)


def test_units_in_parallel_by_count_halve_the_impedance():
    one = network(PAIR).fault("lv", "three-phase").impedance[1]
    two = network(PAIR, ("transformers.T.count", 2)).fault("lv", "three-phase").impedance[1]
    assert two == pytest.approx(one - 0.05j * BASE, rel=1e-12)


@pytest.mark.parametrize(
    ("groups", "message"),
    [
        (
            ("YNyn0", "YNd1"),
            'transformers "T", "U": the clock numbers round this loop leave 1 of 12 (30 degrees) open:'
            " they cannot be connected in parallel; check the vector groups",
        ),
        (
            ("YNyn0", "YNyn6"),
            'transformers "T", "U": the loop closes with reversed polarity (180 degrees): one of these'
            " vector groups is wrong, its clock number off by 6",
        ),
    ],
)
def test_loops_that_do_not_close_name_their_units(groups, message):
    other = changed(PAIR)["transformers"]["T"] | {"vector_group": groups[1]}
    if groups[1].endswith("d1"):
        other["lv"].pop("neutral")
        other.pop("magnetic_circuit")
    tree = changed(PAIR, ("transformers.T.vector_group", groups[0]), ("transformers.U", other))
    with pytest.raises(CaseError) as caught:
        Network(case_from_tree(tree))
    assert caught.value.complaints == (message,)


def test_a_loop_through_several_units_names_them_all():
    tree = changed(PAIR, ("buses.mid", "33 kV"))
    t = tree["transformers"].pop("T")
    tree["transformers"] = {
        "A": {
            **t,
            "hv": t["hv"] | {"bus": "hv"},
            "lv": {"bus": "mid", "voltage": "33 kV", "neutral": "solid"},
        },
        "B": {**t, "hv": t["hv"] | {"bus": "mid"}, "vector_group": "YNyn2"},
        "C": {**t},
    }
    with pytest.raises(CaseError, match=r"leave 2 of 12 \(60 degrees\) open") as caught:
        Network(case_from_tree(tree))
    assert all(f'"{unit}"' in caught.value.complaints[0] for unit in "ABC")


def test_an_open_end_keeps_its_capacitance():
    line = {"from": "lv", "to": "end", "z1": "1+j2 ohm", "z0": "3+j5 ohm", "c1": "2 uF", "c0": "2 uF",
            "open": ["end"]}  # fmt: skip
    tree = changed(
        PAIR, ("transformers.T.lv.neutral", "isolated"), ("lines.C", line), ("buses.end", "11 kV")
    )
    solution = network(tree).fault("lv", "line-ground")
    omega = 2 * np.pi * 50
    half = 1j * omega * 1e-6
    y0 = half + 1 / (3 + 5j + 1 / half)
    assert solution.impedance[0] == pytest.approx(1 / y0, rel=1e-9)
    ends = [k for k, e in enumerate(solution.terminals.element) if e == "C"]
    assert abs(solution.terminals.residual[ends[0]]) == pytest.approx(abs(solution.residual), rel=1e-9)
    assert solution.terminals.residual[ends[1]] == 0


def test_a_neutral_out_of_service_joins_its_star_points_without_earthing_them():
    tree = changed(
        PAIR,
        ("transformers.T.hv.neutral", "N"),
        ("neutrals.N", {"resistance": "20 ohm", "out": True}),
    )
    solution = network(tree).fault("lv", "line-ground")
    assert solution.residual == 0
    assert next(p for p in solution.star_points if p.name == "N").current == 0
