"""Bus couplers and section switches: a closed tie makes its two buses one node."""

from __future__ import annotations

from collections.abc import Mapping

import networkx as nx
import numpy as np

from seqfault.case.records import Case, Tie
from seqfault.model.elements import ClosedTies, Ints


def _closed(case: Case, index: Mapping[str, int]) -> dict[str, Tie]:
    return {
        name: tie
        for name, tie in case.ties.items()
        if tie.closed and not tie.out and tie.from_ in index and tie.to in index
    }


def merged_nodes(case: Case, index: Mapping[str, int]) -> Ints:
    """Node number (n,) of each bus, buses joined by closed ties sharing one."""
    ties = _closed(case, index)
    if not ties:
        return np.arange(len(index))
    graph = nx.empty_graph(len(index))
    graph.add_edges_from((index[tie.from_], index[tie.to]) for tie in ties.values())
    first = np.arange(len(index))
    for members in nx.connected_components(graph):
        first[list(members)] = min(members)
    return np.unique(first, return_inverse=True)[1].astype(np.int64)


def closed_ties(case: Case, index: Mapping[str, int]) -> ClosedTies:
    """The closed ties, and which buses lie on the ``from`` side of each."""
    ties = _closed(case, index)
    graph = nx.MultiGraph()
    for name, tie in ties.items():
        graph.add_edge(index[tie.from_], index[tie.to], key=name)
    side: list[Ints | None] = []
    for name, tie in ties.items():
        a, b = index[tie.from_], index[tie.to]
        graph.remove_edge(a, b, key=name)
        near = nx.node_connected_component(graph, a)
        side.append(None if b in near else np.array(sorted(near), np.int64))
        graph.add_edge(a, b, key=name)
    ends = np.array([[index[t.from_], index[t.to]] for t in ties.values()], np.int64)
    return ClosedTies(tuple(ties), ends.reshape(-1, 2).T, tuple(side))
