"""Seeded distribution grids with earth-fault relays, as case trees: one neighbourhood to twenty buses.

Neighbourhoods hang from a 33 kV ring. Each has a 33/11 kV transformer earthed through a resistor, a board
and three feeders of six buses; the ends of the first two are joined by a line that is open at one end.
Six relays each: a neutral one behind all, at the head of each feeder a core round its cable or a
directional residual one, and two of these again half way out.
"""

from __future__ import annotations

import random
from itertools import pairwise
from typing import Any

Tree = dict[str, Any]
BUSES, RELAYS = 20, 6
"""Of a neighbourhood."""
FEEDERS, LENGTH = 3, 6


def relay_grid(neighbourhoods: int, seed: int = 1) -> Tree:
    """The tree of a case file, the same for the same ``seed``; a weak state besides the base."""
    chance = random.Random(seed)
    tree: Tree = {
        "title": f"Synthetic grid of {BUSES * neighbourhoods} buses, {RELAYS * neighbourhoods} relays",
        "frequency": "50 Hz",
        "buses": {},
        "infeeds": {
            "utility": {
                "bus": "V0",
                "three_phase": "20 kA",
                "x_over_r": 12,
                "line_ground": "2 kA",
                "x0_over_r0": 0.3,
            }
        },
        "lines": {},
        "transformers": {},
        "neutrals": {},
        "current_transformers": {
            "core": {"ratio": "50/1 A", "connection": "core-balance", "class": "10P10"},
            "phases": {
                "ratio": "600/1 A",
                "connection": "residual",
                "class": "5P20",
                "burden": "10 VA",
                "connected_burden": "5 VA",
                "winding_resistance": "3 ohm",
            },
            "star": {"ratio": "300/1 A", "connection": "neutral", "class": "5P10"},
        },
        "relays": {},
        "demands": {
            "fault_resistances": ["0 ohm", "5 ohm"],
            "see": 1.5,
            "keep_still": 1.3,
            "least": ["base", "weak"],
        },
        "scenarios": {"weak": {"infeeds": {"utility": {"three_phase": "8 kA"}}}},
    }

    def line(name: str, start: str, end: str, high: bool, **more: Any) -> None:
        r, x = (0.16, 0.36) if high else (0.2 * chance.uniform(0.8, 1.4), 0.1)
        c = 9e-3 if high else chance.uniform(0.25, 0.42)
        tree["lines"][name] = {
            "from": start,
            "to": end,
            "length": f"{chance.uniform(1, 4) if high else chance.uniform(0.3, 1.2):.3f} km",
            "z1": f"{r:.4f}+j{x:.4f} ohm/km",
            "z0": f"{r + (0.15 if high else 0.75):.4f}+j{x * 2.5:.4f} ohm/km",
            "c1": f"{c:.4f} uF/km",
            "c0": f"{c * 0.7 if high else c:.4f} uF/km",
        } | more

    for k in range(neighbourhoods):
        tree["buses"][f"V{k}"] = "33 kV"
        if k:
            line(f"H{k}", f"V{k - 1}", f"V{k}", True)
        _neighbourhood(tree, k, line)
    if neighbourhoods > 2:
        line("H0", f"V{neighbourhoods - 1}", "V0", True)
    return tree


def _neighbourhood(tree: Tree, k: int, line: Any) -> None:
    board = f"B{k}"
    tree["buses"][board] = "11 kV"
    tree["transformers"][f"T{k}"] = {
        "vector_group": "Dyn11",
        "rating": "10 MVA",
        "impedance": "10 %",
        "x_over_r": 20,
        "z0_over_z1": 0.9,
        "hv": {"bus": f"V{k}", "voltage": "33 kV"},
        "lv": {"bus": board, "voltage": "11 kV", "neutral": f"N{k}"},
    }
    tree["neutrals"][f"N{k}"] = {
        "current": "600 A",
        "voltage": "11 kV",
        "duration": "10 s",
        "temperature_rise": "600 K",
    }
    heads = []
    for f in range(FEEDERS):
        names = [board, *(f"B{k}-{f}-{n}" for n in range(LENGTH))]
        ends = list(pairwise(names))
        for n, (start, end) in enumerate(ends):
            tree["buses"][end] = "11 kV"
            line(f"L{k}-{f}-{n}", start, end, False)
        half = LENGTH // 2 if f < RELAYS - 1 - FEEDERS else LENGTH
        heads.append(f"R{k}-{f}")
        behind = [f"R{k}-{f}-far"] if half < LENGTH else []
        _relay(
            tree, heads[-1], f"L{k}-{f}-0@{board}", f, 0.45 if behind else 0.1, names, half, behind, k, f, 0
        )
        if behind:
            at = f"L{k}-{f}-{half}@{names[half]}"
            _relay(tree, behind[0], at, f, 0.1, names[half:], LENGTH - half, [], k, f, half)
    line(f"J{k}", f"B{k}-0-{LENGTH - 1}", f"B{k}-1-{LENGTH - 1}", False, open=[f"B{k}-1-{LENGTH - 1}"])
    tree["relays"][f"R{k}-0-far"]["protects"].append(f"J{k}")
    tree["relays"][f"R{k}-neutral"] = {
        "at": f"N{k}",
        "measures": "neutral",
        "ct": "star",
        "pickup": "45 A",
        "curve": "IEC standard inverse",
        "multiplier": 0.35,
        "protects": [board, f"T{k}.lv"],
        "backs_up": heads,
    }


def _relay(
    tree: Tree,
    name: str,
    at: str,
    feeder: int,
    delay: float,
    names: list[str],
    count: int,
    behind: list[str],
    k: int,
    f: int,
    first: int,
) -> None:
    """A relay that protects ``count`` lines and the buses behind them."""
    core = feeder != 0
    tree["relays"][name] = {
        "at": at,
        "measures": "core-balance" if core else "residual",
        "ct": "core" if core else "phases",
        "pickup": "20 A" if core else "40 A",
        "curve": "definite",
        "delay": f"{delay} s",
        "protects": [*names[1 : count + 1], *(f"L{k}-{f}-{first + n}" for n in range(count))],
        "backs_up": behind,
    }
    if not core:
        tree["relays"][name] |= {
            "direction": "forward",
            "characteristic_angle": "-15 deg",
            "vt": "11 kV/110 V",
            "polarisation": "residual-voltage",
        }
