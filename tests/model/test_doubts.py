"""Warnings of the trade: a fixture and the exact message of each, and quiet where data are right."""

from __future__ import annotations

from typing import Any

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


COIL = {"kind": "arc-suppression", "detuning": "+5 %", "loss": "2 %"}


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
