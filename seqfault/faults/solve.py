"""Faults on factorised networks -> their solution in SI."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from types import MappingProxyType

import numpy as np
from msgspec.structs import replace

from seqfault.case.arrangement import Label
from seqfault.equations.per_unit import base_current
from seqfault.equations.symmetrical import clock_turn, turn_sequence
from seqfault.errors import quoted
from seqfault.faults.breaks import lost_buses, relabelled, with_breaks
from seqfault.faults.converters import Settled, settle, with_converters
from seqfault.faults.flows import SequenceFlows, TerminalMap, check_balance, sequence_flows, terminal_map
from seqfault.faults.home import check_home, earth_paths
from seqfault.faults.notes import apart, notes
from seqfault.faults.ports import Loops, PortSolution, solve_ports
from seqfault.faults.shown import delta_currents, earthed_lines, shown_terminals, star_point_states
from seqfault.faults.solution import FaultSolution, FaultState, HomePath, Terminals
from seqfault.faults.standing import Loading, Standing, leaving, loops_of, states, through_breaks, turned
from seqfault.faults.ties import tie_notes, with_ties
from seqfault.model.elements import Bools, Complex, Ints, Model
from seqfault.networks.factors import SEEN, SequenceNetworks


def solve_faults(
    networks: SequenceNetworks,
    standing: Sequence[Standing],
    loading: Loading | None = None,
    labels: Mapping[tuple[str, str], Label | None] = MappingProxyType({}),
) -> FaultSolution:
    """Solve faults that stand at once.

    ``labels`` say how terminals are named in the answer, where not as in the model. Raises
    ``NoAnswerError`` at resonance, ``CheckError`` where the result fails its balance check.
    """
    model = networks.model
    where = [np.array([model.index[bus] for bus in each.buses], np.int64) for each in standing]
    first = int(where[0][0])
    # Of a part that nothing but earth joins to the first place, its own first bus is the reference.
    clock = np.where(model.part == model.part[first], model.clock - model.clock[first], model.clock) % 12
    terminals = terminal_map(model)
    before = model.before if loading is None else loading.voltage
    if loading is not None and before[first]:
        loading = turned(loading, before[first])
        before = loading.voltage
    lost = lost_buses(model, standing, where)
    driving = before
    if lost.any():  # a dead part: loads let its voltage fall by themselves, where there are any
        one = networks[1]
        part = one.free.part[model.node]
        loose = (part >= 0) & (one.slacks[part] > 0) if len(one.slacks) else part >= 0
        driving = np.where(lost & (loose if loading is not None else True), 0, before)
    flowing = through_breaks(model, terminals, where, loading)
    shapes = [loops_of(model, each, at) for each, at in zip(standing, where, strict=True)]
    ports, fed = _with_converters(networks, shapes, clock, driving, np.concatenate(flowing))
    nodes = model.node[ports.ports]
    flows, potentials, worst = [], [], 0.0
    for s in range(3):
        drawn, at, columns = ports.drawn, nodes, ports.columns[s]
        if s == 1 and len(fed.current):
            drawn = np.concatenate([drawn, np.stack([0 * fed.current, -fed.current, 0 * fed.current])], 1)
            at = np.concatenate([nodes, model.converters.node])
            columns = np.concatenate([columns, networks[1].columns(model.converters.node)], axis=1)
        w, v = networks[s].respond(columns, at, -drawn[s], ports.slack[s])
        flows.append(sequence_flows(model, s, w, v))
        worst = max(worst, check_balance(model, terminals, at, drawn, flows[s], w, v, s))
        potentials.append(v[model.node])
    undefined, stars_undefined = _undefined(networks, ports)
    change = turn_sequence(np.stack(potentials), clock)
    base_v = model.nominal / np.sqrt(3)
    base_i = base_current(model.nominal, model.base_power)
    stood = turn_sequence(np.stack([0 * driving, driving, 0 * driving]), clock)
    voltage = (change + stood) * base_v
    faults = states(model, standing, where, ports, shapes, flowing, clock, before, voltage)
    home = _home(model, where, faults, flows[0], terminals)
    here = model.galvanic[model.node]
    shown = shown_terminals(model, terminals, [flow.terminal for flow in flows], clock, base_i)
    shown = with_converters(model, fed.current, clock, shown)

    def named(rows: Terminals, told: tuple[FaultState, ...]) -> Terminals:
        rows = with_ties(model, leaving(where, standing, told), rows)
        return relabelled(with_breaks(rows, standing, told, model), labels)

    earlier = None
    if loading is not None:
        none = 0 * loading.terminal
        stood_by = [none, loading.terminal, none]
        earlier = shown_terminals(model, terminals, stood_by, clock, base_i)
        earlier = with_converters(model, 0 * fed.current, clock, earlier)
        shown = replace(shown, sequence=shown.sequence + earlier.sequence)
        calm = tuple(replace(f, current=0 * f.current, through=f.through_before) for f in faults)
        earlier = named(earlier, calm)
    shown = named(shown, faults)
    stars = star_point_states(model, flows[0], stars_undefined)
    return FaultSolution(
        faults=faults,
        state=model.state,
        machine=model.machine,
        base_power=model.base_power,
        loaded=loading is not None,
        buses=model.buses,
        bus_nominal=model.nominal,
        voltage_sequence=voltage,
        before=before * clock_turn(clock) * base_v,
        undefined=undefined & ~lost,
        lost=lost,
        joined=np.isin(here, here[[int(at[0]) for at in where]]),
        terminals=shown,
        terminals_before=earlier,
        star_points=stars,
        deltas=delta_currents(model, flows[0]),
        home=home,
        balance=worst,
        notes=(
            *notes(networks, faults, lost, voltage, before * base_v, loading is not None, stars),
            *apart(model, first, change),
            *fed.notes,
            *tie_notes(model),
            *(loading.notes if loading is not None else ()),
        ),
        earthed_lines=earthed_lines(model, flows[0]),
        undefined_notes=tuple(
            f"potential of {quoted(model.buses[k])}: nothing fixes it"
            for k in np.flatnonzero(undefined & ~lost)
        ),
        assumptions=model.assumptions,
        warnings=model.warnings,
        index=model.index,
    )


def _home(
    model: Model,
    where: Sequence[Ints],
    faults: Sequence[FaultState],
    flows: SequenceFlows,
    terminals: TerminalMap,
) -> tuple[HomePath, ...]:
    """The paths home of every network that has a fault to earth, each checked against what it sends."""
    here = model.galvanic[model.node]
    sent: dict[int, complex] = {}
    for at, state in zip(where, faults, strict=True):
        if state.fault.earth:
            group = int(here[at[0]])
            sent[group] = sent.get(group, 0j) + state.residual
    out: list[HomePath] = []
    for group, residual in sent.items():
        paths = earth_paths(model, group, flows, terminals)
        check_home(paths, residual)
        out += paths
    return tuple(out)


def _with_converters(
    networks: SequenceNetworks, shapes: Sequence[Loops], clock: Ints, before: Complex, flowing: Complex
) -> tuple[PortSolution, Settled]:
    """The ports solved together with what converters feed at the voltages of these faults."""
    model, one = networks.model, networks[1]
    converters = model.converters
    if not converters.names:
        nothing = np.zeros(0, complex)
        return solve_ports(networks, shapes, clock, before, flowing), Settled(nothing, ())
    own = one.columns(converters.node)

    def ports(current: Complex) -> PortSolution:
        lifted = one.respond(own, converters.node, current, {})[1][model.node]
        return solve_ports(networks, shapes, clock, before + lifted, flowing)

    def respond(current: Complex) -> Complex:
        solved = ports(current)
        columns = np.concatenate([solved.columns[1], own], axis=1)
        at = np.concatenate([model.node[solved.ports], converters.node])
        drawn = np.concatenate([-solved.drawn[1], current])
        v = one.respond(columns, at, drawn, solved.slack[1])[1]
        return np.asarray(before[converters.bus] + v[converters.node])

    fed = settle(converters, model.live[converters.bus], respond)
    return ports(fed.current), fed


def _undefined(networks: SequenceNetworks, ports: PortSolution) -> tuple[Bools, Bools]:
    """Buses (n,) and star points (k,) whose potential to earth no branch fixes."""
    model, zero = networks.model, networks[0]
    part = zero.free.part
    at = np.flatnonzero(part >= 0)
    untouched = zero.slack.copy()
    for p, x in ports.slack[0]:
        untouched[p, :, x] = 0
    floating = np.zeros(zero.size, bool)
    reach = np.einsum("ik,ikx->ix", zero.direction[at], untouched[part[at]])
    floating[at] = (np.abs(reach) > SEEN).any(axis=1)
    beside = np.zeros(model.common, bool)  # behind open poles, by the sequences that turn
    for mixture in ports.unseen:
        moved = [np.zeros(networks[s].size, complex) for s in range(3)]
        for (s, (p, x)), share in mixture.items():
            factor = networks[s]
            inside = factor.free.part == p
            moved[s][inside] += share * (factor.direction[inside] @ factor.slack[p, :, x])
        floating |= np.abs(moved[0]) > SEEN
        beside |= (np.abs(moved[1]) > SEEN) | (np.abs(moved[2]) > SEEN)
    buses = (floating[: model.common] | beside)[model.node] & model.live
    stars = np.zeros(len(model.stars.names), bool)
    own = model.stars.node >= 0
    stars[own] = floating[model.stars.node[own]]
    isolated = np.array([kind == "isolated" for kind in model.stars.kinds], bool) & ~own
    stars[isolated] = floating[model.node[model.stars.bus[isolated]]]
    return buses, stars
