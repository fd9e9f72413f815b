"""One sequence network as branches: the stamps of the model taken apart into what can be drawn.

A link is an impedance between two weighted potentials, z i = w_a v_a − w_b v_b; the weights are those of
winding incidence, 1 for a line. Per unit on the base of each bus.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from seqfault.model.elements import Complex, CoupledLines, Model

REFERENCE = -1
EARTH = (REFERENCE, 1.0)
NIL = 1e-12
"""Admittances and impedances below this share of a unit's largest are structurally zero."""


@dataclass(frozen=True)
class Link:
    """A branch of impedance ``z`` between nodes ``start`` and ``end`` (−1 the reference).

    ``weight`` of the two potentials; ``elements`` the records it stands for, ``part`` which part of
    them: ``whole``, a winding (``hv``, ``lv``, ``tv``), ``magnetising``, ``3Zn``, ``capacitance``,
    ``mutual`` or ``coupled`` (of lines), ``mesh`` (one branch of a unit that has no star equivalent).
    """

    start: int
    end: int
    z: complex
    elements: tuple[str, ...]
    part: str = "whole"
    weight: tuple[float, float] = (1.0, 1.0)


Terminal = tuple[int, float]
"""A node and the weight of its potential."""


@dataclass
class Links:
    """Links of one sequence; ``inside`` names nodes within units, numbered from ``nodes`` on."""

    nodes: int
    rows: list[Link] = field(default_factory=list)
    inside: list[str] = field(default_factory=list)

    def internal(self, name: str) -> Terminal:
        """A new node inside the unit or group ``name``."""
        self.inside.append(name)
        return self.nodes + len(self.inside) - 1, 1.0

    def add(
        self, start: Terminal, end: Terminal, z: complex, elements: tuple[str, ...], part: str = "whole"
    ) -> None:
        """A link from ``start`` to ``end``, turned so that the reference is always the end."""
        if start[0] == REFERENCE:
            start, end = end, start
        self.rows.append(Link(start[0], end[0], complex(z), elements, part, (start[1], end[1])))

    def mesh(self, matrix: Complex, at: Sequence[Terminal], elements: tuple[str, ...], part: str) -> None:
        """The symmetric nodal ``matrix`` (n, n) between distinct nodes as a mesh of links.

        The weights of ``at`` say which potentials are alike, so that the mesh has no needless
        branches to the reference.
        """
        w = np.array([weight for _, weight in at])
        y = matrix / w[:, None] / w[None, :]
        least = NIL * np.abs(y).max(initial=0.0)
        for a in range(len(at)):
            for b in range(a):
                if abs(y[a, b]) > least:
                    self.add(at[b], at[a], -1 / y[a, b], elements, part)
            rest = y[a].sum()
            if abs(rest) > least:
                self.add(at[a], EARTH, 1 / rest, elements, part)


def line_links(model: Model, sequence: int, out: Links) -> None:
    """Add what needs no winding: infeeds, motors, lines, series reactors, capacitances."""
    _sources(model, sequence, out)
    _lines(model, sequence, out)
    _capacitances(model, sequence, out)


def _sources(model: Model, sequence: int, out: Links) -> None:
    sources = model.sources
    for k in np.flatnonzero(sources.admittance[sequence] != 0).tolist():
        out.add(
            (int(sources.node[k]), 1.0), EARTH, 1 / sources.admittance[sequence, k], (sources.names[k],)
        )


def _capacitances(model: Model, sequence: int, out: Links) -> None:
    """All capacitances at one node as one branch."""
    lines, banks = model.lines, model.capacitances
    at: dict[int, tuple[complex, dict[str, None]]] = {}

    def add(node: int, y: complex, name: str) -> None:
        if node >= 0 and y != 0:
            total, names = at.get(node, (0j, {}))
            at[node] = (total + y, {**names, name: None})

    for k, name in enumerate(lines.names):
        for end in lines.nodes[:, k].tolist():
            add(end, complex(lines.shunt[sequence, k]), name)
    for k, name in enumerate(banks.names):
        add(int(banks.node[k]), complex(banks.admittance[sequence, k]), name)
    for node, (y, names) in at.items():
        out.add((node, 1.0), EARTH, 1 / y, tuple(names), "capacitance")


def _lines(model: Model, sequence: int, out: Links) -> None:
    lines = model.lines
    single = np.asarray((lines.nodes >= 0).all(axis=0), bool)
    if sequence == 0:
        for group in lines.coupled:
            single[group.line] = False
            _coupled(model, group, out)
    for k in np.flatnonzero(single).tolist():
        a, b = lines.nodes[:, k].tolist()
        out.add((a, 1.0), (b, 1.0), lines.series[sequence, k], (lines.names[k],))


def _coupled(model: Model, group: CoupledLines, out: Links) -> None:
    """Coupled lines: of two that share a node its star with the mutual impedance, else a mesh."""
    lines = model.lines
    ends = lines.nodes[:, group.line]
    names = tuple(lines.names[k] for k in group.line.tolist())
    common = set(ends[:, 0].tolist()) & set(ends[:, 1].tolist()) if len(names) == 2 else set()
    here = max(common, default=REFERENCE)
    if here != REFERENCE:
        z = np.linalg.inv(group.admittance)
        place = [ends[:, k].tolist().index(here) for k in (0, 1)]
        mutual = complex(z[0, 1]) * (1 if place[0] == place[1] else -1)
        own = [complex(z[k, k]) - mutual for k in (0, 1)]
        if min(abs(mutual), *map(abs, own)) > NIL * abs(z).max():
            middle = out.internal(names[0])
            out.add((here, 1.0), middle, mutual, names, "mutual")
            for k in (0, 1):
                out.add(middle, (int(ends[1 - place[k], k]), 1.0), own[k], (names[k],), "coupled")
            return
    nodes = np.unique(ends[ends >= 0])
    meet = np.zeros((len(nodes), len(names)))
    for sign, end in ((1, ends[0]), (-1, ends[1])):
        standing = np.flatnonzero(end >= 0)
        meet[np.searchsorted(nodes, end[standing]), standing] += sign
    out.mesh(meet @ group.admittance @ meet.T, [(int(n), 1.0) for n in nodes], names, "coupled")
