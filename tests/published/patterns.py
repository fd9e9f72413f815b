"""Currents of either side of a delta-star unit, sequence components, charging currents."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.equations.earthing import charging_current, resistor_of_current
from seqfault.equations.symmetrical import to_sequence
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from tests.published.figures import FORMULA, FROM_MEMORY, PRINTED, Example, Figure, degrees

HANDBOOKS = (
    'P. M. Anderson, "Analysis of Faulted Power Systems"; J. L. Blackburn, "Protective Relaying:'
    ' Principles and Applications" (current patterns through delta-star units)'
)


@cache
def _solved(kind: str, z0_over_z1: float) -> FaultSolution:
    """Star side of a Dyn11 unit whose infeed is as large as its own impedance, Z1 = Z2.

    The unit's z0 is set so that Z0 seen at the star side is ``z0_over_z1`` times Z1.
    """
    tree = {
        "title": "delta-star", "frequency": "50 Hz", "base_power": "10 MVA",
        "buses": {"delta": "33 kV", "star": "11 kV"},
        "infeeds": {"Q": {"bus": "delta", "z1": f"j{0.1 * 33**2 / 10!r} ohm", "z0": "open"}},
        "transformers": {
            "T": {
                "vector_group": "Dyn11", "rating": "10 MVA", "impedance": "j10 %",
                "z0_over_z1": 2 * z0_over_z1, "hv": {"bus": "delta", "voltage": "33 kV"},
                "lv": {"bus": "star", "voltage": "11 kV", "neutral": "solid"},
            }
        },
    }  # fmt: skip
    return Network(case_from_tree(tree)).fault("star", kind)


STAR_BASE = 10e6 / (np.sqrt(3) * 11e3) / 0.2  # three-phase current, A
DELTA_BASE = STAR_BASE / 3


def _star(kind: str, p: int, z0: float = 1.0) -> float:
    return float(abs(_solved(kind, z0).current[p]) / STAR_BASE)


def _delta_sizes(kind: str, z0: float = 1.0) -> list[float]:
    """Phase currents into the delta side, smallest first, per unit of its three-phase current."""
    terminals = _solved(kind, z0).terminals
    k = [*zip(terminals.element, terminals.bus, strict=True)].index(("T", "delta"))
    return sorted(np.abs(terminals.phases[:, k]) / DELTA_BASE)


def _earth(kind: str, z0: float) -> float:
    return float(abs(_solved(kind, z0).residual) / STAR_BASE)


K3, K1, K2, K2E = "three-phase", "line-ground", "line-line", "line-line-ground"

DELTA_STAR = Example(
    "Phase currents on both sides of a delta-star unit",
    HANDBOOKS,
    FROM_MEMORY,
    "transfer of unbalanced current through Dyn11; per unit of the three-phase current",
    (
        Figure("line-line, star side Ib", 0.866, "pu", lambda: _star(K2, 1)),
        Figure("line-line, delta side largest", 1.0, "pu", lambda: _delta_sizes(K2)[2]),
        Figure("line-line, delta side other", 0.5, "pu", lambda: _delta_sizes(K2)[0]),
        Figure("line-line, delta side other", 0.5, "pu", lambda: _delta_sizes(K2)[1]),
        Figure("largest over star-side current", 1.155, "", lambda: _delta_sizes(K2)[2] / _star(K2, 1)),
        Figure("others over star-side current", 0.577, "", lambda: _delta_sizes(K2)[0] / _star(K2, 1)),
        Figure("line-ground, Z0 = Z1, star side Ia", 1.0, "pu", lambda: _star(K1, 0)),
        Figure("line-ground, delta side two phases", 0.577, "pu", lambda: _delta_sizes(K1)[2]),
        Figure("line-ground, delta side two phases", 0.577, "pu", lambda: _delta_sizes(K1)[1]),
        Figure("line-ground, delta side third phase", 0, "pu", lambda: _delta_sizes(K1)[0], 1e-12),
        Figure("line-line-ground, Z0 = Z1, 3I0", 1.0, "pu", lambda: _earth(K2E, 1)),
        Figure("line-line-ground, Z0 = Z1, Ib", 1.0, "pu", lambda: _star(K2E, 1)),
        Figure("line-line-ground, Z0 = 3 Z1, 3I0", 0.4286, "pu", lambda: _earth(K2E, 3)),
        Figure("line-ground, Z0 = 3 Z1, 3I0", 0.6, "pu", lambda: _earth(K1, 3)),
        Figure("line-line-ground, Z0 = Z1/2, 3I0", 1.5, "pu", lambda: _earth(K2E, 0.5)),
        Figure("line-ground, Z0 = Z1/2, 3I0", 1.2, "pu", lambda: _earth(K1, 0.5)),
    ),
)

_CURRENTS = np.array([100, 50, 30]) * np.exp(1j * np.radians([30, 300, 180]))


def _component(s: int) -> complex:
    return complex(to_sequence(_CURRENTS)[s])


COMPONENTS = Example(
    "Three unequal currents into sequence components",
    'V. K. Mehta, R. Mehta, "Principles of Power System", ch. 18, Ex. 18.2',
    PRINTED,
    "100 A at 30 degrees, 50 A at 300, 30 A at 180",
    (
        Figure("I0", 27.29, "A", lambda: abs(_component(0))),
        Figure("I0 angle", 4.69, "deg", lambda: degrees(_component(0))),
        Figure("I1", 57.98, "A", lambda: abs(_component(1))),
        Figure("I1 angle", 43.3, "deg", lambda: degrees(_component(1))),
        Figure("I2", 18.97, "A", lambda: abs(_component(2))),
        Figure("I2 angle", 24.96, "deg", lambda: degrees(_component(2))),
        Figure("neutral current", 81.88, "A", lambda: abs(3 * _component(0))),
    ),
)


def isolated_tree(**line: object) -> dict[str, object]:
    """A 33/11 kV Yd1 unit that feeds an isolated 11 kV network of ten 2 km cables."""
    return {
        "title": "isolated", "frequency": "50 Hz", "base_power": "10 MVA",
        "buses": {"up": "33 kV", "board": "11 kV", "end": "11 kV"},
        "infeeds": {"Q": {"bus": "up", "three_phase": "2000 MVA", "x_over_r": 10, "z0": "open"}},
        "transformers": {
            "T": {
                "vector_group": "YNd1", "rating": "40 MVA", "impedance": "10 %", "x_over_r": 15,
                "hv": {"bus": "up", "voltage": "33 kV", "neutral": "isolated"},
                "lv": {"bus": "board", "voltage": "11 kV"},
            }
        },
        "lines": {
            "C": {
                "from": "board", "to": "end", "length": "2 km", "count": 10, "z1": "0.125+j0.096 ohm/km",
                "z0": "0.5+j0.3 ohm/km", **line,
            }
        },
    }  # fmt: skip


def _charging() -> float:
    tree = isolated_tree(c1="0.35 uF/km", c0="0.35 uF/km")
    return abs(Network(case_from_tree(tree)).fault("board", K1).residual)


EARTHING = Example(
    "Neutral-earthing arithmetic",
    "IEEE Std 142 and IEEE C62.92 practice, resistor handbook tables (common practice)",
    FROM_MEMORY,
    "resistor of a let-through current, charging current of an isolated network",
    (
        Figure("480 V, 5 A", 55.4, "ohm", lambda: resistor_of_current(5, 480)),
        Figure("600 V, 5 A", 69.3, "ohm", lambda: resistor_of_current(5, 600)),
        Figure("2400 V, 5 A", 277, "ohm", lambda: resistor_of_current(5, 2400)),
        Figure("4160 V, 5 A", 480, "ohm", lambda: resistor_of_current(5, 4160)),
        Figure("4160 V, 400 A", 6.0, "ohm", lambda: resistor_of_current(400, 4160)),
        Figure("13.8 kV, 400 A", 19.9, "ohm", lambda: resistor_of_current(400, 13800)),
        Figure("11 kV, 400 A", 15.88, "ohm", lambda: resistor_of_current(400, 11000)),
        Figure(
            "charging current, 3 ω C0 U/√3: 20 km of 0.35 uF/km at 11 kV, 50 Hz", 41.9, "A",
            lambda: charging_current(7e-6, 50, 11e3),
        ),
        Figure("the same length as ten cables, the full network", 41.9, "A", _charging, 5e-3),
    ),
)  # fmt: skip

_GRID = """
0.5 0 0.9165 0.7500 | 1 0 1.0000 1.0000 | 2 0 1.1456 1.2000 | 3 0 1.2490 1.2857 | 5 0 1.3777 1.3636
10 0 1.5207 1.4286 | 0.5 1 1.3619 1.1859 | 1 1 1.3113 1.1767 | 2 1 1.3105 1.2457 | 3 1 1.3473 1.3031
5 1 1.4226 1.3682 | 10 1 1.5340 1.4292 | 0.5 2 1.6422 1.3829 | 1 2 1.5540 1.3416 | 2 2 1.4730 1.3252
3 2 1.4550 1.3416 | 5 2 1.4755 1.3803 | 10 2 1.5496 1.4311 | 0.5 4 1.8241 1.4665 | 1 4 1.7639 1.4477
2 4 1.6750 1.4221 | 3 4 1.6214 1.4111 | 5 4 1.5777 1.4123 | 10 4 1.5847 1.4378 | 0.5 8 1.8438 1.4913
1 8 1.8229 1.4858 | 2 8 1.7838 1.4758 | 3 8 1.7500 1.4677 | 5 8 1.7000 1.4576 | 10 8 1.6504 1.4552
"""


def _factor(kind: str, z0: str) -> float:
    """Earth-fault factor at an infeed of z1 = j1 ohm."""
    tree = {
        "title": "factor", "frequency": "50 Hz", "base_power": "10 MVA", "buses": {"board": "11 kV"},
        "infeeds": {"Q": {"bus": "board", "z1": "j1 ohm", "z0": z0}},
    }  # fmt: skip
    factors = Network(case_from_tree(tree)).fault("board", kind).earth_fault_factor
    assert factors is not None
    return float(factors[0])


def _grid() -> list[Figure]:
    out = []
    for row in _GRID.replace("\n", " | ").split("|"):
        if not row.strip():
            continue
        x, r, k1, k2e = (float(word) for word in row.split())
        z0 = f"{r}+j{x} ohm"
        for kind, k in ((K1, k1), (K2E, k2e)):
            label = f"X0/X1 = {x:g}, R0/X1 = {r:g}, {kind}"
            out.append(Figure(label, k, "", lambda kind=kind, z0=z0: _factor(kind, z0), 1e-4))
    return out


FACTORS = Example(
    "Earth-fault factor over X0/X1 and R0/X1",
    "IEC 60071-1 and 60071-2 (definition); grid of closed forms for Z1 = Z2 without resistance",
    FORMULA,
    "sound-phase voltage of both kinds to ground, the larger of two sound phases, above √3 too",
    (
        *_grid(),
        Figure("isolated, line-ground", np.sqrt(3), "", lambda: _factor(K1, "open"), 1e-12),
        Figure("isolated, line-line-ground", 1.5, "", lambda: _factor(K2E, "open"), 1e-12),
    ),
)

EXAMPLES = (DELTA_STAR, COMPONENTS, EARTHING, FACTORS)
