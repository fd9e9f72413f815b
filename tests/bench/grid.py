"""Seeded synthetic grids of any size, as case trees.

``python -m tests.bench.grid 20000 grid.json`` writes one, with ``meshed`` behind it one that is all mesh
and has no radial ends. Of the usual ones about a tenth of the buses form a 110 kV mesh.
Zones of 33 kV hang from it by one to three transformers, zones of 11 kV from those, ends of 0.4 kV
from these: rings, chords and radial tails, 2.6 branch ends a bus in all. Delta windings break zero
sequence everywhere; zones are earthed solidly, through resistors or not at all, and what is not
earthed has capacitance, or in a few zones not even that. Some lines of the mesh are coupled to one they
share no bus with; some star-star transformers have both star points on one resistor. Seven buses of a
hundred have a source.
"""

from __future__ import annotations

import json
import random
import sys
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

Tree = dict[str, Any]
MESH = 0.12
COUPLED, SHARED = 0.03, 0.2  # lines of the mesh; star-star transformers under 33 kV
INFEED, GENERATOR, MOTOR = 0.10, 0.025, 0.06  # shares of the mesh, of 33 kV buses, of all others


@dataclass(frozen=True)
class Level:
    """Figures of one voltage: ohm/km, km and F/km of its lines, and VA of the transformers that feed it."""

    volt: str
    z1: tuple[float, float]
    length: tuple[float, float]
    c0: tuple[float, float]
    rating: tuple[float, float]
    impedance: tuple[float, float]  # %


LEVELS = {
    110: Level("110 kV", (0.06, 0.42), (8, 50), (4e-9, 6e-9), (40e6, 200e6), (10, 14)),
    33: Level("33 kV", (0.16, 0.36), (1, 15), (5e-9, 2e-7), (16e6, 60e6), (9, 13)),
    11: Level("11 kV", (0.25, 0.12), (0.2, 4), (2e-7, 4e-7), (5e6, 20e6), (7, 11)),
    0: Level("0.4 kV", (0.32, 0.08), (0.03, 0.4), (1e-7, 3e-7), (250e3, 1.6e6), (4, 6)),
}


@dataclass
class _Maker:
    """A tree in the making; ``left`` buses may still be added.

    ``extra`` chooses couplings and shared star points: the rest is the same without them.
    """

    chance: random.Random
    extra: random.Random
    left: int
    tree: Tree = field(
        default_factory=lambda: {
            table: {}
            for table in (
                "buses",
                "infeeds",
                "generators",
                "motors",
                "lines",
                "mutual_couplings",
                "transformers",
                "neutrals",
            )
        }
    )

    def add(self, table: str, letter: str, record: Any) -> str:
        name = f"{letter}{len(self.tree[table])}"
        self.tree[table][name] = record
        return name

    def between(self, limits: tuple[float, float]) -> float:
        return float(f"{self.chance.uniform(*limits):.4g}")

    def maybe(self, share: float) -> bool:
        return self.chance.random() < share

    def buses(self, level: int, count: int) -> list[str]:
        count = min(count, self.left)
        self.left -= count
        return [self.add("buses", "B", LEVELS[level].volt) for _ in range(count)]

    def line(self, level: int, i: str, j: str, charged: bool = True, may_open: bool = False) -> str:
        of, c = LEVELS[level], self.chance
        r, x = of.z1[0] * c.uniform(0.7, 1.5), of.z1[1] * c.uniform(0.9, 1.1)
        record: Tree = {
            "from": i,
            "to": j,
            "length": f"{self.between(of.length)} km",
            "z1": f"{r:.4f}+j{x:.4f} ohm/km",
            "z0": f"{r + 0.15:.4f}+j{x * c.uniform(2, 4):.4f} ohm/km",
        }
        if charged:
            farad = self.between(of.c0)
            record |= {"c1": f"{1.6 * farad * 1e9:.4g} nF/km", "c0": f"{farad * 1e9:.4g} nF/km"}
        if may_open and self.maybe(0.5):
            record["open"] = [j]
        return self.add("lines", "L", record)

    def mesh(self, count: int) -> list[str]:
        """A lattice: every bus joined to the next, half of them to the row below."""
        names = self.buses(110, count)
        width = max(2, round(len(names) ** 0.5))
        along = [""]
        for k in range(1, len(names)):
            along.append(self.line(110, names[k - 1], names[k]))
            if k > width and self.extra.random() < COUPLED:  # with the line beside it in the row below
                pair = {"lines": [along[k - width], along[k]], "z0": "0.1+j0.3 ohm/km"}
                self.add("mutual_couplings", "K", pair)
            if k >= width and self.maybe(0.55):
                self.line(110, names[k - width], names[k])
        for k, name in enumerate(names):
            if k == 0 or self.maybe(INFEED):
                self.infeed(name, 110)
        return names

    def zone(self, level: int, count: int, charged: bool) -> list[str]:
        """A tree whose buses hang from one of the last few, with chords across it."""
        names = self.buses(level, count)
        for k in range(1, len(names)):
            self.line(level, names[max(0, k - self.chance.choice((1, 1, 1, 2, 4)))], names[k], charged)
            if k > 4 and self.maybe(0.42):
                other = names[k - self.chance.randint(2, 5)]
                self.line(level, other, names[k], charged, may_open=level == 11)
        return names

    def infeed(self, bus: str, level: int) -> None:
        kiloampere = self.chance.uniform(3, 20)
        zero = {"line_ground": f"{kiloampere * 0.8:.4g} kA", "x0_over_r0": 4}
        self.add(
            "infeeds",
            "Q",
            {"bus": bus, "three_phase": f"{kiloampere:.4g} kA", "x_over_r": self.between((6, 20))}
            | (zero if level == 110 and self.maybe(0.8) else {"z0": "open"}),
        )

    def generator(self, bus: str, level: int) -> None:
        star: Tree = {"neutral": "isolated"}
        if self.maybe(0.5):
            star = {"neutral": self.resistor(LEVELS[level].volt), "x0": "6 %"}
        machine = {"bus": bus, "rating": f"{self.between((2, 20))} MVA", "subtransient": "16 %"}
        self.add("generators", "G", machine | {"x2": "18 %", "resistance": "1 %"} | star)

    def motor(self, bus: str, level: int) -> None:
        rating = self.between((50, 300) if level == 0 else (400, 3000))
        plate = {"bus": bus, "rating": f"{rating} kVA", "locked_rotor": 5.5, "x_over_r": 6}
        self.add("motors", "M", plate)

    def resistor(self, volt: str) -> str:
        return self.add("neutrals", "N", {"current": f"{self.between((50, 800))} A", "voltage": volt})

    def feed(self, above: int, hv: list[str], level: int, lv: list[str], group: str, lv_star: str) -> None:
        """Transformers of one group from each of ``hv`` to the first buses of ``lv``."""
        of = LEVELS[level]
        shared = self.resistor(of.volt) if lv_star == "resistor" and self.maybe(0.5) else None
        for k, bus in enumerate(hv):
            high: Tree = {"bus": bus, "voltage": LEVELS[above].volt}
            low: Tree = {"bus": lv[min(k, len(lv) - 1)], "voltage": of.volt}
            if self.maybe(0.4):
                kilovolt = float(of.volt.split()[0])
                low["voltage"] = f"{kilovolt * self.chance.choice((0.98, 1.025, 1.05)):.6g} kV"
            if group.startswith("YN"):
                high["neutral"] = self.chance.choice(("solid", "solid", "isolated"))
            if group == "YNyn0" and above == 33 and self.extra.random() < SHARED:
                both = {"current": f"{self.extra.randint(50, 800)} A", "voltage": of.volt}
                low["neutral"] = high["neutral"] = self.add("neutrals", "N", both)
            elif "yn" in group:
                low["neutral"] = shared or (self.resistor(of.volt) if lv_star == "resistor" else lv_star)
            record: Tree = {
                "vector_group": group,
                "rating": f"{self.between(of.rating):.4g} VA",
                "impedance": f"{self.between(of.impedance)} %",
                "x_over_r": self.between((5, 40)),
                "z0_over_z1": 0.9,
                "hv": high,
                "lv": low,
            }
            if self.maybe(0.5):
                record["tap"] = f"{1.25 * self.chance.randint(-4, 4)} %"
            if group.startswith("YN") and "yn" in group:
                record["magnetic_circuit"] = "five-limb"
            self.add("transformers", "T", record)


