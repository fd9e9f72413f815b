"""One sequence network as a graph of its strong elements, for what falls apart when some are taken out."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.model.elements import Bools, Ints, Model
from seqfault.model.windings import incidence
from seqfault.networks.connectivity import held_windings


class Edges(msgspec.Struct, frozen=True, eq=False):
    """What strong elements join, earth as the last node: ``ends`` (2, e), the ``owners`` (e,) of the edges,
    and ``hard`` (e,) edges of conditions on more than two nodes."""

    ends: Ints
    owners: tuple[str, ...]
    hard: Bools


def strong_edges(model: Model, sequence: int) -> Edges:
    """The strong elements of sequence 0, 1 or 2 as edges between nodes and earth."""
    earth = model.nodes if sequence == 0 else model.common
    firsts: list[Ints] = []
    seconds: list[Ints] = []
    owners: list[str] = []
    hard: list[Bools] = []

    def join(names: Sequence[str], first: Ints, second: Ints, difficult: Bools) -> None:
        firsts.append(np.where(first < 0, earth, first))
        seconds.append(np.where(second < 0, earth, second))
        owners.extend(names)
        hard.append(difficult)

    sources = model.sources
    fed = sources.admittance[sequence] != 0
    names = [name for name, there in zip(sources.names, fed, strict=True) if there]
    join(names, sources.node[fed], np.full(len(names), earth), np.zeros(len(names), bool))
    lines = model.lines
    stands = np.flatnonzero((lines.nodes >= 0).all(axis=0))
    first, second = lines.nodes[:, stands]
    join([lines.names[k] for k in stands.tolist()], first, second, np.zeros(len(stands), bool))
    for sets in model.winding_sets:
        inc = incidence(sets, sequence, model.stars.node)
        for unit, winding, other in held_windings(sets, sequence):
            if not len(unit):
                continue
            which = [winding] if other is None else [winding, other]
            node = np.where(inc.weight[unit][:, which] != 0, inc.node[unit][:, which], -1)
            node = np.sort(node.reshape(len(unit), -1), axis=1)[:, ::-1]
            count = (node >= 0).sum(axis=1)
            named = [sets.names[k] for k in unit.tolist()]
            for j in range(1, node.shape[1]):
                needed = (count > j) if j > 1 else (count > 0)
                join(
                    [name for name, there in zip(named, needed, strict=True) if there],
                    node[needed, 0],
                    node[needed, j],
                    (count > 2)[needed],
                )
    ends = np.stack([np.concatenate(firsts), np.concatenate(seconds)])
    return Edges(ends, tuple(owners), np.concatenate(hard))


def coupled_edges(model: Model, sequence: int) -> Edges:
    """Edges between all nodes of one unit: its windings share a core, joined or not."""
    firsts, seconds = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
    owners: list[str] = []
    for sets in model.winding_sets:
        inc = incidence(sets, sequence, model.stars.node)
        carries = (inc.admittance != 0).any(axis=2)[:, :, None]
        node = np.where((inc.weight != 0) & carries, inc.node, -1).reshape(
            len(sets.names), 2 * carries.shape[1]
        )
        head = node.max(axis=1, initial=-1)[:, None]
        unit, place = np.nonzero((node >= 0) & (node != head))
        firsts.append(head[unit, 0])
        seconds.append(node[unit, place])
        owners += [sets.names[k] for k in unit.tolist()]
    ends = np.stack([np.concatenate(firsts), np.concatenate(seconds)])
    return Edges(ends, tuple(owners), np.zeros(len(owners), bool))


def couplings(model: Model, sequence: int) -> Edges:
    """Edges between the lines of each coupled group; they stay in every outage, so pieces may be large."""
    firsts, seconds = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
    for group in model.lines.coupled if sequence == 0 else ():
        nodes = model.lines.nodes[:, group.line].ravel()
        nodes = nodes[nodes >= 0]
        firsts.append(nodes[:-1])
        seconds.append(nodes[1:])
    ends = np.stack([np.concatenate(firsts), np.concatenate(seconds)])
    return Edges(ends, ("",) * ends.shape[1], np.zeros(ends.shape[1], bool))


def once_each(*each: Edges) -> tuple[Ints, list[str]]:
    """Ends (2, e) and owners (e,) of all edges, every pair of nodes once for each owner."""
    ends = np.concatenate([edges.ends for edges in each], axis=1)
    owners = [name for edges in each for name in edges.owners]
    first: dict[tuple[str, int, int], int] = {}
    for k, (i, j) in enumerate(ends.T.tolist()):
        first.setdefault((owners[k], min(i, j), max(i, j)), k)
    kept = list(first.values())
    return ends[:, kept], [owners[k] for k in kept]
