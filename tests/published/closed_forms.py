"""Closed forms of IEC 60909-0 at one place, against the full network."""

from __future__ import annotations

from functools import cache

import numpy as np

from seqfault.case.reader import case_from_tree
from seqfault.equations.iec60909 import bolted_currents
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.studies.levels import levels
from tests.published.figures import FORMULA, Example, Figure

TREE = {
    "title": "closed forms", "frequency": "50 Hz", "base_power": "100 MVA",
    "prefault": {"voltage": "1.1 pu"}, "buses": {"Q": "20 kV"},
    "infeeds": {"net": {"bus": "Q", "z1": "0.03+j0.21 ohm", "z0": "0.11+j0.57 ohm"}},
}  # fmt: skip


@cache
def network() -> Network:
    return Network(case_from_tree(TREE))


@cache
def solved(kind: str) -> FaultSolution:
    return network().fault("Q", kind)


def _closed(name: str) -> float:
    values = bolted_currents(
        [1.1 * 20e3 / np.sqrt(3)], [0.03 + 0.21j], [0.03 + 0.21j], [1 / (0.11 + 0.57j)]
    )
    return float(abs(getattr(values, name)[0]) / 1000)


def _level(name: str) -> float:
    return float(getattr(levels(network()), name)[0] / 1000)


def _solved(kind: str, p: int | None) -> float:
    s = solved(kind)
    return float(abs(s.residual if p is None else s.current[p]) / 1000)


_ROWS = (
    ("k1", "k1", "line-ground", 0, 37.934793567),
    ("kE2E", "k2e_earth", "line-line-ground", None, 27.754130813),
    ("k2E, phase b", "k2e_b", "line-line-ground", 1, 54.228764709),
    ("k2E, phase c", "k2e_c", "line-line-ground", 2, 53.124050528),
    ("k2", "k2", "line-line", 1, 51.854497287),
)

CURRENTS = Example(
    "Initial currents of all kinds at an infeed, 20 kV, c = 1.1",
    "IEC 60909-0 clause 4.2, formulas; Z1 = Z2 = 0.03+j0.21 ohm, Z0 = 0.11+j0.57 ohm",
    FORMULA,
    "closed forms with complex impedances, the network solution and the survey of all buses",
    (
        *(
            Figure(f"{label}, closed form", kA, "kA", lambda n=n: _closed(n), 1e-9)
            for label, n, _, _, kA in _ROWS
        ),
        *(
            Figure(f"{label}, network", kA, "kA", lambda kind=kind, p=p: _solved(kind, p), 1e-9)
            for label, _, kind, p, kA in _ROWS
        ),
        Figure("k1, survey", 37.934793567, "kA", lambda: _level("k1"), 1e-9),
        Figure("k2, survey", 51.854497287, "kA", lambda: _level("k2"), 1e-9),
        Figure("kE2E, survey", 27.754130813, "kA", lambda: _level("k2e_earth"), 1e-9),
    ),
)  # fmt: skip

EXAMPLES = (CURRENTS,)
