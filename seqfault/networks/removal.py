"""Networks without one element, or a few, by low-rank updates of the factors of the whole.

The elements taken out are branches U with admittances C on their nodes N. What is left is looked at a
piece at a time, a piece being what strong elements still join or windings on one core couple. Of the
currents that one unit into a node of a piece sends into the removed elements, with all that hangs behind
them, H holds those at the nodes K that elements and piece share: H = (U C Uᵀ Z)_KK. Without elements and
what hangs behind them

    Z' = Z + Z_K W Z_Kᵀ,   W = H (I − H)⁻¹ Z_KK⁻¹,

and where nothing hangs behind, W = U (C⁻¹ − Uᵀ Z U)⁻¹ Uᵀ: M. A. Woodbury, "Inverting Modified Matrices",
Princeton 1950 (from memory). Z is bordered, so floating parts are solved as well as others. What falls
apart or loses its earth is found from the elements, never from a small denominator; where an update
would lose digits, ``without`` says why, and the network is to be built without the element.
"""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.model.elements import Bools, Complex, Floats, Ints, Model
from seqfault.model.windings import Incidence, incidence
from seqfault.networks.connectivity import held_windings, joined_parts
from seqfault.networks.factors import SequenceFactor
from seqfault.networks.parting import Joined, components_of

BLOCK = 32
"""Columns solved at a time."""
LEFT = 1e-3
"""Share of what earths a floating piece that must be left for an update to keep its digits."""
ROUNDING = 1e-8
"""Bound on what rounding may do to an update; it does less by a factor of ten or more."""
BLIND = 1e-9
"""A free potential that an element sees by less than this is one it does not see."""


class _Branches(msgspec.Struct, frozen=True, eq=False):
    """Removed branches: ``nodes`` (k,), ``drop`` (k, r) voltages of the branches, ``admittance`` (r, r),
    ``shunt`` (k,) what the elements join to earth at each node."""

    nodes: Ints
    drop: Complex
    admittance: Complex
    shunt: Complex


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


def _once(*each: Edges) -> tuple[Ints, list[str]]:
    """Ends (2, e) and owners (e,) of all edges, every pair of nodes once for each owner."""
    ends = np.concatenate([edges.ends for edges in each], axis=1)
    owners = [name for edges in each for name in edges.owners]
    first: dict[tuple[str, int, int], int] = {}
    for k, (i, j) in enumerate(ends.T.tolist()):
        first.setdefault((owners[k], min(i, j), max(i, j)), k)
    kept = list(first.values())
    return ends[:, kept], [owners[k] for k in kept]


def driving_points(factor: SequenceFactor, nodes: Ints) -> tuple[Complex, Bools]:
    """Driving-point impedances (r,) of ``nodes``, and where they are infinite."""
    return _driving_points(factor, nodes, factor.columns(nodes))


def _driving_points(factor: SequenceFactor, nodes: Ints, columns: Complex) -> tuple[Complex, Bools]:
    each = [nodes[[k]] for k in range(len(nodes))]
    z = [factor.port_impedance(node, columns[:, [k]])[0, 0] for k, node in enumerate(each)]
    infinite = [bool(factor.slack_at(node)[1]) for node in each]
    return np.array(z, complex), np.array(infinite, bool)


