"""Which parts of a graph fall apart when elements are taken out of it, many times over."""

from __future__ import annotations

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
        self._bridge = _bridges(ends)

    def without(self, names: Sequence[str]) -> Ints:
        """Labels (size,) of the parts without the elements ``names``."""
        gone = [k for name in names for k in self.of.get(name, ())]
        if not gone or (len(gone) == 1 and not self._bridge[gone[0]]):
            return self.label  # the rest still joins what one edge on a loop has joined
        stays = np.ones(self.ends.shape[1], bool)
        stays[gone] = False
        return components_of(self.size, self.ends[:, stays])


def components_of(size: int, ends: Ints) -> Ints:
    """Labels (size,) of what ``ends`` (2, e) join; scipy at any size, since many are asked for."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import connected_components

    graph = csr_array((np.ones(ends.shape[1], np.int8), (ends[0], ends[1])), shape=(size, size))
    return np.asarray(connected_components(graph, directed=False)[1], np.int64)


def _bridges(ends: Ints) -> Bools:
    """Whether each edge (e,) is the only way between its ends."""
    pairs = [(min(i, j), max(i, j)) for i, j in zip(*ends.tolist(), strict=True)]
    graph = nx.Graph()
    count: dict[tuple[int, int], int] = {}
    for pair in pairs:
        count[pair] = count.get(pair, 0) + 1
        if pair[0] != pair[1]:
            graph.add_edge(*pair)
    alone = {(min(i, j), max(i, j)) for i, j in nx.bridges(graph)}
    return np.array([pair in alone and count[pair] == 1 for pair in pairs], bool)
