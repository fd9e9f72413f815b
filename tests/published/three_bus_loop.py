"""A three-bus 220 kV loop with two generators; all faults through j0.1 per unit at bus 3."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from tests.published.figures import FROM_MEMORY, Example, Figure, degrees

SOURCE = 'H. Saadat, "Power System Analysis", ch. 10, Ex. 10.5 to 10.8'

Z_BASE = 220e3**2 / 100e6
V_BASE = 220e3 / np.sqrt(3)
I_BASE = 100e6 / (np.sqrt(3) * 220e3)
ZF = 0.1j * Z_BASE


def _line(start: str, end: str, x1: float, x0: float) -> dict[str, str]:
    return {"from": start, "to": end, "z1": f"j{x1 * Z_BASE!r} ohm", "z0": f"j{x0 * Z_BASE!r} ohm"}


def _generator(bus: str, neutral: str) -> dict[str, str]:
    return {
        "bus": bus, "rating": "100 MVA", "voltage": "20 kV", "subtransient": "15 %", "x2": "15 %",
        "x0": "5 %", "resistance": "0 %", "neutral": neutral,
    }  # fmt: skip


TREE = {
    "title": "three-bus loop",
    "frequency": "60 Hz",
    "base_power": "100 MVA",
    "buses": {"g1": "20 kV", "g2": "20 kV", "1": "220 kV", "2": "220 kV", "3": "220 kV"},
    "generators": {"G1": _generator("g1", "Xn1"), "G2": _generator("g2", "Xn2")},
    "neutrals": {name: {"reactance": f"{0.25 / 3 * 4!r} ohm"} for name in ("Xn1", "Xn2")},
    "transformers": {
        "T1": {
            "vector_group": "YNyn0", "rating": "100 MVA", "impedance": "j10 %", "z0_over_z1": 1,
            "magnetic_circuit": "three-single-phase",
            "hv": {"bus": "1", "voltage": "220 kV", "neutral": "solid"},
            "lv": {"bus": "g1", "voltage": "20 kV", "neutral": "solid"},
        },
        "T2": {
            "vector_group": "YNd1", "rating": "100 MVA", "impedance": "j10 %", "z0_over_z1": 1,
            "hv": {"bus": "2", "voltage": "220 kV", "neutral": "solid"},
            "lv": {"bus": "g2", "voltage": "20 kV"},
        },
    },
    "lines": {
        "12": _line("1", "2", 0.125, 0.30),
        "13": _line("1", "3", 0.15, 0.35),
        "23": _line("2", "3", 0.25, 0.7125),
    },
}  # fmt: skip


@cache
def network() -> Network:
    return Network(case_from_tree(TREE))


@cache
def solved(kind: str) -> FaultSolution:
    """The book's fault impedance: in the phase, between the phases, or from their joint to earth."""
    if kind == "line-line-ground":
        return network().fault("3", kind, zg=ZF)
    return network().fault("3", kind, zf=ZF)


def _z(s: int, a: str, b: str) -> float:
    factor = network().sequences[s]
    nodes = np.array([network().model.index[a], network().model.index[b]])
    return abs(factor.port_impedance(nodes, factor.columns(nodes))[0, 1])


def _i(kind: str, s: int) -> float:
    return abs(solved(kind).current_sequence[s]) / I_BASE


def _phase(kind: str, p: int) -> complex:
    return complex(solved(kind).current[p] / I_BASE)


def _v(kind: str, bus: str, p: int) -> float:
    return float(abs(solved(kind).at(bus)[p]) / V_BASE)


def _flow(kind: str, line: str, bus: str, p: int) -> float:
    terminals = solved(kind).terminals
    k = [*zip(terminals.element, terminals.bus, strict=True)].index((line, bus))
    return float(abs(terminals.phases[p, k]) / I_BASE)


K3, K1, K2, K2E = "three-phase", "line-ground", "line-line", "line-line-ground"