class SequenceRemovals:
    """One sequence network, and its driving-point impedances at ``chosen`` nodes without elements.

    Costs a column of the inverse for every chosen node; after that an outage costs the columns of its
    own nodes, and small matrices.
    """

    def __init__(self, model: Model, factor: SequenceFactor, sequence: int, chosen: Ints) -> None:
        self._model, self._factor, self._sequence, self.chosen = model, factor, sequence, chosen
        self._columns = factor.columns(chosen)
        self._edges = strong_edges(model, sequence)
        self._size = factor.size + 1
        self._joined = Joined(self._size, self._edges.ends, self._edges.owners)
        self._label = self._joined.label
        cores = coupled_edges(model, sequence)
        ends, owners = (
            np.concatenate([self._edges.ends, cores.ends], axis=1),
            self._edges.owners + cores.owners,
        )
        self._near = Joined(self._size, ends, owners)
        metal = (self._edges.ends != factor.size).all(axis=0)
        every = np.arange(factor.size)
        beside = np.stack([every, self._size + joined_parts(model, sequence, every, factor.size)])
        ends = np.concatenate([self._edges.ends[:, metal], beside], axis=1)
        self._beside_earth = components_of(2 * self._size, ends)[: self._size]
        self._hard = self._hard_components()
        self._incidence = [incidence(s, sequence, model.stars.node) for s in model.winding_sets]
        self._line = {name: k for k, name in enumerate(model.lines.names)}
        self._units: dict[str, list[tuple[int, int]]] = {}
        for s, sets in enumerate(model.winding_sets):
            for k, name in enumerate(sets.names):
                self._units.setdefault(name, []).append((s, k))
        groups = model.lines.coupled if sequence == 0 else ()
        self._coupled = {model.lines.names[k] for group in groups for k in group.line.tolist()}
        coupled = [model.lines.nodes[:, group.line].ravel() for group in groups]
        self._beside = np.concatenate(coupled) if coupled else np.zeros(0, np.int64)
        self.whole, self.infinite = _driving_points(factor, chosen, self._columns)
        part = factor.free.part[chosen]
        bare = (factor.free.dimension == 1) & ~factor.resonant  # nothing taken out can earth these
        self._unearthed: Bools = self.infinite & (part >= 0)
        self._unearthed[part >= 0] &= bare[part[part >= 0]]

    def _hard_components(self) -> Bools:
        """Components (c,) whose free potentials this view of the elements cannot tell."""
        free, label, apart = self._factor.free, self._label, self._beside_earth
        out = np.zeros(int(apart.max()) + 1, bool)
        out[apart[self._edges.ends[0, self._edges.hard]]] = True
        floating = label[:-1] != label[-1]
        odd = floating != (free.part >= 0)
        several = np.zeros(len(free.part), bool)
        inside = free.part >= 0
        several[inside] = free.dimension[free.part[inside]] > 1
        out[apart[:-1][odd | several]] = True
        return out

    def _touches_slack(self, nodes: Ints) -> bool:
        return bool(self._factor.slack_at(nodes)[1])

    def prepare(self, outages: Sequence[Sequence[str]]) -> None:
        """Solve at once for the nodes of all ``outages``, which are then asked for one by one."""
        self._made = {tuple(names): self.branches(names) for names in outages}
        reached = np.zeros(int(self._beside_earth.max()) + 1, bool)
        reached[self._beside_earth[self.chosen[~self._unearthed]]] = True
        nodes = {
            node
            for made in self._made.values()
            if reached[self._beside_earth[made.nodes]].any()  # no other outage changes anything here
            for node in made.nodes.tolist()
        }
        self._prepared = np.array(sorted(nodes), np.int64)
        m = len(self._prepared)
        self._block = np.zeros((m, m), complex)
        for start in range(0, m, BLOCK):
            stop = min(start + BLOCK, m)
            self._block[:, start:stop] = self._factor.columns(self._prepared[start:stop])[self._prepared]

    def _between(self, nodes: Ints) -> Complex:
        """Entries of G between ``nodes``, those of an outage that was prepared."""
        at = np.searchsorted(self._prepared, nodes)
        return np.asarray(self._block[np.ix_(at, at)])

    def branches(self, names: Sequence[str]) -> _Branches:
        """The branches of the elements ``names`` on the nodes they stand at."""
        drops: list[dict[int, complex]] = []
        blocks: list[Complex] = []
        shunts: dict[int, complex] = {}
        lines = self._model.lines
        for name in names:
            if name in self._line:
                k = self._line[name]
                ends = lines.nodes[:, k].tolist()
                if ends[0] != ends[1]:  # a closed tie beside it carries all
                    drops.append({ends[0]: 1, ends[1]: -1})
                    blocks.append(np.array([[1 / lines.series[self._sequence, k]]]))
                for end in ends:
                    shunts[end] = shunts.get(end, 0) + complex(lines.shunt[self._sequence, k])
            for s, k in self._units.get(name, ()):
                _of_unit(self._incidence[s], k, drops, blocks)
        for node, y in shunts.items():
            if y:
                drops.append({node: 1})
                blocks.append(np.array([[y]]))
        nodes = sorted({node for each in drops for node in each})
        at = {node: k for k, node in enumerate(nodes)}
        drop = np.zeros((len(nodes), len(drops)), complex)
        for r, each in enumerate(drops):
            for node, weight in each.items():
                drop[at[node], r] = weight
        admittance = np.zeros((len(drops), len(drops)), complex)
        start = 0
        for block in blocks:
            stop = start + len(block)
            admittance[start:stop, start:stop] = block
            start = stop
        shunt = np.array([shunts.get(node, 0) for node in nodes], complex)
        return _Branches(np.array(nodes, np.int64), drop, admittance, shunt)

    def without(self, names: Sequence[str], wanted: Bools) -> Complex | str:
        """Driving-point impedances (chosen,) without ``names``, prepared, where ``wanted`` (chosen,).

        Infinite where ``infinite`` says so of the whole. Text says why there is no update.
        """
        if any(name in self._coupled for name in names):
            return "it is coupled with other lines"
        out = self.whole.copy()
        b = self._made[tuple(names)]
        if not len(b.nodes):
            return out
        own = self._beside_earth[b.nodes]
        touched = wanted & ~self._unearthed & np.isin(self._beside_earth[self.chosen], own)
        if not touched.any():
            return out
        if self._hard[own].any():
            return "what floats beside it is not simple"
        if self._touches_slack(b.nodes):
            return "it stands in a part that nothing ties to earth"
        near = self._near.without(names)
        why = self._lost_earth(b, self._joined.without(names), near, touched)
        if why:
            return why
        inner = self._between(b.nodes)
        z_branches = _seen(self._factor, b, inner, b.nodes)  # Uᵀ Z_NN
        outer = self._columns[b.nodes]
        noise = np.finfo(float).eps * _largest_terms(b, inner, z_branches)
        for piece in set(near[self.chosen[touched]].tolist()):
            here = np.flatnonzero(touched & (near[self.chosen] == piece))
            k = np.flatnonzero(near[b.nodes] == piece)
            whole = len(k) == len(b.nodes)
            if whole:
                core = np.eye(b.drop.shape[1]) - b.admittance @ (z_branches @ b.drop)
            else:
                share = b.drop[k] @ b.admittance @ z_branches[:, k]
                core = np.eye(len(k)) - share
            if len(k) and noise > ROUNDING * np.linalg.svd(core, compute_uv=False).min():
                return "an update would lose its digits"
            if whole:
                seen = _seen(self._factor, b, outer[:, here], self.chosen[here])
                gain = np.linalg.solve(core, b.admittance @ seen)
                out[here] += (seen * gain).sum(axis=0)
            elif len(k):
                z_k = _transfer(self._factor, b.nodes[k], self.chosen[here], outer[np.ix_(k, here)])
                z_kk = _transfer(self._factor, b.nodes[k], b.nodes[k], inner[np.ix_(k, k)])
                w = share @ np.linalg.inv(z_kk @ core)
                out[here] += ((w @ z_k) * z_k).sum(axis=0)
        return out

    def _lost_earth(self, b: _Branches, after: Ints, near: Ints, touched: Bools) -> str:
        """Why the parts ``after`` the outage, in the pieces ``near`` chosen nodes, are no matter for an
        update, or nothing."""
        label = self._label
        if after is label and (label[b.nodes] == label[-1]).all():
            return ""
        split = len(set(after[np.isin(label, label[b.nodes])].tolist())) > len(set(label[b.nodes].tolist()))
        if split and len(self._beside) and np.isin(label[self._beside], label[b.nodes]).any():
            return "what it cuts off may be coupled with other lines"
        weak = self._factor.stamps.weak
        inside = np.isin(near[:-1], near[self.chosen[touched]]) & np.isin(label[:-1], label[b.nodes])
        for piece in set(after[:-1][inside].tolist()):
            if piece == after[-1]:
                continue
            members = np.flatnonzero(after[:-1] == piece)
            if label[members[0]] == label[-1]:
                return "it takes the earth from a part"
            before = np.flatnonzero(label[:-1] == label[members[0]])
            left = weak[members].sum() - b.shunt[after[b.nodes] == piece].sum()
            if abs(left) < LEFT * np.abs(weak[before]).sum():
                return "it takes the earth from a part"
        return ""


