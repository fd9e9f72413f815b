"""Auto-transformers, coupled lines, zigzag windings and arc-suppression coils."""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.equations.transformers import star_branches
from seqfault.faults.network import Network
from tests.published.figures import FORMULA, FROM_MEMORY, PRINTED, Example, Figure

K1 = "line-ground"


def _star(k: int) -> float:
    """Star branch in per cent on 100 MVA from pairs on their own ratings."""
    x_hm, x_hl, x_ml = 8 * 100 / 150, 34 * 100 / 50, 21.6 * 100 / 40
    return float(star_branches(x_hm, x_hl, x_ml)[k].real)


@cache
def _auto() -> Network:
    tree = {
        "title": "auto-transformer", "frequency": "60 Hz", "base_power": "100 MVA",
        "buses": {"H": "345 kV", "M": "161 kV", "L": "13.8 kV"},
        "infeeds": {"Q": {"bus": "H", "z1": "j1 ohm", "z0": "open"}},
        "transformers": {
            "T": {
                "vector_group": "YNa0d11", "rating": "150 MVA", "z0_over_z1": 1,
                "impedance": {"hv_lv": "j8 %", "hv_tv": "j34 %", "lv_tv": "j21.6 %"},
                "impedance_on": {"hv_tv": "50 MVA", "lv_tv": "40 MVA"},
                "hv": {"bus": "H", "voltage": "345 kV", "neutral": "solid"},
                "lv": {"bus": "M", "voltage": "161 kV"},
                "tv": {"bus": "L", "voltage": "13.8 kV"},
            }
        },
    }  # fmt: skip
    return Network(case_from_tree(tree))


def _auto_z0(bus: str) -> float:
    """Per cent on 100 MVA: the way to the reference through the tertiary's delta."""
    return float(100 * _auto().fault(bus, K1).impedance_pu[0].imag)


STAR = Example(
    "Auto-transformer 345/161/13.8 kV: star equivalent with a negative branch",
    'J. L. Blackburn, "Protective Relaying: Principles and Applications", auto-transformer example',
    FROM_MEMORY,
    "pairs on 150, 50 and 40 MVA to one base, star branches, zero sequence through the tertiary",
    (
        Figure("X_H", 9.667, "%", lambda: _star(0)),
        Figure("X_M", -4.333, "%", lambda: _star(1)),
        Figure("X_L", 58.333, "%", lambda: _star(2)),
        Figure("Z0 seen from H, X_H + X_L", 68.0, "%", lambda: _auto_z0("H")),
        Figure("Z0 seen from M, X_M + X_L", 54.0, "%", lambda: _auto_z0("M")),
    ),
)


@cache
def _parallel(second: str) -> float:
    """Line-ground current (kA) at the far end of two coupled lines."""
    line = {
        "from": "A", "to": "B", "length": "50 km", "z1": "0.05+j0.40 ohm/km",
        "z0": "0.28+j1.15 ohm/km",
    }  # fmt: skip
    state: dict[str, Any] = {
        "in": {}, "open": {"open": ["B"]}, "earthed": {"out": True, "earthed": True}
    }[second]  # fmt: skip
    tree = {
        "title": "coupled lines", "frequency": "50 Hz", "prefault": {"voltage": "1.1 pu"},
        "buses": {"A": "220 kV", "B": "220 kV"},
        "infeeds": {"Q": {"bus": "A", "z1": "0.4+j6 ohm", "z0": "0.8+j9 ohm"}},
        "lines": {"L1": line, "L2": line | state},
        "mutual_couplings": {"M": {"lines": ["L1", "L2"], "z0": "0.22+j0.70 ohm/km"}},
    }  # fmt: skip
    return float(abs(Network(case_from_tree(tree)).fault("B", K1).residual) / 1000)


