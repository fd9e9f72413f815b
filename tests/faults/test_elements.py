"""Auto-transformers, zigzag windings, three-limb cores, ties, coils, converters: answers by hand."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tests.faults.small import changed, network

AUTO: dict[str, Any] = {
    "title": "auto", "frequency": "50 Hz", "base_power": "100 MVA",
    "buses": {"h": "220 kV", "l": "110 kV", "t": "20 kV"},
    "infeeds": {"Q": {"bus": "h", "z1": "j20 ohm", "z0": "j30 ohm"}},
    "transformers": {
        "T": {
            "vector_group": "YNa0d11", "rating": "100 MVA", "z0_over_z1": 1,
            "impedance": {"hv_lv": "j10 %", "hv_tv": "j20 %", "lv_tv": "j14 %"},
            "hv": {"bus": "h", "voltage": "220 kV", "neutral": "N"},
            "lv": {"bus": "l", "voltage": "110 kV"},
            "tv": {"bus": "t", "voltage": "20 kV"},
        }
    },
    "neutrals": {"N": {"resistance": "12 ohm"}},
}  # fmt: skip
Z_H = 220e3**2 / 100e6  # ohm of 1 per unit at 220 kV


def _auto_star(zn: complex, n: float) -> tuple[complex, complex, complex]:
    """Zero-sequence star branches of an auto-transformer earthed through ``zn``, hv-side ohm.

    Z_H − 3 Z_n (n − 1), Z_L + 3 Z_n n (n − 1), Z_T + 3 Z_n n with n = U_H/U_L: E. Clarke, "Circuit
    Analysis of A-C Power Systems", vol. II; P. M. Anderson, ch. 7 (from memory).
    """
    z_h, z_l, z_t = (0.08j * Z_H, 0.02j * Z_H, 0.12j * Z_H)
    return z_h - 3 * zn * (n - 1), z_l + 3 * zn * n * (n - 1), z_t + 3 * zn * n


@pytest.mark.parametrize(("record", "zn"), [
    ({"resistance": "12 ohm"}, 12 + 0j),
    ({"reactance": "7 ohm"}, 7j),
    ({"resistance": "1e-7 ohm"}, 1e-7 + 0j),
])  # fmt: skip
def test_an_auto_transformer_earthed_through_an_impedance_has_the_textbook_star(record, zn):
    z_h, z_l, z_t = _auto_star(zn, 2.0)
    net = network(AUTO, ("neutrals.N", record))
    at_l = z_l + 1 / (1 / (z_h + 30j) + 1 / z_t)
    assert net.fault("l", "line-ground").impedance[0] == pytest.approx(at_l / 4, rel=1e-8)
    at_h = 1 / (1 / 30j + 1 / (z_h + z_t))
    assert net.fault("h", "line-ground").impedance[0] == pytest.approx(at_h, rel=1e-8)


def test_the_neutral_of_an_auto_transformer_carries_three_times_both_line_currents_in_ampere():
    solution = network(AUTO).fault("l", "line-ground")
    rows = {key: solution.terminals.sequence[0, k] for k, key in enumerate(
        zip(solution.terminals.element, solution.terminals.side, strict=True))}  # fmt: skip
    star = next(p for p in solution.star_points if p.name == "N")
    assert star.current == pytest.approx(3 * (rows["T", "hv"] + rows["T", "lv"]), rel=1e-9)
    assert star.voltage == pytest.approx(12 * star.current, rel=1e-9)


def test_an_isolated_auto_transformer_with_a_delta_still_passes_zero_sequence():
    """Both windings' ampere-turns: I_L = −I_H in ampere, so the delta must balance the rest."""
    tree = changed(AUTO, ("transformers.T.hv.neutral", "isolated"), ("neutrals", None))
    solution = network(tree).fault("l", "line-ground")
    rows = {key: solution.terminals.sequence[0, k] for k, key in enumerate(
        zip(solution.terminals.element, solution.terminals.side, strict=True))}  # fmt: skip
    assert rows["T", "hv"] == pytest.approx(-rows["T", "lv"], rel=1e-9)
    assert abs(solution.residual) > 100
    delta = next(d for d in solution.deltas)
    # hv turns 220/√3, lv 110/√3, tv 20: (220 − 110)/√3 I_H = 20 I_D
    assert abs(delta.current) == pytest.approx(abs(rows["T", "hv"]) * 110 / np.sqrt(3) / 20, rel=1e-9)
    # limit of a very large neutral resistance
    near = network(AUTO, ("neutrals.N", {"resistance": "1e12 ohm"})).fault("l", "line-ground")
    assert near.residual == pytest.approx(solution.residual, rel=1e-6)


