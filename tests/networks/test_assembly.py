"""Stamps of a whole model against admittance matrices written out by hand.

Base power 100 MVA, so that 11 kV has a base of 1.21 ohm and 33 kV one of 10.89 ohm.
"""

from __future__ import annotations

from math import pi

import numpy as np
import pytest

from seqfault.case.reader import case_from_tree
from seqfault.model.build import build_model
from seqfault.model.elements import Model
from seqfault.networks.assembly import assemble

TREE = {
    "frequency": "50 Hz",
    "base_power": "100 MVA",
    "buses": {"grid": "33 kV", "main": "11 kV", "far": "11 kV", "end": "11 kV"},
    "infeeds": {"utility": {"bus": "grid", "z1": "j1.089 ohm", "z2": "j2.178 ohm", "z0": "j5.445 ohm"}},
    "generators": {
        "set": {"bus": "far", "rating": "10 MVA", "subtransient": "20 %", "x2": "25 %", "x0": "5 %",
                "resistance": "0 %", "neutral": "NER", "c0": "0.1 uF"},
    },
    "motors": {
        "pump": {"bus": "main", "rating": "2 MVA", "locked_rotor": 5, "x_over_r": 0, "count": 3},
    },
    "lines": {
        "cable": {"from": "main", "to": "far", "z1": "1.21+j2.42 ohm", "z0": "j6.05 ohm",
                  "c1": "2 uF", "c0": "1 uF"},
        "stub": {"from": "far", "to": "end", "z1": "j1.21 ohm", "z0": "j1.21 ohm", "c1": "0 uF",
                 "c0": "3 uF", "open": ["end"]},
    },
    "transformers": {
        "T": {"vector_group": "Dyn11", "rating": "20 MVA", "impedance": "j10 %", "z0": "j8 %",
              "tap": "+5 %", "hv": {"bus": "grid", "voltage": "33 kV"},
              "lv": {"bus": "main", "voltage": "11 kV", "neutral": "NER"}},
    },
    "neutrals": {"NER": {"resistance": "6.05 ohm"}},
}  # fmt: skip
GRID, MAIN, FAR, END, TIP, STAR = range(6)  # TIP: the open end of the stub


@pytest.fixture(scope="module")
def model() -> Model:
    return build_model(case_from_tree(TREE))


def matrices(model: Model, sequence: int) -> tuple[np.ndarray, np.ndarray]:
    stamps = assemble(model, sequence)
    y = np.zeros((stamps.size, stamps.size), complex)
    np.add.at(y, (stamps.row, stamps.column), stamps.value)
    assert (stamps.value != 0).all()
    return y, stamps.weak


def stamp(y: np.ndarray, i: int, j: int, of: complex) -> None:
    y[i, i] += of
    y[j, j] += of
    y[i, j] -= of
    y[j, i] -= of


def charging(farad: float) -> complex:
    """Per unit at 11 kV."""
    return 2j * pi * 50 * farad * 1.21


@pytest.mark.parametrize("sequence", [1, 2])
def test_positive_and_negative_sequence(model: Model, sequence: int) -> None:
    hand = np.zeros((5, 5), complex)
    stamp(hand, FAR, TIP, 1 / 1j)
    hand[GRID, GRID] += (1 / 0.1j, 1 / 0.2j)[sequence - 1]
    hand[FAR, FAR] += (1 / 2j, 1 / 2.5j)[sequence - 1]
    hand[MAIN, MAIN] += 3 * 5 * 2 / 100
    stamp(hand, MAIN, FAR, 1 / (1 + 2j))
    # 10 % of 20 MVA; the tap lengthens the hv winding, so that lv ohms stay.
    y, ratio = 1 / 0.5j, 1 / 1.05
    hand[GRID, GRID] += ratio**2 * y
    hand[MAIN, MAIN] += y
    hand[GRID, MAIN] -= ratio * y
    hand[MAIN, GRID] -= ratio * y
    strong, weak = matrices(model, sequence)
    assert strong == pytest.approx(hand, abs=1e-12)
    assert weak == pytest.approx(
        [0, charging(1e-6), charging(1e-6) + charging(0.1e-6), 0, 0], rel=1e-12, abs=1e-15
    )


def test_zero_sequence(model: Model) -> None:
    hand = np.zeros((6, 6), complex)
    hand[GRID, GRID] += 1 / 0.5j
    stamp(hand, FAR, TIP, 1 / 1j)
    stamp(hand, MAIN, FAR, 1 / 5j)
    stamp(hand, MAIN, STAR, 1 / 0.4j)  # the delta closes the loop: leakage from bus to star point
    stamp(hand, FAR, STAR, 1 / 0.5j)
    strong, weak = matrices(model, 0)
    assert strong == pytest.approx(hand, abs=1e-12)
    # The stub's halves lie on either end, the open one a node of its own; the resistor counts threefold.
    half = charging(1.5e-6)
    far = charging(0.5e-6) + charging(0.1e-6) + half
    assert weak == pytest.approx(
        [0, charging(0.5e-6), far, 0, half, 1.21 / (3 * 6.05)], rel=1e-12, abs=1e-15
    )


@pytest.mark.parametrize("sequence", [0, 1, 2])
def test_matrices_are_symmetric(model: Model, sequence: int) -> None:
    strong, _ = matrices(model, sequence)
    assert (strong == strong.T).all()
