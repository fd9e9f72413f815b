"""Currents of every element from the potentials of one sequence, and the balance check.

Strong elements are given the potential w above the references of floating parts, weak ones the whole
potential v (see ``networks.factors``): differences of large equal potentials would invent currents.
"""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_current
from seqfault.errors import CheckError, quoted
from seqfault.model.elements import DELTA, STAR, Bools, Complex, Ints, Model
from seqfault.model.windings import incidence, induced
from seqfault.networks.assembly import star_admittances


class TerminalMap(msgspec.Struct, frozen=True, eq=False):
    """Every terminal of every element, in one order for all sequences.

    ``element`` names, ``kind`` of record, ``side`` (``from``, ``to``, ``hv``, ``lv``, ``tv`` or empty);
    ``bus`` and ``node`` (t,), −1 where a line is earthed out of service; ``closed`` (t,) False at
    the open end of a line; ``count`` (t,) circuits of the record. ``row`` (t,) is the terminal's place
    in answers, where an element's terminals stand side by side and what shares a terminal (a
    machine's capacitance, a zigzag winding's zero sequence) shares a row; ``shown`` (rows,) the
    terminal that names each row.
    """

    element: tuple[str, ...]
    kind: tuple[str, ...]
    side: tuple[str, ...]
    bus: Ints
    node: Ints
    closed: Bools
    count: Ints
    row: Ints
    shown: Ints


def terminal_map(model: Model) -> TerminalMap:
    """The terminals of ``model``: lines, winding sets, sources, capacitances."""
    lines = model.lines
    m = len(lines.names)
    element, kind, side = [*lines.names * 2], [*lines.kinds * 2], ["from"] * m + ["to"] * m
    bus, node, count, first = [*lines.ends], [*lines.nodes], [lines.count] * 2, [np.arange(m)] * 2
    blocks: list[tuple[int, int]] = []  # terminals that may share another's row

    def add(names: tuple[str, ...], label: str, kinds: Sequence[str], at: Ints, on: Ints) -> None:
        element.extend(names)
        kind.extend(kinds)
        side.extend([label] * len(names))
        bus.append(at)
        node.append(on)

    for sets in model.winding_sets:
        m, start = len(sets.names), len(element)
        for w, label in enumerate(sets.sides):
            add(sets.names, label, [sets.kind_of_record] * m, sets.bus[:, w], sets.node[:, w])
            count.append(sets.count)
            first.append(start + np.arange(m))
        if len(sets.sides) == 1 and sets.sides[0]:
            blocks.append((start, start + m))
    for shunts in (model.sources, model.capacitances):
        m, start = len(shunts.names), len(element)
        add(shunts.names, "", shunts.kinds, shunts.bus, shunts.node)
        count.append(np.ones(m, np.int64))
        first.append(start + np.arange(m))
    blocks.append((start, start + m))
    whose = np.concatenate(first)
    shares = np.full(len(element), -1, np.int64)
    wanted = {(element[k], side[k]) for a, b in blocks for k in range(a, b)}
    owner: dict[tuple[str, str], int] = {}
    for k in range(2 * len(lines.names), len(element)) if wanted else ():  # no line has such a side
        key = (element[k], side[k])
        if key in wanted and owner.setdefault(key, k) != k:
            shares[k] = owner[key]
    alone = (shares < 0) & (np.concatenate(bus) >= 0)
    alone[: 2 * len(lines.names)] &= ~np.tile(lines.earthed, 2)
    shown = np.flatnonzero(alone)
    shown = shown[np.argsort(whose[shown], kind="stable")]
    row = np.full(len(element), -1, np.int64)
    row[shown] = np.arange(len(shown))
    row[shares >= 0] = row[shares[shares >= 0]]
    closed = np.ones(len(element), bool)
    closed[: 2 * len(lines.names)] = lines.closed.ravel()
    return TerminalMap(
        element=tuple(element),
        kind=tuple(kind),
        side=tuple(side),
        bus=np.concatenate(bus),
        node=np.concatenate(node),
        closed=closed,
        count=np.concatenate(count),
        row=row,
        shown=shown,
    )


class SequenceFlows(msgspec.Struct, frozen=True, eq=False):
    """One sequence, per unit: ``terminal`` (t,) currents from the bus into the element.

    ``to_earth`` (t,) the share of each that leaves to earth through capacitance or a source. Zero
    sequence only: ``star`` (k,) current from each star point to earth and ``star_voltage`` (k,), both
    per unit of its base (three times the phase current is the current in ampere); ``delta`` one array
    (m, w) a winding set, per unit of the rated current of the winding's phase.
    """

    terminal: Complex
    to_earth: Complex
    star: Complex
    star_voltage: Complex
    delta: tuple[Complex, ...]