def test_a_zigzag_winding_is_seen_from_its_own_side_only():
    """YNzn seen from hv is open, whatever its star points; from lv it is its own z0."""
    tree = {
        "title": "zigzag", "frequency": "50 Hz", "base_power": "10 MVA",
        "buses": {"hv": "33 kV", "lv": "11 kV"},
        "infeeds": {"Q": {"bus": "hv", "z1": "j4 ohm", "z0": "open"}},
        "transformers": {
            "T": {
                "vector_group": "YNzn11", "rating": "10 MVA", "impedance": "j8 %", "z0": "0.1+j0.9 %",
                "hv": {"bus": "hv", "voltage": "33 kV", "neutral": "solid"},
                "lv": {"bus": "lv", "voltage": "11 kV", "neutral": "solid"},
            }
        },
    }  # fmt: skip
    net = network(tree)
    assert np.isinf(net.fault("hv", "line-ground").impedance[0])
    solution = net.fault("lv", "line-ground")
    assert solution.impedance_pu[0] == pytest.approx(0.001 + 0.009j, rel=1e-9)
    hv = solution.terminals.side.index("hv")
    assert abs(solution.terminals.residual[hv]) < 1e-9
    assert abs(solution.terminals.residual[solution.terminals.side.index("lv")]) > 1000


def test_a_three_limb_core_is_a_path_to_earth_without_any_delta():
    tree = {
        "title": "three-limb", "frequency": "50 Hz", "base_power": "10 MVA",
        "buses": {"hv": "33 kV", "lv": "11 kV"},
        "infeeds": {"Q": {"bus": "hv", "z1": "j4 ohm", "z0": "open"}},
        "transformers": {
            "T": {
                "vector_group": "Yyn0", "rating": "10 MVA", "impedance": "j10 %", "z0_over_z1": 0.9,
                "magnetic_circuit": "three-limb", "z0_magnetising": "j60 %",
                "hv": {"bus": "hv", "voltage": "33 kV"},
                "lv": {"bus": "lv", "voltage": "11 kV", "neutral": "solid"},
            }
        },
    }  # fmt: skip
    solution = network(tree).fault("lv", "line-ground")
    assert solution.impedance_pu[0] == pytest.approx(0.045j + 0.6j, rel=1e-12)


def test_zero_sequence_tests_give_the_t_they_were_made_on():
    """From hv 50 %, from lv 48 %, from hv with lv shorted 8 %: Z_m = √(0.48 (0.50 − 0.08))."""
    tree = {
        "title": "tests", "frequency": "50 Hz", "base_power": "10 MVA",
        "buses": {"hv": "33 kV", "lv": "11 kV"},
        "infeeds": {"Q": {"bus": "hv", "z1": "j4 ohm", "z0": "j10.89 ohm"}},
        "transformers": {
            "T": {
                "vector_group": "YNyn0", "rating": "10 MVA", "impedance": "j10 %",
                "magnetic_circuit": "three-limb",
                "zero_tests": {"from_hv": "j50 %", "from_lv": "j48 %", "from_hv_lv_shorted": "j8 %"},
                "hv": {"bus": "hv", "voltage": "33 kV", "neutral": "solid"},
                "lv": {"bus": "lv", "voltage": "11 kV", "neutral": "solid"},
            }
        },
    }  # fmt: skip
    zm = np.sqrt(0.48 * 0.42)
    at_lv = (0.48 - zm) + 1 / (1 / zm + 1 / (0.50 - zm + 0.1))  # the infeed's 10.89 ohm are 0.1 here
    assert network(tree).fault("lv", "line-ground").impedance_pu[0] == pytest.approx(1j * at_lv, rel=1e-9)
    at_hv = 1 / (1 / 0.1 + 1 / 0.50)
    assert network(tree).fault("hv", "line-ground").impedance_pu[0] == pytest.approx(1j * at_hv, rel=1e-9)


BOARD: dict[str, Any] = {
    "title": "board", "frequency": "50 Hz", "base_power": "10 MVA",
    "buses": {"A": "11 kV", "B": "11 kV", "C": "11 kV"},
    "infeeds": {"QA": {"bus": "A", "z1": "j1 ohm", "z0": "j3 ohm"},
                "QB": {"bus": "B", "z1": "j2 ohm", "z0": "j5 ohm"}},
    "ties": {"S": {"from": "A", "to": "B", "closed": True}},
    "lines": {"L": {"from": "B", "to": "C", "z1": "j1 ohm", "z0": "j2 ohm"}},
}  # fmt: skip


