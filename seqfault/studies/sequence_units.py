"""Transformers and machines of one sequence network as branches.

A unit becomes its star of branches, or one branch where two windings or one are left. A star point that
one winding alone ends in lies in series with it as 3 Zn; one that several share is a node.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from seqfault.model.elements import DELTA, STAR, Bools, Complex, Floats, Ints, Model, WindingSets
from seqfault.model.windings import Incidence, incidence, without_current
from seqfault.networks.assembly import star_admittances
from seqfault.studies.sequence_links import EARTH, NIL, Links, Terminal


@dataclass(frozen=True, eq=False)
class _Stars:
    """``device`` (k,) per-unit admittance to earth; ``node`` (k,); ``series`` (k,) 3 Zn drawn in series."""

    names: tuple[str, ...]
    device: Complex
    node: Ints
    series: Bools


def unit_links(model: Model, sequence: int, out: Links) -> None:
    """Add the units of ``model``, and in zero sequence what joins star points to earth."""
    every = [(sets, incidence(sets, sequence, model.stars.node)) for sets in model.winding_sets]
    stars = _stars(model, every if sequence == 0 else [])
    for sets, inc in every:
        for unit in range(len(sets.names)):
            _unit(sets, inc, unit, sequence, stars, out)
    if sequence == 0:
        drawn = (stars.node >= 0) & (stars.device != 0) & ~stars.series
        for k in np.flatnonzero(drawn).tolist():
            out.add((int(stars.node[k]), 1.0), EARTH, 1 / stars.device[k], (stars.names[k],), "3Zn")


def _stars(model: Model, every: Sequence[tuple[WindingSets, Incidence]]) -> _Stars:
    """Star points, those in series found: one winding ends there, and its unit has another star."""
    users = np.zeros(len(model.stars.names), np.int64)
    beside = np.zeros(len(users), bool)
    for sets, inc in every:
        carries = (inc.admittance != 0).any(axis=2) & (sets.kind == STAR) & (sets.star >= 0)
        np.add.at(users, sets.star[carries], 1)
        beside[sets.star[carries & (carries.sum(axis=1) > 1)[:, None]]] = True
    return _Stars(model.stars.names, star_admittances(model), model.stars.node, (users == 1) & beside)


def _unit(sets: WindingSets, inc: Incidence, unit: int, sequence: int, stars: _Stars, out: Links) -> None:
    y, star, node = inc.admittance[unit], sets.star[unit], inc.node[unit]
    apart = (node[:, 1] >= 0) & (y != 0).any(axis=1)  # ends in a star point that is no earth
    series = np.zeros(len(star), bool)
    series[apart] = stars.series[star[apart]]
    idle = series.copy()
    idle[series] = stars.device[star[series]] == 0  # its neutral is out of service
    y = without_current(y[None], idle[None])[0]
    delta = (sets.kind[unit] == DELTA) & (sequence == 0)
    active = np.flatnonzero((y != 0).any(axis=1) & ~delta).tolist()
    if not active:
        return
    matrix = y[np.ix_(active, active)]  # the deltas' voltages are zero
    own = (sets.names[unit],)
    if (apart & ~series)[active].any() and len(active) > 1:
        out.mesh(*_nodal(matrix, node[active], inc.weight[unit][active]), own, "mesh")
        for w in np.flatnonzero(series).tolist():  # in a mesh its star point is a node like the others
            if stars.device[star[w]] != 0:
                z = 1 / stars.device[star[w]]
                out.add((int(node[w, 1]), 1.0), EARTH, z, (stars.names[star[w]],), "3Zn")
        return
    ends = [(int(node[w, 0]), float(inc.weight[unit, w, 0])) for w in active]
    if len(active) == 1:
        w = active[0]
        back = (int(node[w, 1]), -float(inc.weight[unit, w, 1])) if node[w, 1] >= 0 else EARTH
        out.add(ends[0], back, 1 / matrix[0, 0], own, sets.sides[w] or "whole")
        return
    behind: list[list[Segment]] = [[] for _ in active]
    for k, w in enumerate(active):
        if series[w]:
            z = inc.weight[unit, w, 1] ** 2 / stars.device[star[w]]
            behind[k].append((complex(z), (stars.names[star[w]],), "3Zn"))
    least = NIL * np.abs(matrix).max()
    if len(active) == 2 and (np.abs(matrix.sum(axis=1)) <= least).all():
        through: Segment = (complex(-1 / matrix[0, 1]), own, "whole")
        _chain(out, ends[0], [through, *behind[0], *behind[1]], ends[1])
        return
    back_side = "tv" if delta.any() else "magnetising"
    parts = [*(sets.sides[w] for w in active), *([back_side] if len(active) == 2 else [])]
    arms: list[list[Segment]] = [[(z, own, part)] for z, part in zip(_star(matrix), parts, strict=True)]
    for arm, more in zip(arms, behind, strict=False):
        arm += more
    _spread(out, sets.names[unit], [*ends, EARTH][: len(arms)], arms)


Segment = tuple[complex, tuple[str, ...], str]
"""Impedance, the records it is of, and the part of them."""


def _star(matrix: Complex) -> list[complex]:
    """Arms of the star that the short-circuit admittances (w, w) make, the one to earth last.

    Two windings are a T; three, whose rows sum to zero, a star without a branch to earth.
    """
    if len(matrix) == 2:
        z = np.linalg.inv(matrix)
        return [complex(z[0, 0] - z[0, 1]), complex(z[1, 1] - z[0, 1]), complex(z[0, 1])]
    y = -matrix
    cross = [y[1, 2], y[0, 2], y[0, 1]]
    total = cross[0] * cross[1] + cross[0] * cross[2] + cross[1] * cross[2]
    return [complex(each / total) for each in cross]


def _spread(out: Links, name: str, ends: Sequence[Terminal], arms: Sequence[Sequence[Segment]]) -> None:
    """Arms from their ends to the middle of a unit, which is an end itself where an arm has none."""
    least = NIL * max(abs(z) for arm in arms for z, _, _ in arm)
    kept = [[segment for segment in arm if abs(segment[0]) > least] for arm in arms]
    bare = next((k for k, arm in enumerate(kept) if not arm), None)
    middle = out.internal(name) if bare is None else ends[bare]
    for k, (end, arm) in enumerate(zip(ends, kept, strict=True)):
        if k != bare:
            _chain(out, end, arm, middle)


def _chain(out: Links, start: Terminal, segments: Sequence[Segment], end: Terminal) -> None:
    """Segments in series from ``start`` to ``end``."""
    here = start
    for k, (z, elements, part) in enumerate(segments):
        there = end if k == len(segments) - 1 else out.internal(segments[0][1][0])
        out.add(here, there, z, elements, part)
        here = there


def _nodal(matrix: Complex, node: Ints, weight: Floats) -> tuple[Complex, list[Terminal]]:
    """Nodal matrix of windings (w, w) between the nodes they end in, and those nodes.

    ``node`` and ``weight`` (w, 2) bus and star point.
    """
    at: dict[int, float] = {}
    for row, own in zip(node.tolist(), weight.tolist(), strict=True):
        for k, factor in zip(row, (own[0], -own[1]), strict=True):
            if k >= 0:
                at.setdefault(k, factor)
    place = {k: column for column, k in enumerate(at)}
    turn = np.zeros((len(node), len(at)))
    for w, (row, own) in enumerate(zip(node.tolist(), weight.tolist(), strict=True)):
        for k, factor in zip(row, own, strict=True):
            if k >= 0:
                turn[w, place[k]] += factor
    return turn.T @ matrix @ turn, list(at.items())