def sequence_flows(model: Model, sequence: int, w: Complex, v: Complex) -> SequenceFlows:
    """Currents of all elements for the potentials ``w`` and ``v`` (n,) of one sequence."""
    lines = model.lines
    i, j = lines.nodes
    w_ends, v_ends = np.append(w, 0), np.append(v, 0)  # node −1 is earth
    drop = lines.series_currents(sequence, w_ends[i] - w_ends[j])
    weak = [lines.shunt[sequence] * v_ends[end] for end in (i, j)]
    terminal = [weak[0] + drop, weak[1] - drop]
    to_earth = [weak[0], weak[1]]
    stars = model.stars
    star = np.zeros(len(stars.names), complex)
    star_voltage = np.zeros(len(stars.names), complex)
    at = stars.node >= 0
    deltas = []
    for sets in model.winding_sets:
        inc = incidence(sets, sequence, stars.node)
        winding = inc.currents(w)
        current = inc.weight[:, :, 0] * winding
        terminal += list(current.T)
        to_earth += [np.zeros(len(sets.names), complex)] * len(sets.sides)
        if sequence:
            continue
        deltas.append(np.where(sets.kind == DELTA, winding, 0))
        solid = (sets.kind == STAR) & (sets.star >= 0)
        solid[solid] = ~at[sets.star[solid]]
        np.add.at(star, sets.star[solid], (sets.sign * sets.star_ratio * winding)[solid])
        loose = (sets.star >= 0) & (sets.kind != STAR)
        if loose.any():
            potential = v[sets.node] - sets.sign * induced(sets, inc.voltages(v)) / sets.ratio
            scaled = potential * sets.ratio / sets.star_ratio
            star_voltage[sets.star[loose]] = scaled[loose]
    if sequence == 0:
        star[at] = star_admittances(model)[at] * v[stars.node[at]]
        star_voltage[at] = v[stars.node[at]]
    for shunts, potential in ((model.sources, w), (model.capacitances, v)):
        current = shunts.admittance[sequence] * potential[shunts.node]
        terminal.append(current)
        to_earth.append(current)
    return SequenceFlows(
        np.concatenate(terminal), np.concatenate(to_earth), star, star_voltage, tuple(deltas)
    )


def check_balance(
    model: Model,
    terminals: TerminalMap,
    nodes: Ints,
    fault: Complex,
    flows: SequenceFlows,
    w: Complex,
    v: Complex,
    sequence: int,
) -> float:
    """Largest imbalance over its allowance at any node; raises ``CheckError`` above 1.

    At every node |Σ I| ≤ 1e-9 max|I_fault| + 1e-13 Σ|Y||V| + 1e-14 of the largest such sum, where |V|
    is no less than the voltage before the fault: every potential stems from phase voltages of that
    size and their rounding.
    ``fault`` (3, r) per-unit currents from the network into the fault at each of the ``nodes``,
    all sequences.
    """
    total = np.zeros(len(w), complex)
    throw = np.zeros(len(w))
    np.add.at(total, nodes, fault[sequence])
    there = terminals.node >= 0
    np.add.at(total, terminals.node[there], flows.terminal[there])
    np.add.at(throw, terminals.node[there], np.abs(flows.to_earth[there]))
    level = np.abs(w) + np.abs(model.before).max(initial=0.0)
    lines = model.lines
    ends = np.append(level, 0)[lines.nodes]
    size = np.abs(lines.series_currents(sequence, ends.sum(axis=0).astype(complex)))
    for end in lines.nodes:
        np.add.at(throw, end[end >= 0], size[end >= 0])
    for sets in model.winding_sets:
        inc = incidence(sets, sequence, model.stars.node)
        seen = np.abs(inc.weight) * np.append(level, 0)[inc.node]
        through = np.einsum("mij,mj->mi", np.abs(inc.admittance), seen.sum(axis=2))
        for side in (0, 1):
            there = inc.node[:, :, side] >= 0
            np.add.at(
                throw,
                inc.node[:, :, side][there],
                (np.abs(inc.weight[:, :, side]) * through)[there],
            )
        if sequence == 0:
            star = inc.node[:, :, 1]
            there = star >= 0
            np.add.at(total, star[there], (inc.weight[:, :, 1] * inc.currents(w))[there])
    np.add.at(
        throw, model.sources.node, np.abs(model.sources.admittance[sequence]) * level[model.sources.node]
    )
    if sequence == 0:
        at = model.stars.node >= 0
        node = model.stars.node[at]
        total[node] += flows.star[at]
        throw[node] += np.abs(star_admittances(model)[at]) * (np.abs(w) + np.abs(v - w))[node]
    allowance = 1e-9 * np.abs(fault).max(initial=0.0) + 1e-13 * throw
    allowance = allowance + 1e-14 * throw.max(initial=0.0)  # a factorisation rounds by the whole matrix
    residual = np.abs(total)
    worst = float((residual / np.where(allowance > 0, allowance, 1.0)).max(initial=0.0))
    if worst > 1:
        k = int((residual - allowance).argmax())
        buses = np.flatnonzero(model.node == k)
        where = f"bus {quoted(model.buses[buses[0]])}" if len(buses) else "a star point or open end"
        raise CheckError(
            f"the currents at {where} do not add to zero (sequence {sequence}: {residual[k]:.3g} per unit"
            f" left, {allowance[k]:.3g} allowed); the answer is withheld"
        )
    return worst


def star_current_base(model: Model) -> Complex:
    """Ampere of each star point's per-unit current: three phase currents of its base voltage."""
    return np.asarray(3 * base_current(model.stars.base, model.base_power))