def _earthing(make: _Maker) -> tuple[str, str, bool]:
    """Vector group, star point on the lower side, and whether the zone has capacitance."""
    return make.chance.choices(
        (
            ("Dyn11", "resistor", True),
            ("Dyn11", "solid", True),
            ("Dyn11", "isolated", True),
            ("YNd1", "", True),
            ("YNd1", "", False),
            ("YNyn0", "solid", True),
        ),
        (40, 14, 14, 16, 4, 12),
    )[0]


def _sources(make: _Maker, level: int, names: list[str]) -> None:
    for name in names:
        if level == 33 and make.maybe(GENERATOR):
            make.generator(name, level)
        elif make.maybe(MOTOR):
            make.motor(name, level)


def _hang(make: _Maker, above: int, hv: list[str], level: int, size: tuple[int, int]) -> list[str]:
    """A new zone of ``level`` fed from the buses ``hv``."""
    group, star, charged = ("Dyn5", "solid", False) if level == 0 else _earthing(make)
    names = make.zone(level, make.chance.randint(*size), charged)
    if names:
        make.feed(above, hv, level, names, group, star)
        _sources(make, level, names)
    return names


def grid(buses: int, seed: int = 1, meshed: bool = False) -> Tree:
    """The tree of a case file with exactly ``buses`` buses, the same for the same ``seed``.

    All of them are of the mesh where it is ``meshed``.
    """
    make = _Maker(random.Random(seed), random.Random(seed + 1), buses)
    mesh = make.mesh(buses if meshed else max(2, round(MESH * buses)))
    while make.left:
        start = make.chance.randrange(len(mesh))
        ends = mesh[start : start + make.chance.choice((1, 2, 2, 3))]
        upper = _hang(make, 110, ends, 33, (8, 40))
        for _ in range(max(1, len(upper) // 12)):
            if not make.left:
                break
            hv = make.chance.choice(upper)
            middle = _hang(make, 33, [hv] * make.chance.choice((1, 2)), 11, (5, 30))
            for _ in range(len(middle) // 6):
                if make.left:
                    _hang(make, 11, [make.chance.choice(middle)], 0, (1, 3))
    title = {"title": f"Synthetic grid of {buses} buses", "frequency": "50 Hz"}
    return title | {table: records for table, records in make.tree.items() if records}


def degree(tree: Tree) -> float:
    """Branch ends a bus."""
    return 2 * (len(tree["lines"]) + len(tree.get("transformers", ()))) / len(tree["buses"])


def write_json(path: Path, buses: int, seed: int = 1, meshed: bool = False) -> None:
    """Write the grid as the JSON form of a case file."""
    path.write_text(json.dumps(grid(buses, seed, meshed)), encoding="utf-8")


if __name__ == "__main__":
    write_json(Path(sys.argv[2]), int(sys.argv[1]), meshed="meshed" in sys.argv[3:])
