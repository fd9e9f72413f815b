"""Voltage zones: which buses hang together, who feeds them, and the clock each stands at."""

from __future__ import annotations

import sys
from collections.abc import Sequence

import networkx as nx
import numpy as np

from seqfault.errors import quoted
from seqfault.model.elements import Bools, Ints

LARGE, SMALL = 2000, 300
"""Graphs of more nodes go through scipy; those between where it is imported already."""


def components(n: int, first: Ints, second: Ints) -> Ints:
    """Labels 0, 1, … of the connected components of ``n`` nodes under the edges first–second.

    Labels follow the first node of each component. Small graphs go through networkx, large ones
    through scipy.sparse.csgraph, whose import alone costs more than a small case.
    """
    if n > LARGE or (n > SMALL and "scipy.sparse" in sys.modules):
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import connected_components

        edges = coo_array((np.ones(len(first), np.int8), (first, second)), shape=(n, n))
        label = np.asarray(connected_components(edges, directed=False)[1], np.int64)
        found, start = np.unique(label, return_index=True)
        rank = np.empty(len(found), np.int64)
        rank[np.argsort(start)] = np.arange(len(found))
        return rank[label]
    graph = nx.empty_graph(n)
    graph.add_edges_from(zip(first.tolist(), second.tolist(), strict=True))
    label = np.empty(n, np.int64)
    for number, nodes in enumerate(nx.connected_components(graph)):  # in the order of the nodes
        label[list(nodes)] = number
    return label


def displacements(
    zone: Ints, hv: Ints, lv: Ints, clock: Ints, names: Sequence[str]
) -> tuple[Ints, list[str]]:
    """Clock of each bus behind the first bus of its part, and a complaint for each loop that misfits.

    ``zone`` (n,) labels buses joined by lines; unit ``names[k]`` joins zone ``hv[k]`` to ``lv[k]``,
    whose voltages lag by ``clock[k]`` twelfths of a turn.
    """
    zones = int(zone.max()) + 1 if len(zone) else 0
    near, far = np.stack([hv, lv], axis=1).ravel(), np.stack([lv, hv], axis=1).ravel()
    order = np.argsort(near, kind="stable")
    start = np.searchsorted(near[order], np.arange(zones + 1)).tolist()
    beyond, unit = far[order].tolist(), (order // 2).tolist()
    step = np.stack([clock, -clock], axis=1).ravel()[order].tolist()
    at, from_, by = [-1] * zones, [-1] * zones, [-1] * zones  # clock, and the way there
    for root in range(zones):
        if at[root] >= 0:
            continue
        at[root] = 0
        queue = [root]
        for here in queue:
            for k in range(start[here], start[here + 1]):
                there = beyond[k]
                if at[there] < 0:
                    at[there] = (at[here] + step[k]) % 12
                    from_[there], by[there] = here, unit[k]
                    queue.append(there)
    turns = np.array(at, np.int64)
    misfits = (turns[hv] + clock - turns[lv]) % 12 if zones else np.zeros(0, np.int64)
    complaints = []
    for k in np.flatnonzero(misfits).tolist():
        others = _between(int(hv[k]), int(lv[k]), from_, by)
        complaints.append(_misfit([names[o] for o in others] + [names[k]], int(misfits[k])))
    return turns[zone], complaints


def _between(a: int, b: int, from_: list[int], by: list[int]) -> list[int]:
    """Units on the way from zone ``a`` to zone ``b`` in the tree walked ``from_`` zones ``by`` units."""

    def up(zone: int) -> list[tuple[int, int]]:
        path = []
        while from_[zone] >= 0:
            path.append((from_[zone], by[zone]))
            zone = from_[zone]
        return path

    left, right = up(a), up(b)
    while left and right and left[-1] == right[-1]:
        left.pop()
        right.pop()
    return [unit for _, unit in left] + [unit for _, unit in reversed(right)]


def _misfit(names: list[str], misfit: int) -> str:
    hours = min(misfit, 12 - misfit)
    loop = ", ".join(quoted(name) for name in names)
    if hours == 6:
        return (
            f"transformers {loop}: the loop closes with reversed polarity (180 degrees): one of these"
            " vector groups is wrong, its clock number off by 6"
        )
    return (
        f"transformers {loop}: the clock numbers round this loop leave {hours} of 12"
        f" ({hours * 30} degrees) open: they cannot be connected in parallel; check the vector groups"
    )


def live_buses(part: Ints, source: Ints) -> Bools:
    """Which buses (n,) belong to a part with a source; ``source`` lists the buses of the sources."""
    return np.isin(part, part[source])
