"""Two machines, two transformers and a 138 kV line; all faults at the motor's bus."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from tests.published.figures import FROM_MEMORY, Example, Figure, degrees

SOURCE = (
    'J. D. Glover, M. S. Sarma, T. J. Overbye, "Power System Analysis and Design", ch. 9,'
    " Ex. 9.1 to 9.7 (numbering of the 4th to 6th editions)"
)

TREE = {
    "title": "two machines",
    "frequency": "60 Hz",
    "base_power": "100 MVA",
    "prefault": {"voltage": "1.05 pu"},
    "buses": {"one": "13.8 kV", "line-1": "138 kV", "line-2": "138 kV", "two": "13.8 kV"},
    "generators": {
        "G": {
            "bus": "one", "rating": "100 MVA", "voltage": "13.8 kV", "subtransient": "15 %", "x2": "17 %",
            "x0": "5 %", "resistance": "0 %", "neutral": "solid",
        },
        "M": {
            "bus": "two", "rating": "100 MVA", "voltage": "13.8 kV", "subtransient": "20 %", "x2": "21 %",
            "x0": "10 %", "resistance": "0 %", "neutral": "Xn",
        },
    },
    "neutrals": {"Xn": {"reactance": f"{0.05 * 13.8**2 / 100} ohm"}},
    "transformers": {
        name: {
            "vector_group": "YNd1", "rating": "100 MVA", "impedance": "j10 %", "z0_over_z1": 1,
            "hv": {"bus": hv, "voltage": "138 kV", "neutral": "solid"},
            "lv": {"bus": lv, "voltage": "13.8 kV"},
        }
        for name, hv, lv in (("T1", "line-1", "one"), ("T2", "line-2", "two"))
    },
    "lines": {"L": {"from": "line-1", "to": "line-2", "z1": "j20 ohm", "z0": "j60 ohm"}},
}  # fmt: skip

V_BASE = 13.8e3 / np.sqrt(3)
I_BASE = 100e6 / (np.sqrt(3) * 13.8e3)


@cache
def network() -> Network:
    return Network(case_from_tree(TREE))


@cache
def solved(kind: str) -> FaultSolution:
    return network().fault("two", kind)


def towards_fault(kind: str, element: str, bus: str) -> np.ndarray:
    """Sequence currents 0, 1, 2 then phases a, b, c out of ``element`` at ``bus``, per unit."""
    terminals = solved(kind).terminals
    k = [*zip(terminals.element, terminals.bus, strict=True)].index((element, bus))
    base = I_BASE if bus in ("one", "two") else I_BASE / 10
    return -np.concatenate([terminals.sequence[:, k], terminals.phases[:, k]]) / base


def _impedance(s: int) -> float:
    return abs(solved("line-ground").impedance_pu[s])


def _i(kind: str, s: int) -> float:
    return abs(solved(kind).current_sequence[s]) / I_BASE


def _phase(kind: str, p: int) -> complex:
    return complex(solved(kind).current[p] / I_BASE)


def _v(s: int) -> float:
    return float((solved("line-ground").voltage_sequence[s, 3] / V_BASE).real)


def _vp(p: int) -> complex:
    return complex(solved("line-ground").at("two")[p] / V_BASE)


K3, K1, K2, K2E = "three-phase", "line-ground", "line-line", "line-line-ground"
KA = I_BASE / 1000

FAULTS = Example(
    "Two-machine 138 kV system: all faults at the motor's bus",
    SOURCE,
    FROM_MEMORY,
    "sequence networks, delta blocking zero sequence, neutral reactor, all shunt faults",
    (
        Figure("Z1", 0.13893, "pu", lambda: _impedance(1)),
        Figure("Z2", 0.14562, "pu", lambda: _impedance(2)),
        Figure("Z0", 0.250, "pu", lambda: _impedance(0)),
        Figure("three-phase I1", 7.558, "pu", lambda: _i(K3, 1)),
        Figure("three-phase current", 31.62, "kA", lambda: abs(_phase(K3, 0)) * KA),
        Figure("line-ground I0 = I1 = I2", 1.96427, "pu", lambda: _i(K1, 0)),
        Figure("line-ground Ia", 5.8928, "pu", lambda: abs(_phase(K1, 0))),
        Figure("line-ground Ia", 24.65, "kA", lambda: abs(_phase(K1, 0)) * KA),
        Figure("line-ground V0", -0.49107, "pu", lambda: _v(0)),
        Figure("line-ground V1", 0.77710, "pu", lambda: _v(1)),
        Figure("line-ground V2", -0.28604, "pu", lambda: _v(2)),
        Figure("line-ground Vb", 1.179, "pu", lambda: abs(_vp(1))),
        Figure("line-ground Vb angle", 231.3, "deg", lambda: degrees(_vp(1))),
        Figure("line-ground Vc", 1.179, "pu", lambda: abs(_vp(2))),
        Figure("line-ground Vc angle", 128.7, "deg", lambda: degrees(_vp(2))),
        Figure("line-line I1", 3.690, "pu", lambda: _i(K2, 1)),
        Figure("line-line Ib", 6.391, "pu", lambda: abs(_phase(K2, 1))),
        Figure("line-line Ib angle", 180, "deg", lambda: degrees(_phase(K2, 1))),
        Figure("line-line Ib", 26.74, "kA", lambda: abs(_phase(K2, 1)) * KA),
        Figure("line-line-ground I1", 4.5464, "pu", lambda: _i(K2E, 1)),
        Figure("line-line-ground I2", 2.8730, "pu", lambda: _i(K2E, 2)),
        Figure("line-line-ground I0", 1.6734, "pu", lambda: _i(K2E, 0)),
        Figure("line-line-ground Ib", 6.8983, "pu", lambda: abs(_phase(K2E, 1))),
        Figure("line-line-ground Ib angle", 158.66, "deg", lambda: degrees(_phase(K2E, 1))),
        Figure("line-line-ground Ic", 6.8983, "pu", lambda: abs(_phase(K2E, 2))),
        Figure("line-line-ground Ic angle", 21.34, "deg", lambda: degrees(_phase(K2E, 2))),
        Figure("line-line-ground Ib", 28.86, "kA", lambda: abs(_phase(K2E, 1)) * KA),
        Figure("line-line-ground 3I0", 5.0202, "pu", lambda: 3 * _i(K2E, 0)),
        Figure("line-line-ground 3I0", 21.00, "kA", lambda: 3 * _i(K2E, 0) * KA),
    ),
)


def _share(element: str, bus: str, k: int) -> complex:
    return complex(towards_fault(K2E, element, bus)[k])


def _pair(label: str, size: float, angle: float, element: str, bus: str, k: int) -> tuple[Figure, Figure]:
    return (
        Figure(label, size, "pu", lambda: abs(_share(element, bus, k))),
        Figure(f"{label} angle", angle % 360, "deg", lambda: degrees(_share(element, bus, k))),
    )


CONTRIBUTIONS = Example(
    "The same line-line-ground fault: what line and motor contribute",
    SOURCE + ", Ex. 9.5",
    FROM_MEMORY,
    "contributions by phase, zero sequence from the motor only",
    (
        Figure("line I1", 1.3882, "pu", lambda: abs(_share("T2", "two", 1))),
        Figure("line I2", 0.8808, "pu", lambda: abs(_share("T2", "two", 2))),
        Figure("line I0", 0, "pu", lambda: abs(_share("T2", "two", 0)), 1e-12),
        Figure("motor I1", 3.1582, "pu", lambda: abs(_share("M", "two", 1))),
        Figure("motor I2", 1.9922, "pu", lambda: abs(_share("M", "two", 2))),
        Figure("motor I0", 1.6734, "pu", lambda: abs(_share("M", "two", 0))),
        *_pair("line Ia", 0.5074, -90, "T2", "two", 3),
        *_pair("line Ib", 1.9813, 172.643, "T2", "two", 4),
        *_pair("line Ic", 1.9813, 7.357, "T2", "two", 5),
        *_pair("motor Ia", 0.5074, 90, "M", "two", 3),
        *_pair("motor Ib", 4.9986, 153.17, "M", "two", 4),
        *_pair("motor Ic", 4.9986, 26.83, "M", "two", 5),
        Figure("line Ia", 2.123, "kA", lambda: abs(_share("T2", "two", 3)) * KA),
        Figure("line Ib", 8.289, "kA", lambda: abs(_share("T2", "two", 4)) * KA),
        Figure("motor Ib", 20.91, "kA", lambda: abs(_share("M", "two", 4)) * KA),
    ),
)

SHIFT = Example(
    "The same fault seen on the 138 kV side: the shift of the delta-star unit",
    SOURCE + ", Ex. 9.6",
    FROM_MEMORY,
    "hv leads lv by 30 degrees; the book multiplies its per unit by the 13.8 kV base current",
    (
        *_pair("line IA", 1.2166, -21.17, "L", "line-2", 3),
        *_pair("line IB", 2.2690, 180, "L", "line-2", 4),
        *_pair("line IC", 1.2166, 21.17, "L", "line-2", 5),
        Figure("line IA on the 13.8 kV base", 5.090, "kA", lambda: abs(_share("L", "line-2", 3)) * KA),
        Figure("line IB on the 13.8 kV base", 9.493, "kA", lambda: abs(_share("L", "line-2", 4)) * KA),
    ),
)

EXAMPLES = (FAULTS, CONTRIBUTIONS, SHIFT)