FAULTS = Example(
    "Three-bus loop: bus impedances and all faults through j0.1 at bus 3",
    SOURCE,
    FROM_MEMORY,
    "meshed network, fault impedance in every kind, neutral reactors, star-star and delta-star units",
    (
        *(
            Figure(f"Z1({a},{b})", value, "pu", lambda a=a, b=b: _z(1, a, b))
            for a, b, value in (
                ("1", "1", 0.145), ("1", "2", 0.105), ("1", "3", 0.130), ("2", "3", 0.120),
                ("3", "3", 0.220),
            )
        ),
        *(
            Figure(f"Z0({a},{b})", value, "pu", lambda a=a, b=b: _z(0, a, b))
            for a, b, value in (
                ("1", "1", 0.1820), ("1", "2", 0.0545), ("1", "3", 0.1400), ("2", "2", 0.0864),
                ("2", "3", 0.0650), ("3", "3", 0.3500),
            )
        ),
        Figure("three-phase current", 3.125, "pu", lambda: abs(_phase(K3, 0))),
        Figure("three-phase current", 820.1, "A", lambda: abs(_phase(K3, 0)) * I_BASE),
        Figure("line-ground I0", 0.9174, "pu", lambda: _i(K1, 0)),
        Figure("line-ground Ia", 2.7523, "pu", lambda: abs(_phase(K1, 0))),
        Figure("line-line I1", 1.8519, "pu", lambda: _i(K2, 1)),
        Figure("line-line Ib", 3.2075, "pu", lambda: abs(_phase(K2, 1))),
        Figure("line-line-ground I1", 2.6017, "pu", lambda: _i(K2E, 1)),
        Figure("line-line-ground I2", 1.9438, "pu", lambda: _i(K2E, 2)),
        Figure("line-line-ground I0", 0.6579, "pu", lambda: _i(K2E, 0)),
        Figure("line-line-ground Ib", 4.058, "pu", lambda: abs(_phase(K2E, 1))),
        Figure("line-line-ground Ib angle", 165.93, "deg", lambda: degrees(_phase(K2E, 1))),
        Figure("line-line-ground 3I0", 1.9737, "pu", lambda: 3 * _i(K2E, 0)),
    ),
)  # fmt: skip

_VOLTAGES = (
    (K3, "1", 0, 0.5938), (K3, "2", 0, 0.6250), (K3, "3", 0, 0.3125),
    (K1, "1", 0, 0.6330), (K1, "1", 1, 1.0046), (K1, "2", 0, 0.7202), (K1, "2", 1, 0.9757),
    (K1, "3", 0, 0.2752), (K1, "3", 1, 1.0647),
    (K2, "1", 0, 1.0), (K2, "1", 1, 0.6720), (K2, "2", 0, 1.0), (K2, "2", 1, 0.6939),
    (K2, "3", 0, 1.0), (K2, "3", 1, 0.5251),
    (K2E, "1", 0, 1.0066), (K2E, "1", 1, 0.5088), (K2E, "2", 0, 0.9638), (K2E, "2", 1, 0.5740),
    (K2E, "3", 0, 1.0855), (K2E, "3", 1, 0.1974),
)  # fmt: skip
_FLOWS = (
    (K3, "13", "1", 0, 1.8750), (K3, "23", "2", 0, 1.2500), (K3, "12", "2", 0, 0.2500),
    (K1, "13", "1", 0, 1.6514), (K1, "23", "2", 0, 1.1009),
    (K2, "13", "1", 1, 1.9245), (K2, "23", "2", 1, 1.2830),
    (K2E, "13", "1", 1, 2.4350), (K2E, "23", "2", 1, 1.6233),
)  # fmt: skip

STATE = Example(
    "Three-bus loop: voltages at all buses and line currents",
    SOURCE,
    FROM_MEMORY,
    "phase voltages away from the fault, branch currents by phase",
    (
        *(
            Figure(f"{k} |V{'abc'[p]}| bus {bus}", value, "pu", lambda k=k, bus=bus, p=p: _v(k, bus, p))
            for k, bus, p, value in _VOLTAGES
        ),
        *(
            Figure(
                f"{k} |I{'abc'[p]}| of line {line} at bus {bus}", value, "pu",
                lambda k=k, line=line, bus=bus, p=p: _flow(k, line, bus, p),
            )
            for k, line, bus, p, value in _FLOWS
        ),
    ),
)  # fmt: skip

EXAMPLES = (FAULTS, STATE)
