"""Voltage zones: which buses hang together, who feeds them, and the clock each stands at."""

from __future__ import annotations

from collections.abc import Sequence

import networkx as nx
import numpy as np

from seqfault.errors import quoted
from seqfault.model.elements import Bools, Ints

LARGE = 300


def components(n: int, first: Ints, second: Ints) -> Ints:
    """Labels 0, 1, … of the connected components of ``n`` nodes under the edges first–second.

    Labels follow the first node of each component. Small graphs go through networkx, large ones
    through scipy.sparse.csgraph, whose import alone costs more than a small case.
    """
    if n > LARGE:
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
    beyond: list[list[tuple[int, int, int]]] = [[] for _ in range(zones)]  # neighbour, unit, its clock
    for k, (a, b, lag) in enumerate(zip(hv.tolist(), lv.tolist(), clock.tolist(), strict=True)):
        beyond[a].append((b, k, lag))
        beyond[b].append((a, k, -lag))
    at: list[int | None] = [None] * zones
    above: dict[int, tuple[int, int]] = {}
    for root in range(zones):
        if at[root] is not None:
            continue
        at[root] = 0
        queue = [(root, 0)]
        for here, turn in queue:
            for there, k, step in beyond[here]:
                if at[there] is None:
                    at[there] = (turn + step) % 12
                    above[there] = (here, k)
                    queue.append((there, (turn + step) % 12))
    turns = np.array(at, np.int64)
    misfits = (turns[hv] + clock - turns[lv]) % 12 if zones else np.zeros(0, np.int64)
    complaints = []
    for k in np.flatnonzero(misfits).tolist():
        others = _between(int(hv[k]), int(lv[k]), above)
        complaints.append(_misfit([names[o] for o in others] + [names[k]], int(misfits[k])))
    return turns[zone], complaints


def _between(a: int, b: int, above: dict[int, tuple[int, int]]) -> list[int]:
    """Units on the way from zone ``a`` to zone ``b`` in the walked tree."""

    def up(zone: int) -> list[tuple[int, int]]:
        path = []
        while zone in above:
            parent, unit = above[zone]
            path.append((parent, unit))
            zone = parent
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
