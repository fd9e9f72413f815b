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

from seqfault.model.elements import Bools, Complex, CoupledLines, Floats, Ints, Model
from seqfault.model.windings import Incidence, incidence
from seqfault.networks.connectivity import joined_parts
from seqfault.networks.edges import coupled_edges, couplings, once_each, strong_edges
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
        self._near = Joined(self._size, *once_each(self._edges, cores, couplings(model, sequence)))
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
        self._group = {k: group for group in groups for k in group.line.tolist()}
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
        groups: dict[int, CoupledLines] = {}
        for name in names:
            if name in self._line:
                k = self._line[name]
                ends = lines.nodes[:, k].tolist()
                if k in self._group:
                    groups[id(self._group[k])] = self._group[k]
                elif ends[0] != ends[1]:  # a closed tie beside it carries all
                    drops.append({ends[0]: 1, ends[1]: -1})
                    blocks.append(np.array([[1 / lines.series[self._sequence, k]]]))
                for end in ends:
                    shunts[end] = shunts.get(end, 0) + complex(lines.shunt[self._sequence, k])
            for s, k in self._units.get(name, ()):
                _of_unit(self._incidence[s], k, drops, blocks)
        for group in groups.values():
            gone = np.array([lines.names[k] in names for k in group.line.tolist()], bool)
            blocks.append(_change(group.admittance, gone))
            drops += [_drop(*lines.nodes[:, k].tolist()) for k in group.line.tolist()]
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


def _change(admittance: Complex, gone: Bools) -> Complex:
    """What the series block (g, g) of coupled lines loses with those that are ``gone`` (g,)."""
    left = np.zeros_like(admittance)
    stays = np.ix_(~gone, ~gone)
    left[stays] = np.linalg.inv(np.linalg.inv(admittance)[stays])
    return np.asarray(admittance - left)


def _drop(start: int, end: int) -> dict[int, complex]:
    """The nodes that the voltage along a line is taken between; earth, −1, is none."""
    drop: dict[int, complex] = {}
    for node, weight in ((start, 1), (end, -1)):
        if node >= 0:
            drop[node] = drop.get(node, 0) + weight
    return drop


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
