"""Warnings of the trade: a fixture and the exact message of each, and quiet where data are right."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree
from seqfault.case.scenarios import in_state
from seqfault.errors import CaseError
from seqfault.model.build import build_model
from tests.faults.small import PLANT, changed

GOOD = changed(PLANT, ("transformers.T1.z0_over_z1", 0.9), ("transformers.T2.z0_over_z1", 0.9))
GENERATOR = {
    "bus": "main", "rating": "8 MVA", "voltage": "11 kV", "subtransient": "16 %", "x2": "18 %",
    "x0": "6 %", "resistance": "0.5 %", "neutral": "solid",
}  # fmt: skip
COIL = {"kind": "arc-suppression", "detuning": "+5 %", "loss": "2 %"}
LONG = changed(GOOD, ("lines.C1.length", "60 km"), ("lines.C1.count", 4))
ISLAND = changed(
    GOOD,
    ("transformers.T1", {
        "vector_group": "Dd0", "rating": "10 MVA", "impedance": "9 %", "x_over_r": 15,
        "hv": {"bus": "grid", "voltage": "33 kV"}, "lv": {"bus": "main", "voltage": "11 kV"}}),
    ("neutrals", None),
    ("lines.C1.c0", "0 uF/km"),
)  # fmt: skip

SHOWN: list[tuple[str, dict[str, Any], list[str]]] = [
    ("all is well", GOOD, []),
    (
        "resistor below the charging current",
        LONG,
        [
            'neutral "NER": it lets 400 A through, less than the 603 A that the network\'s capacitance'
            " draws in an earth fault; arcing faults may swing the voltage up: choose at least 603 A"
            " (common practice)"
        ],
    ),
    (
        "two neutrals in parallel",
        changed(
            GOOD,
            ("generators.G", GENERATOR | {"neutral": "NER-G"}),
            ("neutrals.NER-G", {"current": "200 A", "voltage": "11 kV"}),
        ),
        [
            'neutrals "NER-G", "NER" earth the same network in this state: 200 A, 400 A each alone,'
            " 600 A together"
        ],
    ),
    (
        "deltas only",
        ISLAND,
        [
            'bus "main", "far": nothing joins this network to earth, and no capacitance is stated; earth'
            " faults there carry nothing, and the voltage to earth is undefined otherwise",
            'line "C1": no c0 stated, and this 11 kV network is not solidly earthed: the charging'
            " current, and what healthy feeders show their relays, is too small",
        ],
    ),
    (
        "a generator's earth fault above its three-phase fault",
        changed(GOOD, ("generators.G", GENERATOR)),
        [
            'generator "G": solidly earthed, its earth fault of 3150 A exceeds its three-phase fault'
            " of 2620 A, which is what its windings are braced for (common practice); a reactor or"
            " resistor in the neutral cures it"
        ],
    ),
    (
        "assumed zero sequence",
        changed(GOOD, ("transformers.T1.z0_over_z1", None)),
        [
            'transformer "T1": earth-fault currents rest on an assumed zero-sequence impedance'
            " (z0_over_z1 = 1); ask the maker for the test report"
        ],
    ),
    (
        "a cable without c0",
        changed(GOOD, ("lines.C1.c0", None), ("lines.C1.c1", None)),
        [
            'line "C1": no c0 stated, and this 11 kV network is not solidly earthed: the charging'
            " current, and what healthy feeders show their relays, is too small"
        ],
    ),
    (
        "the same cable where the neutral is solid",
        changed(
            GOOD,
            ("lines.C1.c0", None),
            ("lines.C1.c1", None),
            ("transformers.T1.lv.neutral", "solid"),
            ("neutrals", None),
        ),
        [],
    ),
    (
        "a resistor above the charging current",
        changed(LONG, ("neutrals.NER", {"current": "610 A", "voltage": "11 kV"})),
        [],
    ),
    ("a coil instead of the resistor", changed(LONG, ("neutrals.NER", COIL)), []),
    ("a reactor, which has no arc to damp", changed(LONG, ("neutrals.NER", {"reactance": "15.9 ohm"})), []),
    (
        "the second neutral out of service",
        changed(
            GOOD,
            ("generators.G", GENERATOR | {"neutral": "NER-G"}),
            ("neutrals.NER-G", {"current": "200 A", "voltage": "11 kV", "out": True}),
        ),
        [],
    ),
    (
        "two neutrals of networks that no metal joins",
        changed(
            GOOD,
            ("transformers.T2.lv.neutral", "NER-L"),
            ("neutrals.NER-L", {"current": "20 A", "voltage": "400 V"}),
        ),
        [],
    ),
    (
        "one neutral that two star points share",
        changed(GOOD, ("generators.G", GENERATOR | {"neutral": "NER"})),
        [],
    ),
    (
        "an earthing transformer beside the resistor",
        changed(
            GOOD,
            ("earthing_transformers.ET", {"bus": "far", "z0": "j6 ohm", "neutral": "NR-T"}),
            ("neutrals.NR-T", {"resistance": "31.8 ohm"}),
        ),
        [
            'neutrals "NER", "NR-T" earth the same network in this state: 400 A, 200 A each alone,'
            " 600 A together"
        ],
    ),
    ("deltas only, with capacitance", changed(ISLAND, ("lines.C1.c0", "0.42 uF/km")), []),
    (
        "deltas only, a zigzag on the board",
        changed(
            ISLAND,
            ("lines.C1.c0", "0.42 uF/km"),
            ("earthing_transformers.ET", {"bus": "main", "z0": "j6 ohm", "neutral": "solid"}),
        ),
        [],
    ),
    (
        "bare terminals of a delta",
        changed(
            GOOD,
            ("buses.spare", "11 kV"),
            (
                "transformers.T3",
                {
                    "vector_group": "Dd0",
                    "rating": "5 MVA",
                    "impedance": "9 %",
                    "x_over_r": 15,
                    "hv": {"bus": "grid", "voltage": "33 kV"},
                    "lv": {"bus": "spare", "voltage": "11 kV"},
                },
            ),
        ),
        [],
    ),
    (
        "an infeed whose zero sequence is stated open",
        changed(
            ISLAND,
            ("lines.C1.c0", "0.42 uF/km"),
            ("infeeds.utility.line_ground", None),
            ("infeeds.utility.x0_over_r0", None),
            ("infeeds.utility.z0", "open"),
            ("buses.pole", "33 kV"),
            ("lines.O", {"from": "grid", "to": "pole", "z1": "j1 ohm", "z0": "j3 ohm", "c0": "4 nF"}),
        ),
        [],
    ),
    (
        "more networks of deltas with more than six buses",
        changed(
            ISLAND,
            *((f"buses.b{k}", "11 kV") for k in range(6)),
            *(
                (f"lines.L{k}", {"from": "main", "to": f"b{k}", "z1": "j1 ohm", "z0": "j3 ohm"})
                for k in range(6)
            ),
        ),
        [
            'bus "main", "far", "b0", "b1", "b2", "b3" and 2 more: nothing joins this network to earth, and'
            " no capacitance is stated; earth faults there carry nothing, and the voltage to earth is"
            " undefined otherwise",
            'line "C1", "L0", "L1", "L2", "L3", "L4" and 1 more: no c0 stated, and this 11 kV network is'
            " not solidly earthed: the charging current, and what healthy feeders show their relays, is"
            " too small",
        ],
    ),
    (
        "a generator earthed through a reactor",
        changed(
            GOOD,
            ("generators.G", GENERATOR | {"neutral": "NGR"}),
            ("neutrals.NGR", {"reactance": "1.2 ohm"}),
            ("transformers.T1.lv.neutral", "isolated"),
            ("neutrals.NER", None),
        ),
        [],
    ),
    (
        "a generator whose x0 is as large as its x1",
        changed(GOOD, ("generators.G", GENERATOR | {"x0": "16 %", "x2": "16 %"})),
        [],
    ),
    (
        "an assumed zero sequence that carries nothing",
        changed(
            GOOD,
            ("transformers.T1.z0_over_z1", None),
            ("transformers.T1.lv.neutral", "isolated"),
            ("neutrals", None),
        ),
        [],
    ),
    (
        "an assumed zero sequence of three windings",
        changed(
            GOOD,
            ("buses.third", "6.6 kV"),
            (
                "transformers.T3",
                {
                    "vector_group": "YNyn0d11",
                    "rating": "10 MVA",
                    "x_over_r": 20,
                    "impedance": {"hv_lv": "10 %", "hv_tv": "18 %", "lv_tv": "6.5 %"},
                    "hv": {"bus": "grid", "voltage": "33 kV", "neutral": "solid"},
                    "lv": {"bus": "quay", "voltage": "11 kV", "neutral": "isolated"},
                    "tv": {"bus": "third", "voltage": "6.6 kV"},
                },
            ),
            ("buses.quay", "11 kV"),
        ),
        [
            'transformer "T3": earth-fault currents rest on an assumed zero-sequence impedance'
            " (z0_over_z1 = 1); ask the maker for the test report"
        ],
    ),
    (
        "a line without c0 that is out and earthed, and a series reactor",
        changed(
            GOOD,
            (
                "lines.C2",
                {"from": "main", "to": "far", "z1": "j1 ohm", "z0": "j3 ohm", "out": True, "earthed": True},
            ),
            ("buses.limited", "11 kV"),
            ("series_reactors.XL", {"from": "main", "to": "limited", "impedance": "j0.4 ohm"}),
        ),
        [],
    ),
]


@pytest.mark.parametrize(("label", "tree", "expected"), SHOWN, ids=[row[0] for row in SHOWN])
def test_warnings_of_the_trade(label: str, tree: dict[str, Any], expected: list[str]) -> None:
    assert list(build_model(case_from_tree(tree)).warnings) == expected


def test_a_state_that_loses_its_earth_says_so() -> None:
    tree = changed(GOOD, ("scenarios.bare", {"out": ["NER"]}), ("scenarios.same", {"note": "as is"}))
    case = case_from_tree(tree)
    assert build_model(in_state(case, "bare")).warnings == (
        'bus "main", "far": this state takes away what earths the network in the base case; only its'
        " capacitance is left (7.54 A in an earth fault)",
    )
    assert build_model(in_state(case, "same")).warnings == ()


@pytest.mark.parametrize(
    ("tree", "message"),
    [
        (
            changed(
                GOOD,
                ("neutrals.NER", COIL),
                ("lines.C1.c0", "0 uF/km"),
            ),
            'neutral "NER", kind: the network of this coil has no capacitance to earth in the base case;'
            " state c0 of its cables and machines",
        ),
        (
            changed(GOOD, ("neutrals.NER", COIL), ("transformers.T1.out", True)),
            'neutral "NER", kind: no winding in service names this coil in the base case, so there is no'
            " network to tune it to",
        ),
    ],
)
def test_coils_with_nothing_to_be_tuned_to(tree: dict[str, Any], message: str) -> None:
    with pytest.raises(CaseError) as caught:
        build_model(case_from_tree(tree))
    assert caught.value.complaints == (message,)


def test_a_coil_that_is_out_asks_for_nothing() -> None:
    out = changed(GOOD, ("neutrals.NER", COIL | {"out": True}), ("lines.C1.c0", "0 uF/km"))
    assert np.isinf(build_model(case_from_tree(out)).stars.impedance).any()


def test_coils_of_one_network_share_its_current_and_say_so() -> None:
    tree = changed(
        GOOD,
        ("neutrals.NER", COIL),
        ("neutrals.PC2", {"kind": "arc-suppression", "detuning": "+5 %"}),
        ("earthing_transformers.ET", {"bus": "far", "z0": "j6 ohm", "neutral": "PC2"}),
    )
    model = build_model(case_from_tree(tree))
    half = 3 * 2 * np.pi * 50 * 3 * 0.42e-6 * 1.05 / 2
    by_name = dict(zip(model.stars.names, model.stars.impedance.tolist(), strict=True))
    assert by_name["PC2"] == pytest.approx(1j / half, rel=1e-12)
    assert by_name["NER"] == pytest.approx(1 / (half * (0.02 - 1j)), rel=1e-12)
    assert [str(entry) for entry in model.assumptions if entry.record == "neutral"] == [
        'neutrals "NER", "PC2": shares the charging current equally with 1 more',
        'neutral "PC2": loss not stated, taken as 0',
    ]


def test_couplings_too_strong_for_their_group() -> None:
    """Each pair is possible (X_m < X), the three lines together are not."""
    line = {"from": "main", "to": "far", "z1": "j1 ohm", "z0": "j3 ohm", "c0": "1 nF", "c1": "1 nF"}
    tree = changed(
        GOOD,
        *((f"lines.{name}", line) for name in ("A", "B", "D")),
        ("mutual_couplings.AB", {"lines": ["A", "B"], "z0": "j2.5 ohm"}),
        ("mutual_couplings.BD", {"lines": ["B", "D"], "z0": "j2.5 ohm"}),
        ("mutual_couplings.AD", {"lines": ["A", "D"], "z0": "-j2.5 ohm"}),
    )
    with pytest.raises(CaseError) as caught:
        build_model(case_from_tree(tree))
    assert caught.value.complaints == (
        'lines "A", "B", "D": their mutual couplings are too strong to be possible: the reactances of'
        " the group are not positive definite; check z0 of the couplings against z0 of the lines",
    )
    weaker = changed(tree, *((f"mutual_couplings.{pair}.z0", "j1.4 ohm") for pair in ("AB", "BD", "AD")))
    assert len(build_model(case_from_tree(weaker)).lines.coupled) == 1


STAR3 = {
    "vector_group": "YNyn0y0", "rating": "10 MVA", "magnetic_circuit": "three-limb", "x_over_r": 20,
    "impedance": {"hv_lv": "9 %", "hv_tv": "14 %", "lv_tv": "6 %"},
    "hv": {"bus": "grid", "voltage": "33 kV", "neutral": "solid"},
    "lv": {"bus": "main", "voltage": "11 kV", "neutral": "solid"},
    "tv": {"bus": "far", "voltage": "11 kV"},
}  # fmt: skip


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        (
            {"z0_magnetising": "50 %"},
            'transformer "T3", z0_magnetising: it goes with two windings; of three state z0 of the pairs,'
            " or zero_tests with a delta tv",
        ),
        (
            {"zero_tests": {"from_hv": "j50 %", "from_lv": "j48 %", "from_hv_lv_shorted": "j8 %"}},
            'transformer "T3", zero_tests: with three windings they need a delta tv, which is closed in'
            " the tests; state z0 of the pairs",
        ),
    ],
)
def test_zero_sequence_data_that_three_windings_cannot_have(fields: dict[str, Any], message: str) -> None:
    tree = changed(GOOD, ("transformers.T3", STAR3 | fields))
    with pytest.raises(CaseError) as caught:
        build_model(case_from_tree(tree))
    assert message in caught.value.complaints
