"""A fault on factorised networks -> its solution in SI."""

from __future__ import annotations

import numpy as np

from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.equations.symmetrical import turn_sequence
from seqfault.errors import quoted
from seqfault.faults.converters import Settled, settle, with_converters
from seqfault.faults.flows import (
    SequenceFlows,
    TerminalMap,
    check_balance,
    sequence_flows,
    star_current_base,
    terminal_map,
)
from seqfault.faults.home import check_home, earth_paths
from seqfault.faults.kinds import Fault
from seqfault.faults.ports import PortSolution, solve_ports
from seqfault.faults.solution import (
    DeltaCurrent,
    EarthedLine,
    FaultSolution,
    StarPointState,
    Terminals,
)
from seqfault.faults.ties import tie_notes, with_ties
from seqfault.model.elements import DELTA, Bools, Complex, Ints, Model
from seqfault.networks.factors import SEEN, SequenceNetworks


def solve_fault(networks: SequenceNetworks, fault: Fault) -> FaultSolution:
    """Solve one fault at a bus.

    Raises ``NoAnswerError`` at resonance, ``CheckError`` where the result fails its balance check.
    """
    model = networks.model
    place = model.index[fault.place]
    places = np.array([place])
    nodes = model.node[places]
    clock = (model.clock - model.clock[place]) % 12
    ports, fed = _with_converters(networks, places, fault, clock[places])
    terminals = terminal_map(model)
    flows, potentials, worst = [], [], 0.0
    for s in range(3):
        drawn, at, columns = ports.current, nodes, ports.columns[s]
        if s == 1 and len(fed.current):
            drawn = np.concatenate([drawn, np.stack([0 * fed.current, -fed.current, 0 * fed.current])], 1)
            at = np.concatenate([nodes, model.converters.node])
            columns = np.concatenate([columns, networks[1].columns(model.converters.node)], axis=1)
        # The port currents are physical; the place is the reference of angles, so they need no turn.
        w, v = networks[s].respond(columns, at, -drawn[s], ports.slack[s])
        flows.append(sequence_flows(model, s, w, v))
        worst = max(worst, check_balance(model, terminals, at, drawn, flows[s], w, v, s))
        potentials.append(v[model.node])
    undefined, stars_undefined = _undefined(networks, ports)
    change = turn_sequence(np.stack(potentials), clock)
    base_v = model.nominal / np.sqrt(3)
    before = turn_sequence(np.stack([0 * model.before, model.before, 0 * model.before]), clock)
    voltage = (change + before) * base_v
    base_i = base_current(model.nominal, model.base_power)
    z_base = base_impedance(model.nominal[place], model.base_power)
    current = ports.current[:, 0] * base_i[place]
    home = earth_paths(model, place, flows[0], terminals) if fault.kind.earth else ()
    here = model.galvanic[model.node]
    check_home(home, complex(3 * current[0]))
    shown = _terminals(model, terminals, flows, clock, base_i)
    shown = with_ties(model, place, current, with_converters(model, fed.current, clock, shown))
    return FaultSolution(
        fault=fault,
        state=model.state,
        machine=model.machine,
        nominal=float(model.nominal[place]),
        base_power=model.base_power,
        prefault=float(np.abs(model.before[place])),
        impedance=_ohms(ports.impedance[:, 0], float(z_base)),
        current=ports.phases[:, 0] * base_i[place],
        current_sequence=current,
        buses=model.buses,
        bus_nominal=model.nominal,
        voltage_sequence=voltage,
        before=before[1] * base_v,
        undefined=undefined,
        joined=here == here[place],
        terminals=shown,
        star_points=_star_points(model, flows[0], stars_undefined),
        deltas=_deltas(model, flows[0]),
        home=home,
        balance=worst,
        notes=(
            *_notes(networks, model, place, fault, ports),
            *_apart(model, place, change),
            *fed.notes,
            *tie_notes(model),
        ),
        earthed_lines=_earthed_lines(model, flows[0]),
        undefined_notes=tuple(
            f"potential of {quoted(model.buses[k])}: nothing fixes it" for k in np.flatnonzero(undefined)
        ),
        assumptions=model.assumptions,
        warnings=model.warnings,
        index=model.index,
    )


def _with_converters(
    networks: SequenceNetworks, places: Ints, fault: Fault, clock: Ints
) -> tuple[PortSolution, Settled]:
    """The ports solved together with what converters feed at the voltages of this fault."""
    model, one = networks.model, networks[1]
    converters, nodes = model.converters, model.node[places]
    if not converters.names:
        unlifted = np.zeros(len(places), complex)
        return solve_ports(networks, places, [fault], clock, unlifted), Settled(unlifted[:0], ())
    own = one.columns(converters.node)

    def ports(current: Complex) -> PortSolution:
        lifted = one.respond(own, converters.node, current, {})[1]
        return solve_ports(networks, places, [fault], clock, lifted[nodes])

    def respond(current: Complex) -> Complex:
        solved = ports(current)
        columns = np.concatenate([solved.columns[1], own], axis=1)
        at = np.concatenate([nodes, converters.node])
        drawn = np.concatenate([-solved.current[1], current])
        v = one.respond(columns, at, drawn, solved.slack[1])[1]
        return np.asarray(model.before[converters.bus] + v[converters.node])

    fed = settle(converters, model.live[converters.bus], respond)
    return ports(fed.current), fed