def test_a_closed_tie_is_one_node_and_its_current_follows_by_balance():
    solution = network(BOARD).fault("C", "line-ground")
    assert np.array_equal(solution.at("A"), solution.at("B"))
    rows = {key: solution.terminals.phases[:, k] for k, key in enumerate(
        zip(solution.terminals.element, solution.terminals.bus, strict=True))}  # fmt: skip
    assert rows["S", "A"] == pytest.approx(-rows["QA", "A"], rel=1e-9)
    assert rows["S", "B"] == pytest.approx(-rows["S", "A"], rel=1e-12)
    for bus in "AB":  # a fault counts at its own side of the tie
        at = network(BOARD).fault(bus, "three-phase")
        tie = at.terminals.phases[:, at.terminals.element.index("S")]
        own = {"A": "QB", "B": "QA"}[bus]
        feeds = at.terminals.phases[:, at.terminals.element.index(own)]
        assert np.abs(tie) == pytest.approx(np.abs(feeds), rel=1e-9)


def test_an_open_tie_is_nothing_and_a_ring_of_ties_is_not_unique():
    open_tie = network(BOARD, ("ties.S.closed", False)).fault("A", "three-phase")
    alone = network(BOARD, ("ties", None)).fault("A", "three-phase")
    assert np.array_equal(open_tie.current, alone.current)
    ring = network(BOARD, ("ties.R", {"from": "B", "to": "A", "closed": True})).fault("A", "three-phase")
    assert "S" not in ring.terminals.element
    assert ring.notes[-1] == (
        'the currents of the closed ties "S", "R" are not unique: they close a loop without impedance'
    )


COIL: dict[str, Any] = {
    "title": "coil", "frequency": "50 Hz", "base_power": "10 MVA",
    "buses": {"A": "11 kV", "B": "11 kV"},
    "infeeds": {"Q": {"bus": "A", "z1": "j0.5 ohm", "z0": "open"}},
    "lines": {"L": {"from": "A", "to": "B", "z1": "j0.1 ohm", "z0": "j0.3 ohm", "c1": "3 uF",
                    "c0": "3 uF"}},
    "earthing_transformers": {"ET": {"bus": "A", "z0": "j2 ohm", "neutral": "coil"}},
    "neutrals": {"coil": {"kind": "arc-suppression", "detuning": "+5 %", "loss": "2 %"}},
}  # fmt: skip


def test_a_coil_leaves_its_loss_and_its_detuning_as_residual_current():
    """I_rest ≈ I_C (d + loss) in quadrature, I_C = √3 ω C0 U (common practice)."""
    solution = network(COIL).fault("B", "line-ground")
    charging = np.sqrt(3) * 2 * np.pi * 50 * 3e-6 * 11e3
    expected = charging * np.hypot(0.05, 0.02 * 1.05)
    assert abs(solution.residual) == pytest.approx(expected, rel=0.05)
    assert {path.path for path in solution.home} == {"coil", "capacitance 11 kV"}


def test_a_scenario_does_not_retune_a_coil():
    tree = changed(
        COIL,
        ("buses.D", "11 kV"),
        (
            "lines.M",
            {"from": "A", "to": "D", "z1": "j0.1 ohm", "z0": "j0.3 ohm", "c1": "1 uF", "c0": "1 uF"},
        ),
        ("scenarios.short", {"out": ["M"]}),
    )
    from seqfault.case.reader import case_from_tree
    from seqfault.faults.network import Network

    case = case_from_tree(tree)
    base, short = Network(case), Network(case, "short")
    assert np.array_equal(base.model.stars.impedance, short.model.stars.impedance)
    retuned = network(tree, ("lines.M.out", True))
    assert retuned.model.stars.impedance[0] != base.model.stars.impedance[0]


def test_a_neutral_through_a_distribution_transformer_is_seen_by_the_square_of_its_ratio():
    tree = changed(COIL, ("neutrals.coil", {"resistance": "0.5 ohm", "ratio": 50}))
    assert network(tree).model.stars.impedance[0] == pytest.approx(0.5 * 2500)


@pytest.mark.parametrize(
    ("connection", "expected"), [("star-earthed", True), ("star", False), ("delta", False)]
)
def test_a_capacitor_bank_is_a_way_home_only_where_its_star_is_earthed(connection, expected):
    tree = changed(BOARD, ("capacitors.CB", {"bus": "C", "power": "600 kvar", "connection": connection}))
    solution = network(tree).fault("C", "line-ground")
    assert ("CB" in [path.path for path in solution.home]) == expected
    at = solution.terminals.element.index("CB")
    # positive sequence of every connection: Q/(√3 U) at nominal voltage, here at the voltage left
    k = solution.index["C"]
    left = abs(solution.voltage_sequence[2, k])  # no pre-fault part in negative sequence
    assert abs(solution.terminals.sequence[2, at]) == pytest.approx(left * 600e3 / 11e3**2, rel=1e-9)


