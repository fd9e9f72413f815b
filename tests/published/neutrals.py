"""Neutral resistors of the handbooks, cover of a generator's winding, earthing transformers."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.equations.winding_cover import resistor_for_share, uncovered_share
from seqfault.faults.network import Network
from seqfault.studies.neutral import NeutralReport, Standing, study_neutral
from seqfault.studies.winding_cover import WindingCover, winding_cover
from tests.published.figures import FORMULA, FROM_MEMORY, PRINTED, Example, Figure


@cache
def plate(volt: int, ampere: int) -> NeutralReport:
    """A resistor by its plate at the star point of a Dyn11 unit."""
    tree = {
        "title": "resistor", "frequency": "60 Hz", "buses": {"up": "33 kV", "board": f"{volt} V"},
        "infeeds": {"Q": {"bus": "up", "three_phase": "500 MVA", "x_over_r": 10, "z0": "open"}},
        "neutrals": {"R": {"current": f"{ampere} A", "voltage": f"{volt} V", "duration": "10 s"}},
        "transformers": {"T": {
            "vector_group": "Dyn11", "rating": "10 MVA", "impedance": "10 %", "x_over_r": 15,
            "hv": {"bus": "up", "voltage": "33 kV"},
            "lv": {"bus": "board", "voltage": f"{volt} V", "neutral": "R"}}},
    }  # fmt: skip
    return study_neutral([Network(case_from_tree(tree))], "R")


def _stands(volt: int, ampere: int) -> Standing:
    return plate(volt, ampere).standing[0]


RESISTORS = Example(
    "Neutral resistors by let-through current",
    "IEEE Std 142 and resistor handbook tables (common practice): R = V_LN/I, heat V_LN²/R",
    FROM_MEMORY,
    "a resistor by its plate in a network: ohms, let-through, kilowatt, energy of its duration",
    (
        *(
            Figure(f"{u} V, {i} A", ohms, "ohm", lambda u=u, i=i: _stands(u, i).ohms[0].real)
            for u, i, ohms in (
                (480, 5, 55.4), (600, 5, 69.3), (2400, 5, 277), (4160, 5, 480), (4160, 400, 6.0),
                (13800, 400, 19.9), (11000, 400, 15.88),
            )
        ),
        Figure("11 kV, 400 A: let-through", 400, "A", lambda: _stands(11000, 400).let_through[0], 1e-12),
        Figure("11 kV, 400 A: heat", 2.54, "MW", lambda: _stands(11000, 400).heat[0] / 1e6),
        Figure("11 kV, 400 A: in 10 s", 25.4, "MJ", lambda: _stands(11000, 400).heat[0] * 10 / 1e6),
    ),
)  # fmt: skip

MEHTA = 'V. K. Mehta, R. Mehta, "Principles of Power System", ch. 22, Ex. 22.1 to 22.4'
SONI = "Chakrabarti, Soni, Gupta, Bhatnagar, ch. 3.8, Ex. 3.8.1 to 3.8.3"
PHASE = 6.6e3 / np.sqrt(3)


@cache
def _covered(ohms: float, rating: str, reactance: str, pickup: float, cover: float | None) -> WindingCover:
    """A 6.6 kV machine on a resistor."""
    tree = {
        "title": "machine", "frequency": "50 Hz", "buses": {"bar": "6.6 kV"},
        "neutrals": {"R": {"resistance": f"{ohms} ohm"}},
        "generators": {"G": {
            "bus": "bar", "rating": rating, "voltage": "6.6 kV", "subtransient": reactance, "x0": "3 %",
            "neutral": "R"}},
    }  # fmt: skip
    report = study_neutral([Network(case_from_tree(tree))], "R")
    return winding_cover(report.neutral, "G", pickup, cover)


def _resistor(ohms: float, rating: str, reactance: str, pickup: float, cover: float) -> float:
    found = _covered(ohms, rating, reactance, pickup, cover).resistor
    assert found is not None
    return found


def _simple(ohms: float, pickup: float, volt: float) -> float:
    return 100 * uncovered_share(pickup, ohms, volt / np.sqrt(3))


FULL_LOAD = 10e6 / (np.sqrt(3) * 6.6e3)
FIVE_MVA = 5e6 / (np.sqrt(3) * 6.6e3)

COVER = Example(
    "Portion of a generator's winding left unprotected, and the resistor for a wanted cover",
    f"{MEHTA}; {SONI}",
    PRINTED,
    "pickup against neutral resistor, with and without the impedance of the winding",
    (
        Figure("22.1: 10 MVA, 10 %, 175 A, 10 % left", 2.177, "ohm",
               lambda: _resistor(5, "10 MVA", "10 %", 175, 0.9)),
        Figure("22.2: 1000/5, 0.5 A, 7.5 ohm", 19.68, "%",
               lambda: 100 * _covered(7.5, "10 MVA", "10 %", 100, None).simple),
        Figure("22.3: 0.75 A, 6 ohm", 23.6, "%", lambda: _simple(6, 150, 6.6e3), 2e-3),
        Figure("22.3: for 10 % left", 2.54, "ohm", lambda: resistor_for_share(150, 0.1, PHASE)),
        Figure("22.4: 20 % of full load, 15 % left", 3.27, "ohm",
               lambda: resistor_for_share(0.2 * FULL_LOAD, 0.15, PHASE), 2e-3),
        Figure("3.8.1: 2 MW at 0.8, 12.5 %, 200 A, 10 % left", 1.89, "ohm",
               lambda: _resistor(5, "2.5 MVA", "12.5 %", 200, 0.9), 2e-3),
        Figure("3.8.2: 11 kV, 1200/5, 0.75 A, 6 ohm", 17, "%", lambda: _simple(6, 180, 11e3)),
        Figure("3.8.2: 3 ohm", 8.5, "%", lambda: _simple(3, 180, 11e3)),
        Figure("3.8.2: 12 ohm", 34, "%", lambda: _simple(12, 180, 11e3)),
        Figure("3.8.3: 5 MVA, 30 %, R = 0.5 ohm, 6.5 ohm", 22.8, "%",
               lambda: 100 * uncovered_share(0.3 * FIVE_MVA, 6.5, PHASE, 0.5 + 0j), 2e-3),
    ),
)  # fmt: skip


@cache
def zigzag() -> Standing:
    """An earthing transformer that alone lets 1000 A into a fault: z0 = 3 V_LN/1000 A less 2 Z1."""
    z0 = float(3 * 11e3 / np.sqrt(3) / 1000 - 2 * 0.5)
    tree = {
        "title": "zigzag", "frequency": "50 Hz", "buses": {"board": "11 kV"},
        "infeeds": {"Q": {"bus": "board", "z1": "j0.5 ohm", "z0": "open"}},
        "neutrals": {"X": {"reactance": f"{(z0 - 9) / 3!r} ohm"}},
        "earthing_transformers": {"ET": {"bus": "board", "z0": "j9 ohm", "neutral": "X"}},
    }  # fmt: skip
    return study_neutral([Network(case_from_tree(tree))], "X").standing[0]


EARTHING_TRANSFORMER = Example(
    "Short-time rating of a zigzag earthing transformer",
    "IEEE C62.92.4 and IEC 60076-6 practice: V_LN × I_N",
    FORMULA,
    "11 kV, 1000 A in its neutral, out of the solved network",
    (
        Figure("neutral current", 1000, "A", lambda: zigzag().duties[0].neutral, 1e-9),
        Figure("rating", 6.35, "MVA", lambda: zigzag().duties[0].needed / 1e6),
        Figure("phase current over neutral current", 0.333, "",
               lambda: zigzag().duties[0].phase / zigzag().duties[0].neutral, 2e-3),
    ),
)  # fmt: skip

EXAMPLES = (RESISTORS, COVER, EARTHING_TRANSFORMER)