def _of_unit(inc: Incidence, k: int, drops: list[dict[int, complex]], blocks: list[Complex]) -> None:
    """The branches of unit ``k``: one less than windings where these only see their differences."""
    y = inc.admittance[k]
    windings = np.flatnonzero((y != 0).any(axis=1))
    if not len(windings):
        return
    y = y[np.ix_(windings, windings)]
    rows: list[dict[int, complex]] = []
    for winding in windings.tolist():
        row: dict[int, complex] = {}
        for side in (0, 1):
            node, weight = int(inc.node[k, winding, side]), float(inc.weight[k, winding, side])
            if node >= 0 and weight:
                row[node] = row.get(node, 0) + weight
        rows.append(row)
    if np.abs(y.sum(axis=1)).max() <= BLIND * np.abs(y).max():
        last = rows.pop()
        y = y[:-1, :-1]
        rows = [{n: row.get(n, 0) - last.get(n, 0) for n in {**row, **last}} for row in rows]
    drops.extend(rows)
    blocks.append(y)


def _largest_terms(b: _Branches, inner: Complex, z_branches: Complex) -> float:
    """The largest of what C Uᵀ Z U is the sum of, by the entries ``inner`` of G between its nodes."""
    drop = np.abs(b.drop)
    terms = drop.T @ np.abs(inner) @ drop + np.abs(z_branches) @ drop
    return float((np.abs(b.admittance) @ terms).max(initial=0.0))


