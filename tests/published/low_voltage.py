"""A 400 V network with two unequal transformers in parallel, the standard's factors in the data."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network
from tests.published.figures import FROM_MEMORY, Example, Figure

SOURCE = "IEC TR 60909-4:2000, low-voltage example, short-circuit places F1 to F3"


def _corrected(percent: float, loss: float, rating: float) -> complex:
    """Short-circuit impedance in per unit with the factor K_T of IEC 60909-0 (c_max = 1.05)."""
    r = loss / rating
    x = np.sqrt((percent / 100) ** 2 - r * r)
    return complex((0.95 * 1.05 / (1 + 0.6 * x)) * (r + 1j * x))


def _unit(rating: float, loss: float, bus: str) -> dict[str, object]:
    z = _corrected(4, loss, rating)
    return {
        "vector_group": "Dyn5", "rating": f"{rating} kVA",
        "impedance": f"{z.real!r}+j{z.imag!r} pu",
        "z0": f"{z.real!r}+j{0.95 * z.imag!r} pu",
        "hv": {"bus": "q", "voltage": "20 kV"},
        "lv": {"bus": bus, "voltage": "410 V", "neutral": "solid"},
    }  # fmt: skip


def _line(start: str, end: str, z: complex, r: float, x: float, km: float, count: int) -> dict[str, object]:
    return {
        "from": start, "to": end, "length": f"{km} km", "count": count,
        "z1": f"{z.real!r}+j{z.imag!r} ohm/km", "z0": f"{r * z.real!r}+j{x * z.imag!r} ohm/km",
    }  # fmt: skip


Z_Q = 1.1 * 20e3 / (3**0.5 * 10e3)
X_Q = Z_Q / 1.01**0.5

TREE = {
    "title": "low-voltage network",
    "frequency": "50 Hz",
    "base_power": "1 MVA",
    "prefault": {"voltage": "1.05 pu"},
    "buses": {"q": "20 kV", "F1": "400 V", "t2": "400 V", "F2": "400 V", "joint": "400 V", "F3": "400 V"},
    "infeeds": {"Q": {"bus": "q", "z1": f"{0.1 * X_Q!r}+j{X_Q!r} ohm", "z0": "open"}},
    "transformers": {"T1": _unit(630, 6.5, "F1"), "T2": _unit(400, 4.6, "t2")},
    "lines": {
        "L1": _line("F1", "F2", 0.077 + 0.079j, 3.7, 1.81, 0.010, 2),
        "L2": _line("t2", "F2", 0.208 + 0.068j, 4.23, 1.21, 0.004, 2),
        "L3": _line("F2", "joint", 0.271 + 0.087j, 3, 4.46, 0.020, 1),
        "L4": _line("joint", "F3", 0.3704 + 0.297j, 2, 3, 0.050, 1),
    },
}  # fmt: skip


@cache
def network() -> Network:
    return Network(case_from_tree(TREE))


def _kiloampere(place: str, kind: str) -> float:
    return float(np.abs(network().fault(place, kind).current).max() / 1000)


def _transformer(unit: int, part: str) -> float:
    """Corrected impedance in milliohm on the 0.41 kV side, out of the model's leakage."""
    sets = network().model.winding_sets[1]
    z = 1 / sets.leakage[1, unit, 0, 0] * 410**2 / 1e6 * 1000
    return float(getattr(z, part))


def _infeed(part: str) -> float:
    z = 1 / network().model.sources.admittance[1, 0] * 20e3**2 / 1e6 * (0.41 / 20) ** 2 * 1000
    return float(getattr(z, part))


LEVELS = Example(
    "Low-voltage network with two parallel transformers",
    SOURCE,
    FROM_MEMORY,
    "off-nominal ratios, unequal units in parallel, cable zero-sequence ratios, c = 1.05, K_T in the data",
    (
        Figure("Z_T1K real", 2.684, "mohm", lambda: _transformer(0, "real")),
        Figure("Z_T1K imaginary", 10.054, "mohm", lambda: _transformer(0, "imag")),
        Figure("Z_T2K real", 4.712, "mohm", lambda: _transformer(1, "real")),
        Figure("Z_T2K imaginary", 15.698, "mohm", lambda: _transformer(1, "imag")),
        Figure("Z_Qt real", 0.053, "mohm", lambda: _infeed("real"), 3e-3),
        Figure("Z_Qt imaginary", 0.531, "mohm", lambda: _infeed("imag")),
        Figure("F1 three-phase", 34.62, "kA", lambda: _kiloampere("F1", "three-phase")),
        Figure("F2 three-phase", 34.12, "kA", lambda: _kiloampere("F2", "three-phase")),
        Figure("F3 three-phase", 6.95, "kA", lambda: _kiloampere("F3", "three-phase"), 2e-3),
        Figure("F2 line-ground", 34.98, "kA", lambda: _kiloampere("F2", "line-ground")),
    ),
)

EXAMPLES = (LEVELS,)
