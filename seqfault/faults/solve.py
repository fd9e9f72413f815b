"""A fault on factorised networks -> its solution in SI."""

from __future__ import annotations

import numpy as np

from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.equations.symmetrical import turn_sequence
from seqfault.errors import CheckError, quoted
from seqfault.faults.flows import (
    SequenceFlows,
    TerminalMap,
    check_balance,
    sequence_flows,
    star_current_base,
    terminal_map,
)
from seqfault.faults.kinds import Fault
from seqfault.faults.ports import PortSolution, solve_ports
from seqfault.faults.solution import (
    DeltaCurrent,
    FaultSolution,
    HomePath,
    StarPointState,
    Terminals,
)
from seqfault.model.elements import DELTA, Bools, Complex, Model
from seqfault.networks.factors import SequenceNetworks

SEEN = 1e-9
"""Share of a free potential below which a node does not take part in it."""


def solve_fault(networks: SequenceNetworks, fault: Fault) -> FaultSolution:
    """Solve one fault at a bus.

    Raises ``NoAnswerError`` at resonance, ``CheckError`` where the result fails its balance check.
    """
    model = networks.model
    place = model.index[fault.place]
    nodes = np.array([place])
    clock = (model.clock - model.clock[place]) % 12
    ports = solve_ports(networks, nodes, [fault], clock[nodes])
    flows, potentials, worst = [], [], 0.0
    for s in range(3):
        # The port currents are physical; the place is the reference of angles, so they need no turn.
        injection = -ports.current[s]
        w, v = networks[s].respond(ports.columns[s], nodes, injection, ports.slack[s])
        flows.append(sequence_flows(model, s, w, v))
        worst = max(worst, check_balance(model, nodes, ports.current, flows[s], w, v, s))
        potentials.append(v[: len(model.buses)])
    undefined, stars_undefined = _undefined(networks, ports)
    change = turn_sequence(np.stack(potentials), clock)
    base_v = model.nominal / np.sqrt(3)
    before = turn_sequence(np.stack([0 * model.before, model.before, 0 * model.before]), clock)
    voltage = (change + before) * base_v
    base_i = base_current(model.nominal, model.base_power)
    z_base = base_impedance(model.nominal[place], model.base_power)
    terminals = terminal_map(model)
    current = ports.current[:, 0] * base_i[place]
    home = _home(model, place, flows[0], terminals) if fault.kind.earth else ()
    _check_home(home, complex(3 * current[0]))
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
        joined=model.galvanic == model.galvanic[place],
        terminals=_terminals(model, terminals, flows, clock, base_i),
        star_points=_star_points(model, flows[0], stars_undefined),
        deltas=_deltas(model, flows[0]),
        home=home,
        balance=worst,
        notes=_notes(networks, model, place, fault, ports),
        undefined_notes=tuple(
            f"potential of {quoted(model.buses[k])}: nothing fixes it" for k in np.flatnonzero(undefined)
        ),
        assumptions=model.assumptions,
        warnings=model.warnings,
        index=model.index,
    )


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
    buses = floating[: len(model.buses)] & model.live
    stars = np.zeros(len(model.stars.names), bool)
    own = model.stars.node >= 0
    stars[own] = floating[model.stars.node[own]]
    isolated = np.array([kind == "isolated" for kind in model.stars.kinds], bool)
    stars[isolated] = floating[model.stars.bus[isolated]]
    return buses, stars


def _terminals(
    model: Model,
    terminals: TerminalMap,
    flows: list[SequenceFlows],
    clock: Complex,
    base_i: Complex,
) -> Terminals:
    """Each element's terminals side by side; a machine's capacitance flows through its terminal."""
    current = np.stack([flow.terminal for flow in flows])
    order: dict[str, int] = {}
    keep = []
    for k, name in enumerate(terminals.element):
        if terminals.kind[k] == "capacitance" and name in order:
            current[:, order[name]] += current[:, k]
        else:
            order.setdefault(name, k)
            keep.append(k)
    keep.sort(key=lambda k: order[terminals.element[k]])
    at = np.array(keep, np.int64)
    bus = terminals.bus[at]
    sequence = current[:, at]
    counts = {name: int(c) for name, c in zip(model.lines.names, model.lines.count, strict=True)}
    for sets in model.winding_sets:
        counts |= {name: int(c) for name, c in zip(sets.names, sets.count, strict=True)}
    return Terminals(
        element=tuple(terminals.element[k] for k in keep),
        kind=tuple(terminals.kind[k] for k in keep),
        side=tuple(terminals.side[k] for k in keep),
        bus=tuple(model.buses[k] for k in bus),
        bus_index=bus,
        count=np.array([counts.get(terminals.element[k], 1) for k in keep], np.int64),
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


def _deltas(model: Model, flows: SequenceFlows) -> tuple[DeltaCurrent, ...]:
    out = []
    for sets, winding in zip(model.winding_sets, flows.delta, strict=True):
        for unit, w in zip(*np.nonzero(sets.kind == DELTA), strict=True):
            ampere = winding[unit, w] * sets.sense[unit, w] * model.base_power / (3 * sets.rated[unit, w])
            bus = model.buses[sets.bus[unit, w]]
            out.append(DeltaCurrent(sets.names[unit], sets.sides[w], bus, complex(ampere)))
    return tuple(out)


def _home(model: Model, place: int, flows: SequenceFlows, terminals: TerminalMap) -> tuple[HomePath, ...]:
    """Every path from earth into the network that is joined by metal to the faulted place."""
    here = model.galvanic == model.galvanic[place]
    ampere = star_current_base(model)
    out = [
        HomePath(name, complex(-flows.star[k] * ampere[k]))
        for k, name in enumerate(model.stars.names)
        if here[model.stars.bus[k]] and model.stars.kinds[k] != "isolated"
    ]
    base_i = base_current(model.nominal, model.base_power)[terminals.bus]
    earth = -3 * flows.to_earth * base_i
    inside = here[terminals.bus]
    for k, kind in enumerate(terminals.kind):
        if kind == "infeed" and inside[k]:
            out.append(HomePath(terminals.element[k], complex(earth[k])))
    charging = np.array([kind in ("line", "capacitance") for kind in terminals.kind], bool) & inside
    for nominal in np.unique(model.nominal[terminals.bus[charging & (flows.to_earth != 0)]]).tolist():
        at = charging & (model.nominal[terminals.bus] == nominal)
        out.append(HomePath(f"capacitance {nominal / 1000:g} kV", complex(earth[at].sum())))
    return tuple(out)


def _check_home(home: tuple[HomePath, ...], residual: complex) -> None:
    if not home:
        return
    total = sum(path.current for path in home)
    size = max([1e-3, abs(residual)] + [abs(path.current) for path in home])  # from one milliampere
    if abs(total - residual) > 1e-7 * size:
        raise CheckError(
            f"the paths home carry {abs(total):.6g} A, the fault sends {abs(residual):.6g} A into earth;"
            " the answer is withheld"
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
        if zero.resonant[zero.free.part[place]]:
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