COUPLED = Example(
    "Parallel 220 kV lines with zero-sequence mutual coupling",
    'P. M. Anderson, "Analysis of Faulted Power Systems"; J. L. Blackburn (closed forms: (Z0 + Z0m)/2,'
    " Z0, Z0 − Z0m²/Z0)",
    FORMULA,
    "line-ground fault at the far end, second line in, switched off, earthed at both ends",
    (
        Figure("second line in", 4.719425884, "kA", lambda: _parallel("in"), 1e-9),
        Figure("second line earthed at both ends", 4.273623278, "kA", lambda: _parallel("earthed"), 1e-9),
        Figure("second line open", 3.484918344, "kA", lambda: _parallel("open"), 1e-9),
    ),
)


def _coil(capacitance: str, detuning: str) -> float:
    """Ohm of a coil tuned to a network of ``capacitance`` to earth a phase."""
    tree = {
        "title": "coil", "frequency": "50 Hz", "buses": {"A": "33 kV", "B": "33 kV"},
        "infeeds": {"Q": {"bus": "A", "z1": "j1 ohm", "z0": "open"}},
        "lines": {"L": {"from": "A", "to": "B", "z1": "j1 ohm", "z0": "j3 ohm", "c1": capacitance,
                        "c0": capacitance}},
        "earthing_transformers": {"ET": {"bus": "A", "z0": "j1 ohm", "neutral": "coil"}},
        "neutrals": {"coil": {"kind": "arc-suppression", "detuning": detuning, "loss": "0 %"}},
    }  # fmt: skip
    stars = Network(case_from_tree(tree)).model.stars
    return float(stars.impedance[stars.names.index("coil")].imag)


def _henry(capacitance: str, detuning: str) -> float:
    return _coil(capacitance, detuning) / (2 * np.pi * 50)


MEHTA = 'V. K. Mehta, R. Mehta, "Principles of Power System", ch. 26, Ex. 26.1 to 26.3'
RAO = 'S. S. Rao, "Switchgear Protection and Power Systems", ch. 18, Ex. 18_3'

COILS = Example(
    "Arc-suppression coils tuned to the network's capacitance",
    f"{MEHTA}; {RAO}",
    PRINTED,
    "X = 1/(3 ω C0), for 100, 95, 90 and 80 per cent of the capacitance; 26.2 rounds on the way",
    (
        Figure("26.1: 4.5 uF", 235.8, "ohm", lambda: _coil("4.5 uF", "0 %")),
        Figure("26.2: 200 km of 0.02 uF/km", 0.85, "H", lambda: _henry("4 uF", "0 %"), 8e-3),
        Figure("26.3: 1.2 uF, 100 %", 884.19, "ohm", lambda: _coil("1.2 uF", "0 %"), 1e-4),
        Figure("26.3: 1.2 uF, 90 %", 982.44, "ohm", lambda: _coil("1.2 uF", "-10 %"), 1e-4),
        Figure("26.3: 1.2 uF, 80 %", 1105.24, "ohm", lambda: _coil("1.2 uF", "-20 %"), 1e-4),
        Figure("18_3: 1.5 uF, 100 %", 2.25, "H", lambda: _henry("1.5 uF", "0 %")),
        Figure("18_3: 1.5 uF, 95 %", 2.37, "H", lambda: _henry("1.5 uF", "-5 %")),
        Figure("18_3: 1.5 uF, 90 %", 2.5, "H", lambda: _henry("1.5 uF", "-10 %")),
    ),
)


@cache
def _zigzag_share() -> float:
    tree = {
        "title": "zigzag", "frequency": "50 Hz", "buses": {"A": "11 kV"},
        "infeeds": {"Q": {"bus": "A", "z1": "j1 ohm", "z0": "open"}},
        "earthing_transformers": {"ET": {"bus": "A", "z0": "j3 ohm", "neutral": "solid"}},
    }  # fmt: skip
    solution = Network(case_from_tree(tree)).fault("A", K1)
    at = solution.terminals.element.index("ET")
    return float(abs(solution.terminals.phases[0, at] / solution.star_points[0].current))


ZIGZAG = Example(
    "Zigzag earthing transformer",
    "IEEE C62.92.4, IEC 60076-8 (standard theory)",
    FROM_MEMORY,
    "each phase carries a third of the neutral current",
    (Figure("phase current / neutral current", 1 / 3, "", _zigzag_share, 1e-12),),
)

EXAMPLES = (STAR, COUPLED, COILS, ZIGZAG)
