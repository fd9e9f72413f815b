"""Currents of every element from the potentials of one sequence, and the balance check.

Strong elements are given the potential w above the references of floating parts, weak ones the whole
potential v (see ``networks.factors``): differences of large equal potentials would invent currents.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from seqfault.equations.per_unit import base_current
from seqfault.errors import CheckError
from seqfault.model.elements import DELTA, STAR, Complex, Ints, Model
from seqfault.model.windings import incidence, induced
from seqfault.networks.assembly import open_ended, star_admittances


@dataclass(frozen=True, eq=False)
class TerminalMap:
    """Every terminal of every element, in one order for all sequences.

    ``element`` names, ``kind`` of record, ``side`` (``from``, ``to``, ``hv``, ``lv`` or empty), ``bus``
    (t,) index.
    """

    element: tuple[str, ...]
    kind: tuple[str, ...]
    side: tuple[str, ...]
    bus: Ints


def terminal_map(model: Model) -> TerminalMap:
    """The terminals of ``model``: lines, winding sets, sources, capacitances."""
    lines = model.lines
    element, kind, side = [*lines.names * 2], ["line"] * 2 * len(lines.names), []
    side += ["from"] * len(lines.names) + ["to"] * len(lines.names)
    bus = [lines.ends[0], lines.ends[1]]
    for sets in model.winding_sets:
        for w, label in enumerate(sets.sides):
            element += sets.names
            kind += [sets.kind_of_record] * len(sets.names)
            side += ["" if len(sets.sides) == 1 else label] * len(sets.names)
            bus.append(sets.bus[:, w])
    for shunts in (model.sources, model.capacitances):
        element += shunts.names
        kind += shunts.kinds
        side += [""] * len(shunts.names)
        bus.append(shunts.bus)
    return TerminalMap(tuple(element), tuple(kind), tuple(side), np.concatenate(bus))


@dataclass(frozen=True, eq=False)
class SequenceFlows:
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
    i, j = lines.ends
    series, shunt = lines.series[sequence], lines.shunt[sequence]
    whole = lines.closed.all(axis=0)
    drop = np.where(whole, (w[i] - w[j]) / series, 0)
    partly, _ = open_ended(lines, sequence)
    weak = [
        np.where(whole, shunt * v[end], np.where(closed, partly * v[end], 0))
        for end, closed in zip((i, j), lines.closed, strict=True)
    ]
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
            potential = v[sets.bus] - sets.sign * induced(sets, inc.voltages(v)) / sets.ratio
            scaled = potential * sets.ratio / sets.star_ratio
            star_voltage[sets.star[loose]] = scaled[loose]
    if sequence == 0:
        star[at] = star_admittances(model)[at] * v[stars.node[at]]
        star_voltage[at] = v[stars.node[at]]
    for shunts, potential in ((model.sources, w), (model.capacitances, v)):
        current = shunts.admittance[sequence] * potential[shunts.bus]
        terminal.append(current)
        to_earth.append(current)
    return SequenceFlows(
        np.concatenate(terminal), np.concatenate(to_earth), star, star_voltage, tuple(deltas)
    )


def check_balance(
    model: Model,
    buses: Ints,
    fault: Complex,
    flows: SequenceFlows,
    w: Complex,
    v: Complex,
    sequence: int,
) -> float:
    """Largest imbalance over its allowance at any node; raises ``CheckError`` above 1.

    At every node |Σ I| ≤ 1e-9 max|I_fault| + 1e-13 Σ|Y||V|, where |V| is no less than the voltage
    before the fault: every potential stems from phase voltages of that size and their rounding.
    ``fault`` (3, r) per-unit currents from the network into the fault at each of the buses ``buses``,
    all sequences.
    """
    n = len(model.buses)
    total = np.zeros(len(w), complex)
    throw = np.zeros(len(w))
    np.add.at(total, buses, fault[sequence])
    terminals = terminal_map(model)
    np.add.at(total, terminals.bus, flows.terminal)
    level = np.abs(w) + np.abs(model.before).max(initial=0.0)
    lines = model.lines
    whole = lines.closed.all(axis=0)
    i, j = lines.ends[:, whole]
    size = np.abs(1 / lines.series[sequence, whole]) * (level[i] + level[j])
    for end in (i, j):
        np.add.at(throw, end, size)
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
        throw, model.sources.bus, np.abs(model.sources.admittance[sequence]) * level[model.sources.bus]
    )
    if sequence == 0:
        at = model.stars.node >= 0
        total[model.stars.node[at]] += flows.star[at]
    np.add.at(throw, terminals.bus, np.abs(flows.to_earth))
    allowance = 1e-9 * np.abs(fault).max(initial=0.0) + 1e-13 * throw
    residual = np.abs(total)
    worst = float((residual / np.where(allowance > 0, allowance, 1.0)).max(initial=0.0))
    if worst > 1:
        k = int((residual - allowance).argmax())
        where = f"bus {model.buses[k]!r}" if k < n else "a star point"
        raise CheckError(
            f"the currents at {where} do not add to zero (sequence {sequence}: {residual[k]:.3g} per unit"
            f" left, {allowance[k]:.3g} allowed); the answer is withheld"
        )
    return worst


def star_current_base(model: Model) -> Complex:
    """Ampere of each star point's per-unit current: three phase currents of its base voltage."""
    return np.asarray(3 * base_current(model.stars.base, model.base_power))