def _ohms(per_unit: Complex, base: float) -> Complex:
    """Impedances in ohm, infinite ones left as they are."""
    out = np.full(per_unit.shape, np.inf, complex)
    known = np.isfinite(per_unit)
    out[known] = per_unit[known] * base
    return out


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
    for mixture in ports.unseen:
        total = np.zeros(zero.size, complex)
        for (p, x), share in mixture.items():
            inside = part == p
            total[inside] += share * (zero.direction[inside] @ zero.slack[p, :, x])
        floating |= np.abs(total) > SEEN
    buses = floating[model.node] & model.live
    stars = np.zeros(len(model.stars.names), bool)
    own = model.stars.node >= 0
    stars[own] = floating[model.stars.node[own]]
    isolated = np.array([kind == "isolated" for kind in model.stars.kinds], bool) & ~own
    stars[isolated] = floating[model.node[model.stars.bus[isolated]]]
    return buses, stars


def _terminals(
    model: Model,
    terminals: TerminalMap,
    flows: list[SequenceFlows],
    clock: Complex,
    base_i: Complex,
) -> Terminals:
    """Each element's terminals side by side; a machine's capacitance flows through its terminal."""
    at, bus = terminals.shown, terminals.bus[terminals.shown]
    shown = at.tolist()
    placed = (terminals.row >= 0) & terminals.closed  # an open end passes nothing, to the last bit
    sequence = np.zeros((3, len(at)), complex)
    for s, flow in enumerate(flows):
        np.add.at(sequence[s], terminals.row[placed], flow.terminal[placed])
    return Terminals(
        element=tuple(map(terminals.element.__getitem__, shown)),
        kind=tuple(map(terminals.kind.__getitem__, shown)),
        side=tuple(map(terminals.side.__getitem__, shown)),
        bus=tuple(map(model.buses.__getitem__, bus.tolist())),
        bus_index=bus,
        count=terminals.count[at],
        sequence=turn_sequence(sequence, clock[bus]) * base_i[bus],
    )


def _star_points(model: Model, flows: SequenceFlows, undefined: Bools) -> tuple[StarPointState, ...]:
    stars = model.stars
    current = flows.star * star_current_base(model)
    voltage = flows.star_voltage * stars.base / np.sqrt(3)
    return tuple(
        StarPointState(
            name,
            stars.kinds[k],
            complex(current[k]),
            None if undefined[k] else complex(voltage[k]),
            model.buses[stars.bus[k]],
        )
        for k, name in enumerate(stars.names)
    )


def _earthed_lines(model: Model, flows: SequenceFlows) -> tuple[EarthedLine, ...]:
    """Zero-sequence current coupled into lines that are out of service and earthed at both ends."""
    lines = model.lines
    ampere = np.sqrt(3) * model.base_power / lines.voltage
    return tuple(
        EarthedLine(lines.names[k], complex(flows.terminal[k] * ampere[k]))
        for k in np.flatnonzero(lines.earthed).tolist()
    )


def _deltas(model: Model, flows: SequenceFlows) -> tuple[DeltaCurrent, ...]:
    out = []
    for sets, winding in zip(model.winding_sets, flows.delta, strict=True):
        at = np.nonzero(sets.kind == DELTA)
        ampere = winding[at] * sets.sense[at] * model.base_power / (3 * sets.rated[at])
        columns = (array.tolist() for array in (*at, sets.bus[at], ampere))
        for unit, w, bus, current in zip(*columns, strict=True):
            out.append(DeltaCurrent(sets.names[unit], sets.sides[w], model.buses[bus], current))
    return tuple(out)


def _apart(model: Model, place: int, change: Complex) -> tuple[str, ...]:
    """A sentence on buses of another system that the fault reaches through earth alone.

    Their own phase angle against the faulted system is not in the data, so how the common voltage
    adds to their phases is not either.
    """
    other = model.live & (model.part != model.part[place]) & (np.abs(change[0]) > 1e-6)
    names = [quoted(model.buses[k]) for k in np.flatnonzero(other)]
    if not names:
        return ()
    shown = ", ".join(names[:6]) + (f" and {len(names) - 6} more" if len(names) > 6 else "")
    return (
        f"{shown}: joined to the fault by a shared star point or coupled lines only; how far this other"
        " system stands from the faulted one in angle is not in the data, so its phase voltages are"
        " shown for one angle of many",
    )


def _notes(
    networks: SequenceNetworks, model: Model, place: int, fault: Fault, ports: PortSolution
) -> tuple[str, ...]:
    """Sentences on what is special about this answer."""
    out = []
    name = quoted(model.buses[place])
    if not model.live[place]:
        out.append(f"{name} is dead in this state: no infeed or generator is connected; nothing flows")
    elif fault.kind.earth and not np.isfinite(ports.impedance[0, 0]):
        zero = networks[0]
        if zero.resonant[zero.free.part[model.node[place]]]:
            out.append(
                f"the earthing of {name} is in exact resonance with its capacitance, without loss: no"
                " residual current flows; a real coil's loss would let a little through"
            )
        else:
            out.append(
                f"nothing joins the network of {name} to earth, not even a capacitance: no earth current"
                " flows; in a real network the charging current of its cables and machines does"
            )
    return tuple(out)
