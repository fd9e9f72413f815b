"""What a unit of each sequence current into a place does at relays: columns of factorised networks.

A place's column gives all potentials for one ampere there, so that no fault is put together and solved.
Places whose part of a sequence network nothing ties to earth, or which no source reaches, are left to
whole solutions (``settings_probe``).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import msgspec
import numpy as np

from seqfault.case.arrangement import Label
from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.equations.symmetrical import clock_turn
from seqfault.faults.breaks import lost_buses
from seqfault.faults.flows import (
    TerminalMap,
    check_balance,
    sequence_flows,
    star_current_base,
    terminal_map,
)
from seqfault.faults.kinds import fault_at
from seqfault.faults.network import Network
from seqfault.faults.standing import Standing
from seqfault.model.elements import Bools, Complex, Floats, Ints, Model
from seqfault.model.zones import components
from seqfault.networks.factors import SequenceFactor

if TYPE_CHECKING:
    from seqfault.studies.settings_probe import Sites


ALL = (0, 1, 2)


class Columns(msgspec.Struct, frozen=True, eq=False):
    """Of places (p,) by columns: as in ``settings_probe.Probe``, unclipped.

    ``live`` (p,) tells which have a source; ``voltage`` (p,) V of a phase before the fault.
    """

    live: Bools
    voltage: Floats
    impedance: Complex
    terminal: Complex
    star: Complex
    drop: Complex
    stood: Complex
    star_drop: Complex


class _Looks(msgspec.Struct, frozen=True, eq=False):
    """How the current at each of t sites adds up.

    ``weight`` (t, k) of the terminals' currents, ``own`` (t, n) of a fault at each bus; ``bus`` (t,) of
    the site, −1 where the network does not have it.
    """

    weight: Floats
    own: Floats
    bus: Ints


def lost_behind(network: Network, opened: str) -> Bools:
    """Buses (n,) of ``network``, made with a break at ``opened``, that no source reaches behind it."""
    if not opened:
        return np.zeros(len(network.model.buses), bool)
    _, near, far = network._breaks[network.place(opened).name]
    at = np.array([network.model.index[near], network.model.index[far]], np.int64)
    return lost_buses(network.model, [Standing(fault_at(opened, "open-three"), (near, far))], [at])


def unfed(model: Model, line: str, bus: str) -> bool:
    """Whether no source reaches ``bus`` of ``model`` without ``line``; never told of several circuits."""
    lines = model.lines
    rows = [k for k, name in enumerate(lines.names) if name == line]
    if len(rows) != 1 or lines.count[rows[0]] != 1:
        return False
    through: Bools = np.logical_and(*(lines.nodes >= 0))
    through[rows] = False
    first, second = [lines.nodes[0, through]], [lines.nodes[1, through]]
    for sets in model.winding_sets:
        first += [sets.node[:, 0]] * (sets.node.shape[1] - 1)
        second += list(sets.node[:, 1:].T)
    part = components(model.common, np.concatenate(first), np.concatenate(second))
    sources = [model.sources.node]
    sources += [sets.node[:, 0] for sets in model.winding_sets if sets.kind_of_record == "generator"]
    return part[model.node[model.index[bus]]] not in part[np.concatenate(sources)]


def tied(network: Network, buses: Ints, sequences: Sequence[int] = ALL) -> Bools:
    """Which of ``buses`` lie, in all of ``sequences``, where something fixes the potential."""
    nodes = network.model.node[buses]
    fixed = np.ones(len(buses), bool)
    for s in sequences if len(buses) else ():
        factor = network.sequences[s]
        part = factor.free.part[nodes]
        inside = part >= 0
        fixed[inside] = fixed[inside] & (factor.slacks[part[inside]] == 0)
    return fixed


def columns(
    network: Network, buses: Ints, lost: Bools, sites: Sites, sequences: Sequence[int] = ALL
) -> Columns:
    """The answers for faults at ``buses`` (p,) of ``network``, all ``tied``; 0 for other sequences."""
    model = network.model
    terminals = terminal_map(model)
    looks = _looks(network, terminals, sites)
    p, t, b, k = len(buses), len(sites.terminals), len(sites.buses), len(sites.stars)
    at = np.array([model.index.get(bus, -1) for bus in sites.buses], np.int64)
    there = at >= 0
    star_at = {name: row for row, name in enumerate(model.stars.names)}
    stars = np.array([star_at.get(name, -1) for name in sites.stars], np.int64)
    base_v, base_i = model.nominal / np.sqrt(3), base_current(model.nominal, model.base_power)
    star_i, star_v = star_current_base(model), model.stars.base / np.sqrt(3)
    own = base_i[buses]
    clock = np.where(
        model.part[None, :] == model.part[buses][:, None],
        model.clock[None, :] - model.clock[buses][:, None],
        model.clock[None, :],
    )
    turn = clock_turn(clock % 12)
    impedance = np.zeros((3, p), complex)
    terminal, drop = np.zeros((3, p, t), complex), np.zeros((3, p, b), complex)
    star, star_drop = np.zeros((p, k), complex), np.zeros((p, k), complex)
    seen = looks.bus >= 0
    for s in sequences:
        factor = network.sequences[s]
        nodes = model.node[buses]
        w, v = _potentials(factor, nodes)
        turned = np.ones_like(turn) if s == 0 else turn if s == 1 else turn.conj()
        impedance[s] = -v[nodes, np.arange(p)] * base_impedance(model.nominal[buses], model.base_power)
        for row in range(p):
            flows = sequence_flows(model, s, w[:, row], v[:, row])
            if row == 0:
                drawn = np.zeros((3, 1), complex)
                drawn[s] = 1
                check_balance(model, terminals, nodes[:1], drawn, flows, w[:, row], v[:, row], s)
            placed = np.where(terminals.closed, flows.terminal, 0)
            current = np.zeros(t, complex)
            current[seen] = (looks.weight @ placed)[seen] * (
                turned[row, looks.bus[seen]] * base_i[looks.bus[seen]] / own[row]
            )
            terminal[s, row] = current + looks.own[:, buses[row]]
            if s == 0 and k:
                found = stars >= 0
                star[row, found] = -(flows.star * star_i)[stars[found]] / own[row]
                star_drop[row, found] = -(flows.star_voltage * star_v)[stars[found]] / own[row]
        bus = at[there]
        drop[s][:, there] = (-v[model.node[bus]].T * turned[:, bus] * base_v[bus]) / own[:, None]
    stood = np.zeros((p, b), complex)
    before = np.where(lost, 0, model.before)[None, :] * turn * base_v[None, :]
    stood[:, there] = before[:, at[there]]
    return Columns(
        live=(np.abs(model.before[buses]) > 0) & ~lost[buses],
        voltage=np.abs(model.before[buses]) * base_v[buses],
        impedance=impedance,
        terminal=terminal,
        star=star,
        drop=drop,
        stood=stood,
        star_drop=star_drop,
    )


def _potentials(factor: SequenceFactor, nodes: Ints) -> tuple[Complex, Complex]:
    """Potentials w and v (n, p) for a unit current into a fault at each of ``nodes`` (p,)."""
    w = -factor.columns(nodes)
    part, home = factor.free.part, factor.free.part[nodes]
    v = w.copy()
    floating = home >= 0
    if not floating.any():
        return w, v
    u = np.zeros((len(nodes), factor.free.basis.shape[1]), complex)
    u[floating] = -np.einsum(
        "pkl,pl->pk", factor.compliance[home[floating]], factor.direction[nodes[floating]]
    )
    for column in np.flatnonzero(floating).tolist():
        inside = part == home[column]
        w[inside, column] -= factor.drop[inside] @ u[column]
        v[inside, column] = w[inside, column] + factor.free.basis[inside] @ u[column]
    return w, v


def _looks(network: Network, terminals: TerminalMap, sites: Sites) -> _Looks:
    """How sites are made of terminals, named and joined as answers name them."""
    model, labels = network.model, network.labels
    rows_of: dict[int, list[int]] = {}
    for k, row in enumerate(terminals.row.tolist()):
        if row >= 0:
            rows_of.setdefault(row, []).append(k)
    found: dict[tuple[str, str], tuple[list[int], float, int, set[int]]] = {}
    drawn_at: dict[int, list[int]] = {}
    for row, k in enumerate(terminals.shown.tolist()):
        bus = int(terminals.bus[k])
        drawn_at.setdefault(bus, []).extend(rows_of[row])
        name, side = terminals.element[k], terminals.side[k]
        label = labels.get((name, side), Label(name, "", side))
        if label is not None and not label.side.startswith("from "):
            found[label.element, model.buses[bus]] = (
                rows_of[row],
                1 / float(terminals.count[k]),
                bus,
                set(),
            )
    for j, name in enumerate(model.ties.names):
        near = model.ties.side[j]
        if near is None:
            continue
        for end, side in enumerate(("from", "to")):
            label = labels.get((name, side), Label(name, "tie", side))
            if label is None or label.side.startswith("from "):
                continue
            sign = -1.0 if end == 0 else 1.0
            bus, beside = int(model.ties.ends[end, j]), near.tolist()
            through = [k for each in beside for k in drawn_at.get(each, ())]
            found[label.element, model.buses[bus]] = (through, sign, bus, set(beside))
    weight = np.zeros((len(sites.terminals), len(terminals.element)))
    own = np.zeros((len(sites.terminals), len(model.buses)))
    bus_of = np.full(len(sites.terminals), -1, np.int64)
    for t, site in enumerate(sites.terminals):
        if site not in found:
            continue
        through, share, bus_of[t], beside_ = found[site]
        np.add.at(weight[t], through, share)
        own[t, list(beside_)] = share
    return _Looks(weight, own, bus_of)


def buses_of(network: Network, places: Sequence[str]) -> Ints:
    """The buses (p,) that stand for ``places`` in ``network``."""
    model: Model = network.model
    return np.array([model.index[network.bus_of(network.place(text))] for text in places], np.int64)