def _transfer(factor: SequenceFactor, rows: Ints, nodes: Ints, grounded: Complex) -> Complex:
    """Z (rows, nodes) of the bordered network, by the entries ``grounded`` (rows, nodes) of G."""
    return grounded + _lifted(factor, factor.direction[rows], factor.free.part[rows], nodes)


def _lifted(factor: SequenceFactor, direction: Complex, part: Ints, nodes: Ints) -> Complex:
    """What the free potentials of floating parts add: ``direction`` (m, k) by parts (m,) to ``nodes``."""
    other = factor.free.part[nodes]
    same = (part[:, None] == other[None, :]) & (part[:, None] >= 0)
    if not same.any():
        return np.zeros(same.shape, complex)
    extra = np.einsum("ik,ikl,jl->ij", direction, factor.compliance[part], factor.direction[nodes])
    return np.asarray(np.where(same, extra, 0), complex)


def _seen(factor: SequenceFactor, b: _Branches, grounded: Complex, nodes: Ints) -> Complex:
    """Voltages Uᵀ Z (r, nodes) of the branches for a unit into each of ``nodes``, by the entries
    ``grounded`` (k, nodes) of G.

    What a branch sees of a free potential is zero by structure, not as a difference of large numbers.
    """
    out: Complex = b.drop.T @ grounded
    free = factor.free
    part = free.part[b.nodes]
    for p in sorted(set(part[part >= 0].tolist())):
        inside = part == p
        sight: Complex = b.drop[inside].T @ free.basis[b.nodes[inside]]
        size: Floats = np.abs(b.drop[inside]).T @ np.abs(free.basis[b.nodes[inside]])
        sight = np.where(np.abs(sight) <= BLIND * size, 0, sight)
        d = sight - b.drop[inside].T @ factor.drop[b.nodes[inside]]
        out += _lifted(factor, d, np.full(len(d), p, np.int64), nodes)
    return out