CONVERTER = changed(
    BOARD,
    ("ties", None),
    ("converters.PV", {"bus": "C", "rating": "4 MVA", "fault_current": 1.2, "angle": "90 deg",
                       "threshold": "0.9 pu"}),
)  # fmt: skip


def test_a_converter_adds_its_limited_current_behind_its_own_voltage():
    solution = network(CONVERTER).fault("B", "three-phase")
    limit = 1.2 * 4e6 / (np.sqrt(3) * 11e3)
    terminals = solution.terminals
    fed = -terminals.sequence[:, terminals.element.index("PV")]
    assert np.abs(fed) == pytest.approx([0, limit, 0], abs=1e-9)
    v1 = solution.voltage_sequence[1, solution.index["C"]]
    assert np.degrees(np.angle(fed[1] / v1)) == pytest.approx(-90, abs=1e-6)
    without = network(changed(CONVERTER, ("converters", None))).fault("B", "three-phase")
    # its current flows through the line j1 into the fault, in phase with the infeed's there
    assert abs(solution.current[0]) == pytest.approx(abs(without.current[0]) + limit, rel=1e-9)
    assert solution.notes == (
        'converter "PV" feeds its limit at 0.04 of nominal positive-sequence voltage',
    )


def test_a_converter_far_from_the_fault_stays_silent_and_says_so():
    tree = changed(CONVERTER, ("buses.far", "11 kV"), ("lines.F", {
        "from": "A", "to": "far", "z1": "j60 ohm", "z0": "j180 ohm"}))  # fmt: skip
    tree = changed(tree, ("converters.PV.bus", "A"))
    solution = network(tree).fault("far", "three-phase")
    assert solution.terminals.sequence[1, solution.terminals.element.index("PV")] == 0
    assert "stays silent: it sees 0.98 of nominal" in solution.notes[0]


def test_a_converter_does_not_keep_a_part_alive():
    tree = changed(BOARD, ("ties", None), ("infeeds.QB", None), ("converters.PV", {
        "bus": "B", "rating": "4 MVA", "fault_current": 1.2}))  # fmt: skip
    solution = network(tree).fault("C", "line-ground")
    assert np.all(solution.current == 0)
    assert 'converter "PV" stays silent: its bus has no other source' in solution.notes


TWO_COILS = changed(
    COIL,
    ("earthing_transformers.ET2", {"bus": "A", "z0": "j2 ohm", "neutral": "second"}),
    ("neutrals.second", {"kind": "arc-suppression", "detuning": "+5 %", "loss": "2 %"}),
)


def test_taking_one_of_two_coils_out_leaves_the_other_as_it_was_tuned():
    from seqfault.case.reader import case_from_tree
    from seqfault.faults.network import Network

    case = case_from_tree(changed(TWO_COILS, ("scenarios.one", {"out": ["second"]})))
    base, one = Network(case).model.stars, Network(case, "one").model.stars
    at = base.names.index("coil")
    assert one.impedance[at] == base.impedance[at]
    assert np.isinf(one.impedance[one.names.index("second")])
    alone = network(COIL).model.stars.impedance[0]
    assert base.impedance[at] == pytest.approx(2 * alone, rel=1e-12)  # each takes half the current


def test_a_converter_cut_off_by_a_bolted_fault_holds_its_phase():
    """Radial behind j1 ohm and some resistance: nothing but its own current makes its voltage."""
    tree = changed(CONVERTER, ("infeeds.QB", None), ("lines.L.z1", "0.2+j1 ohm"), ("lines.L.z0", "j2 ohm"),
                   ("lines.K", {"from": "A", "to": "B", "z1": "j1 ohm", "z0": "j2 ohm"}))  # fmt: skip
    solution = network(tree).fault("B", "three-phase")
    limit = 1.2 * 4e6 / (np.sqrt(3) * 11e3)
    terminals = solution.terminals
    fed = -terminals.sequence[1, terminals.element.index("PV")]
    assert abs(fed) == pytest.approx(limit, rel=1e-9)
    assert np.degrees(np.angle(fed)) == pytest.approx(-90, abs=1e-6)
    assert "its phase is held as before the fault" in solution.notes[0]
