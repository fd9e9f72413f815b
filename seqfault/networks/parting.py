"""Which parts of a graph fall apart when elements are taken out of it, many times over."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence

import networkx as nx
import numpy as np

from seqfault.model.elements import Bools, Ints


class Joined:
    """A graph of ``size`` nodes: ``ends`` (2, e) of its edges, each of an element in ``owners`` (e,).

    ``label`` (size,) tells the parts; ``of`` gives the edges of an element.
    """

    def __init__(self, size: int, ends: Ints, owners: Iterable[str]) -> None:
        self.size, self.ends = size, ends
        of: dict[str, list[int]] = {}
        for k, name in enumerate(owners):
            of.setdefault(name, []).append(k)
        self.of: Mapping[str, list[int]] = of
        self.label = components_of(size, ends)
        graph = nx.Graph()
        graph.add_nodes_from(range(size))
        graph.add_edges_from(ends.T.tolist())
        self._bridge = _bridges(graph, ends)
        self._order, self._first, self._count = _depth_first(graph, self.label)

    def without(self, names: Sequence[str]) -> Ints:
        """Labels (size,) of the parts without the elements ``names``; ``label`` itself where none parts."""
        gone = [k for name in names for k in self.of.get(name, ())]
        if not gone or (len(gone) == 1 and not self._bridge[gone[0]]):
            return self.label  # the rest still joins what one edge on a loop has joined
        if len(gone) == 1:
            return self._cut(gone[0])
        stays = np.ones(self.ends.shape[1], bool)
        stays[gone] = False
        return components_of(self.size, self.ends[:, stays])

    def _cut(self, edge: int) -> Ints:
        """The labels where ``edge``, a bridge, is cut: the side below it stands in a row of the order."""
        below = max(self.ends[:, edge].tolist(), key=lambda node: self._first[node])
        out = self.label.copy()
        start = self._first[below]
        out[self._order[start : start + self._count[below]]] = self.size
        return out


def components_of(size: int, ends: Ints) -> Ints:
    """Labels (size,) of what ``ends`` (2, e) join; scipy at any size, since many are asked for."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import connected_components

    graph = csr_array((np.ones(ends.shape[1], np.int8), (ends[0], ends[1])), shape=(size, size))
    return np.asarray(connected_components(graph, directed=False)[1], np.int64)


def _bridges(graph: nx.Graph[int], ends: Ints) -> Bools:
    """Whether each edge (e,) is the only way between its ends."""
    pairs = [(min(i, j), max(i, j)) for i, j in ends.T.tolist()]
    count = Counter(pairs)
    loops = [(i, j) for i, j in pairs if i == j]
    graph.remove_edges_from(loops)
    alone = {(min(i, j), max(i, j)) for i, j in nx.bridges(graph)}
    return np.array([pair in alone and count[pair] == 1 for pair in pairs], bool)


def _depth_first(graph: nx.Graph[int], label: Ints) -> tuple[Ints, Ints, Ints]:
    """Nodes depth first, where each is ``first`` (size,), and ``count`` (size,) of it and all below."""
    order: list[int] = []
    count = np.ones(len(label), np.int64)
    for root in np.unique(label, return_index=True)[1].tolist():
        tree = list(nx.dfs_edges(graph, root))
        order += [root, *(child for _, child in tree)]
        for parent, child in reversed(tree):
            count[parent] += count[child]
    first = np.empty(len(label), np.int64)
    first[order] = np.arange(len(label))
    return np.array(order, np.int64), first, count
