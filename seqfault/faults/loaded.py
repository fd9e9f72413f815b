"""The loaded state before a fault: who holds what, the voltages, and the current of every terminal."""

from __future__ import annotations

import numpy as np
from msgspec.structs import replace

from seqfault.errors import CaseError, quoted
from seqfault.faults.flows import TerminalMap, sequence_flows, terminal_map
from seqfault.faults.standing import Loading
from seqfault.model.elements import Complex, Ints, Model, Operating, WindingSets
from seqfault.networks.connectivity import connected
from seqfault.networks.power_flow import Conditions, power_flow


def loaded(model: Model) -> tuple[Model, Loading | None]:
    """``model`` with its loads as impedances at the voltages of the loaded state, and that state.

    On a flat profile the model as it is and None. Raises ``CaseError`` where nothing balances the power
    of a part, or two sources hold one bus at different voltages; ``NoAnswerError`` where no voltages
    carry the load.
    """
    state = model.operating
    if state is None:
        return model, None
    machines = next(s for s in model.winding_sets if s.kind_of_record == "generator")
    label = connected(model)
    conditions, reference = _conditions(model, state, machines, label)
    flat = np.full(model.common, float(np.abs(model.before).max(initial=1.0)))
    v = power_flow(model, conditions, flat)
    bus_v = v[model.node]
    sources = model.sources
    size = np.abs(v[sources.node]) ** 2
    is_load = np.array([kind == "load" for kind in sources.kinds], bool)
    y = np.where(is_load & (size > 0), state.drawn.conj() / np.where(size > 0, size, 1), 0)
    admittance = sources.admittance.copy()
    admittance[1:, is_load] = y[is_load]
    admittance[0, is_load & state.earthed] = y[is_load & state.earthed]
    out = replace(model, before=bus_v, sources=replace(sources, admittance=admittance))
    flows = sequence_flows(out, 1, v, v).terminal
    terminals = terminal_map(out)
    current = _of_sources(out, state, machines, terminals, flows, v, reference)
    return out, Loading(bus_v, current, _notes(out, state, machines, reference))


def _conditions(
    model: Model, state: Operating, machines: WindingSets, label: Ints
) -> tuple[Conditions, Ints]:
    """What every node must do, and the generators that are references."""
    n = model.common
    held = np.full(n, np.nan)
    by: dict[int, str] = {}
    complaints = []

    def hold(node: int, voltage: float, name: str) -> None:
        if node in by and held[node] != voltage:
            bus = model.buses[int(np.flatnonzero(model.node == node)[0])]
            complaints.append(
                f"bus {quoted(bus)}: {by[node]} holds {held[node]:g} pu and {name} {voltage:g} pu; in the"
                " loaded state they must agree"
            )
        held[node] = voltage
        by.setdefault(node, name)

    sources = model.sources
    infeeds = [k for k, kind in enumerate(sources.kinds) if kind == "infeed"]
    for k in infeeds:
        hold(int(sources.node[k]), float(state.held[k]), f"infeed {quoted(sources.names[k])}")
    reference = np.zeros(n, bool)
    reference[sources.node[infeeds]] = True
    supplied = set(label[sources.node[infeeds]].tolist())
    alone: dict[int, list[int]] = {}
    for k, name in enumerate(machines.names):
        node = int(machines.node[k, 0])
        hold(node, float(state.holds[k]), f"generator {quoted(name)}")
        if int(label[node]) not in supplied:
            alone.setdefault(int(label[node]), []).append(k)
        elif np.isnan(state.fed[k]):
            complaints.append(
                f"generator {quoted(name)}, power: this is missing; the loaded state needs what it feeds,"
                ' as in "4 MW", or "0 MW" where it idles'
            )
    balancing = []
    for members in alone.values():
        free = [k for k in members if np.isnan(state.fed[k])]
        if len(free) == 1:
            balancing.append(free[0])
            reference[machines.node[free[0], 0]] = True
            continue
        names = ", ".join(quoted(machines.names[k]) for k in (free or members))
        bus = quoted(model.buses[int(machines.bus[members[0], 0])])
        complaints.append(
            f"the part of bus {bus} has no infeed, so one generator balances its power: leave power off"
            + (f" one of {names}" if not free else f" one only of {names}, and state it for the others")
        )
    if complaints:
        raise CaseError(complaints)
    power = np.zeros(n, complex)
    np.add.at(power, sources.node, -state.drawn)
    np.add.at(power, machines.node[:, 0], np.nan_to_num(state.fed))
    live = np.zeros(n, bool)
    fed = set(label[sources.node[infeeds]].tolist()) | {int(label[machines.node[k, 0]]) for k in balancing}
    live[np.isin(label, np.array(sorted(fed), np.int64))] = True
    return Conditions(reference, np.where(live, held, np.nan), power * live, live), np.array(
        balancing, np.int64
    )


def _of_sources(
    model: Model,
    state: Operating,
    machines: WindingSets,
    terminals: TerminalMap,
    flows: Complex,
    v: Complex,
    reference: Ints,
) -> Complex:
    """``flows`` with what sources, motors and loads carry: their power, and what balances each node."""
    current = flows.copy()
    kinds = np.array(terminals.kind)
    fixed = np.isin(kinds, ("motor", "load"))
    varying = np.isin(kinds, ("infeed", "generator"))
    at = terminals.node
    drawn = dict(zip(model.sources.names, state.drawn.tolist(), strict=True))
    for k in np.flatnonzero(fixed).tolist():
        here = v[at[k]]
        current[k] = np.conj(drawn[terminals.element[k]] / here) if here else 0
    current[varying] = 0
    total = np.zeros(model.common, complex)
    np.add.at(total, at[at >= 0], current[at >= 0])
    strength = {
        name: abs(complex(y))
        for name, y in zip(model.sources.names, model.sources.admittance[1], strict=True)
    }
    fed = dict(zip(machines.names, state.fed.tolist(), strict=True))
    balancing = {machines.names[k] for k in reference}
    ratings = dict(zip(machines.names, state.rating.tolist(), strict=True))
    for node in set(at[varying].tolist()):
        rows = np.flatnonzero(varying & (at == node)).tolist()
        if not v[node]:
            continue
        needed = -v[node] * np.conj(total[node])  # power drawn by the sources, negative where they feed
        free = [k for k in rows if terminals.kind[k] == "infeed" or terminals.element[k] in balancing]
        others = [k for k in rows if k not in free]
        power = {k: complex(-fed[terminals.element[k]], 0) for k in others}
        rest = needed - sum(power.values())
        if free:
            weights = [strength.get(terminals.element[k], 1.0) for k in free]
            power |= {k: rest * w / sum(weights) for k, w in zip(free, weights, strict=True)}
        else:
            weights = [ratings[terminals.element[k]] for k in others]
            for k, w in zip(others, weights, strict=True):
                power[k] += 1j * needed.imag * w / sum(weights)
        for k, s in power.items():
            current[k] = np.conj(s / v[node])
    return current


def _notes(model: Model, state: Operating, machines: WindingSets, reference: Ints) -> tuple[str, ...]:
    out = []
    infeeds = [
        name
        for name, kind in zip(model.sources.names, model.sources.kinds, strict=True)
        if kind == "infeed"
    ]
    if len(infeeds) > 1:
        out.append("loaded state: every infeed holds its voltage at the same angle")
    if len(machines.names):
        out.append("loaded state: generators hold their voltage whatever reactive power that takes")
    for k in reference.tolist():
        out.append(f"loaded state: generator {quoted(machines.names[k])} balances the power of its part")
    return tuple(out)
