"""Open conductors under load, and earth faults on two phases at two places."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.faults.kinds import fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from tests.published.figures import FORMULA, Example, Figure

# Two sources behind impedances, a line between them; per unit on 100 MVA and 100 kV, 100 ohm.
EA, EB = 1.05 + 0j, 0.98 * np.exp(-1j * np.radians(25))
ZA1, ZA0, ZB1, ZB0 = 0.3 + 4j, 0.5 + 3j, 0.6 + 7j, 1 + 5j
LINE1, LINE0 = 1 + 8j, 3 + 24j
BASE = 100e6 / np.sqrt(3) / 100e3  # A


def _ohm(z: complex) -> str:
    return f"{z.real * 100!r}+j{z.imag * 100!r} ohm"


@cache
def two_sources() -> Network:
    """The state before the break, stated as what an infeed and a generator hold."""
    flow = (EA - EB) / (ZA1 + LINE1 + ZB1)
    va, vb = EA - ZA1 * flow, EB + ZB1 * flow
    tree = {
        "frequency": "50 Hz", "base_power": "100 MVA", "prefault": {"state": "loaded"},
        "buses": {"A": "100 kV", "B": "100 kV"},
        "infeeds": {
            "a": {"bus": "A", "z1": _ohm(ZA1), "z0": _ohm(ZA0), "voltage": f"{float(abs(va))!r} pu"},
        },
        "generators": {
            "b": {
                "bus": "B", "rating": "100 MVA", "subtransient": _ohm(ZB1), "x0": _ohm(ZB0),
                "neutral": "solid", "holds": f"{float(abs(vb))!r} pu",
                "power": f"{float(-(vb * flow.conjugate()).real * 100e6)!r} W",
            }
        },
        "lines": {"L": {"from": "A", "to": "B", "z1": _ohm(LINE1), "z0": _ohm(LINE0)}},
    }  # fmt: skip
    return Network(case_from_tree(tree))


@cache
def opened(kind: str) -> FaultSolution:
    return two_sources().fault("L@A", kind)


def _component(s: int, kind: str = "open-one") -> float:
    through = opened(kind).faults[0].through
    a = np.exp(2j * np.pi / 3)
    rows = np.array([[1, 1, 1], [1, a, a * a], [1, a * a, a]]) / 3
    return float(abs((rows @ through)[s]) / BASE)


OPEN_CONDUCTORS = Example(
    "Open conductors between two sources under load",
    "P. M. Anderson, Analysis of Faulted Power Systems, ch. 3; J. J. Grainger, W. D. Stevenson, Power"
    " System Analysis, ch. 12: one open, the sequence networks in parallel at the break; two open, in"
    " series",
    FORMULA + ", from memory",
    "series faults with a load flowing before, both ends earthed; loaded state",
    (
        Figure("one open: I1", 0.014298201, "pu", lambda: _component(1), 1e-7),
        Figure("one open: I2", 0.008989189, "pu", lambda: _component(2), 1e-7),
        Figure("one open: 3I0", 0.015935065, "pu", lambda: 3 * _component(0), 1e-7),
        Figure(
            "two open: Ia", 0.018924103, "pu",
            lambda: float(abs(opened("open-two").faults[0].through[0]) / BASE), 1e-7,
        ),
    ),
)  # fmt: skip

RADIAL = {
    "frequency": "50 Hz", "prefault": {"voltage": "1.1 pu"},
    "buses": {"Q": "20 kV", "A": "20 kV", "B": "20 kV"},
    "infeeds": {"net": {"bus": "Q", "z1": "0.05+j0.5 ohm", "z0": "open"}},
    "lines": {
        "near": {
            "from": "Q", "to": "A", "length": "4 km", "z1": "0.12+j0.39 ohm/km", "z0": "0.32+j1.26 ohm/km",
        },
        "far": {
            "from": "A", "to": "B", "length": "7 km", "z1": "0.12+j0.39 ohm/km", "z0": "0.32+j1.26 ohm/km",
        },
    },
}  # fmt: skip


@cache
def cross_country() -> FaultSolution:
    network = Network(case_from_tree(RADIAL))
    return network.fault("A", "line-ground", phases="b", also=[fault_at("B", "line-ground", "c")])


def _kiloampere(fault: int) -> float:
    return float(np.abs(cross_country().faults[fault].current).max() / 1000)


CROSS_COUNTRY = Example(
    "Two separate earth faults on a line without earthed neutral",
    "IEC 60909-3: I\"kEE = 3 c U / |6 Z(1)d + 2 Z(1)f + Z(0)f|; 20 kV, c = 1.1, Z1 = 0.05+j0.5 ohm,"
    " 4 km and 7 km of 0.12+j0.39 and 0.32+j1.26 ohm/km",
    FORMULA + ", from memory",
    "two faults at once on different phases and places; no net current to earth",
    (
        Figure("I\"kEE into earth at A", 2.393914766, "kA", lambda: _kiloampere(0), 1e-9),
        Figure("I\"kEE out of earth at B", 2.393914766, "kA", lambda: _kiloampere(1), 1e-9),
        Figure(
            "net current to earth", 0.0, "kA",
            lambda: float(abs(sum(f.residual for f in cross_country().faults)) / 1000), 1e-9,
        ),
    ),
)  # fmt: skip

EXAMPLES = (OPEN_CONDUCTORS, CROSS_COUNTRY)
