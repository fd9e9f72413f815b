"""Small networks that several tests of this folder ask."""

from __future__ import annotations

from copy import deepcopy
from typing import Any

from seqfault.case.reader import case_from_tree
from seqfault.faults.network import Network

PLANT: dict[str, Any] = {
    "title": "small plant", "frequency": "50 Hz", "base_power": "100 MVA",
    "buses": {"grid": "33 kV", "main": "11 kV", "far": "11 kV", "low": "400 V"},
    "infeeds": {
        "utility": {
            "bus": "grid", "three_phase": "750 MVA", "x_over_r": 10, "line_ground": "6 kA",
            "x0_over_r0": 5,
        }
    },
    "transformers": {
        "T1": {
            "vector_group": "Dyn11", "rating": "12.5 MVA", "impedance": "10.1 %", "x_over_r": 18,
            "hv": {"bus": "grid", "voltage": "33 kV"},
            "lv": {"bus": "main", "voltage": "11 kV", "neutral": "NER"},
        },
        "T2": {
            "vector_group": "Dyn11", "rating": "1 MVA", "impedance": "6 %", "x_over_r": 6,
            "hv": {"bus": "far", "voltage": "11 kV"},
            "lv": {"bus": "low", "voltage": "400 V", "neutral": "solid"},
        },
    },
    "neutrals": {"NER": {"current": "400 A", "voltage": "11 kV"}},
    "lines": {
        "C1": {
            "from": "main", "to": "far", "length": "3 km", "z1": "0.125+j0.096 ohm/km",
            "z0": "0.5+j0.3 ohm/km", "c1": "0.42 uF/km", "c0": "0.42 uF/km",
        }
    },
}  # fmt: skip


def changed(tree: dict[str, Any], *changes: tuple[str, Any]) -> dict[str, Any]:
    """A copy of ``tree`` with values set at dotted paths; None removes."""
    out = deepcopy(tree)
    for path, value in changes:
        *parents, last = path.split(".")
        at = out
        for key in parents:
            at = at.setdefault(key, {})
        if value is None:
            at.pop(last)
        else:
            at[last] = value
    return out


def network(tree: dict[str, Any], *changes: tuple[str, Any]) -> Network:
    return Network(case_from_tree(changed(tree, *changes)))
