"""A case in one state -> the model: one small function a kind of record.

Everything becomes per unit on the case's base power and the nominal voltage of the bus here, and
nowhere else.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from msgspec.structs import replace

from seqfault.case.reader import case_from_tree
from seqfault.case.records import Case
from seqfault.errors import CaseError, quoted
from seqfault.model.coils import ARC_SUPPRESSION, tuned_coils
from seqfault.model.context import MACHINES, Context, Machine
from seqfault.model.doubts import doubts, lost_earth, unearthed_buses
from seqfault.model.elements import STAR, Ints, Lines, Model, WindingSets
from seqfault.model.lines import lines
from seqfault.model.machines import generators, machine_capacitances, motors
from seqfault.model.operating import loads, operating
from seqfault.model.shunts import capacitors, converters, infeeds, joined
from seqfault.model.ties import closed_ties
from seqfault.model.transformers import transformer_sets
from seqfault.model.zigzag import zigzag_sets
from seqfault.model.zones import components, displacements, live_buses

__all__ = ["MACHINES", "Machine", "build_model"]


def build_model(
    case: Case, machine: Machine = "subtransient", base: tuple[Case, Model] | None = None
) -> Model:
    """The per-unit model of ``case`` with its machines behind the reactance named by ``machine``.

    ``base`` is the case in its base state and its model with the same machines, where these are at hand.
    Raises ``CaseError`` where vector groups do not close a loop, a reactance that is needed is not
    stated, or a coil has nothing to be tuned to.
    """
    home = case if case.state == "base" else base[0] if base else case_from_tree(case.tree, case.source)
    coils, noted, complaints = _coils(home, case, machine)
    c = Context(case, machine, coils)
    c.complaints += complaints
    for name, text in noted:
        c.ledger.note("neutral", name, text)
    model = _assemble(c)
    found = doubts(model, case)
    bare = unearthed_buses(model) if home is not case else ()
    if bare:
        whole = base[1] if base else _assemble(Context(home, machine, _coils(home, home, machine)[0]))
        found += lost_earth(model, bare, whole)
    return replace(model, warnings=(*model.warnings, *found))


def build_arranged(
    case: Case, like: Model, machine: Machine = "subtransient", links: Sequence[tuple[str, str]] = ()
) -> Model:
    """The model of ``case``, which is that of ``like`` with lines and terminals rewritten.

    ``links`` are pairs of its buses that breaks stand between. Coils keep the ohms they have in ``like``,
    and what was assumed and warned of there is not said again.
    """
    named = {n for n, record in case.neutrals.items() if record.kind == ARC_SUPPRESSION}
    coils = dict.fromkeys(named, complex(np.inf))  # of no winding in service
    for name, ohms in zip(like.stars.names, like.stars.impedance.tolist(), strict=True):
        if name in named:
            coils[name] = ohms
    return _assemble(Context(case, machine, coils, links))


def _coils(
    base: Case, case: Case, machine: Machine
) -> tuple[dict[str, complex], list[tuple[str, str]], list[str]]:
    """Ohm of the arc-suppression coils of ``case``, tuned in ``base``; what was assumed; complaints."""
    named = {n: r for n, r in base.neutrals.items() if r.kind == ARC_SUPPRESSION}
    here = {n for n, r in case.neutrals.items() if r.kind == ARC_SUPPRESSION}
    if not named and not here:
        return {}, [], []
    untuned = _assemble(Context(base, machine, dict.fromkeys(named, complex(np.inf))))
    states = {n: case.neutrals[n] for n in named if n in here}
    coils, noted, complaints = tuned_coils(untuned, named, states)
    for name in here:
        if name not in named:
            complaints.append(
                f"neutral {quoted(name)}, kind: this coil is not in the base case, which coils are tuned to"
            )
        if name not in named or case.neutrals[name].out:
            coils[name] = complex(np.inf)
    return coils, noted, complaints


def _assemble(c: Context) -> Model:
    case = c.case
    n = len(c.index)
    joined_nodes = int(c.node.max()) + 1 if n else 0
    wires, common = lines(c, joined_nodes)
    supplies = infeeds(c)
    machines = generators(c)
    running = motors(c)
    consumers, drawn = loads(c)
    sources = joined(joined(supplies, running), consumers)
    units = transformer_sets(c)
    sets = (machines, *units.sets, *zigzag_sets(c, units.zigzags))
    through = wires.closed.all(axis=0)
    near, far = c.links
    zone = components(
        joined_nodes,
        np.concatenate([wires.nodes[0, through], near]),
        np.concatenate([wires.nodes[1, through], far]),
    )
    clock, misfits = displacements(zone, zone[units.hv], zone[units.lv], units.clock, units.names)
    if c.complaints or misfits:
        raise CaseError([*c.complaints, *misfits], case.source)
    part = components(
        joined_nodes,
        np.concatenate([wires.nodes[0, through], near, units.hv]),
        np.concatenate([wires.nodes[1, through], far, units.lv]),
    )
    live = live_buses(part, np.concatenate([supplies.node, machines.node[:, 0]]))[c.node]
    _warn_of_dead(c, live, part[c.node])
    stars = c.stars.columns(common)
    state = operating(c, sources, drawn)
    return Model(
        title=case.title,
        state=case.state,
        machine=c.machine,
        sha256=case.sha256,
        frequency=case.frequency,
        base_power=case.base_power,
        buses=tuple(c.index),
        index=c.index,
        nominal=c.nominal,
        node=c.node,
        common=common,
        clock=clock[c.node],
        live=live,
        part=part[c.node],
        wired=_joined_by_metal(c, wires, (), stars.node, common),
        galvanic=_joined_by_metal(c, wires, sets, stars.node, common),
        before=np.where(live, complex(case.prefault.voltage.value), 0j),
        lines=wires,
        sources=sources,
        capacitances=joined(machine_capacitances(c), capacitors(c)),
        ties=closed_ties(case, c.index),
        converters=converters(c),
        winding_sets=sets,
        stars=stars,
        assumptions=c.ledger.entries(),
        warnings=(*case.warnings, *c.warnings),
        operating=state,
    )


def _joined_by_metal(
    c: Context, wires: Lines, sets: tuple[WindingSets, ...], star_node: Ints, common: int
) -> Ints:
    """Labels (common,) of the nodes joined by metal: lines, auto windings, neutrals that ``sets`` share."""
    standing = (wires.nodes >= 0).all(axis=0)
    metal = c.node[np.array(c.metal, np.int64).reshape(-1, 2)]
    near, far = c.links
    first = [wires.nodes[0, standing], metal[:, 0], near]
    second = [wires.nodes[1, standing], metal[:, 1], far]
    for each in sets:
        star = (each.kind == STAR) & (each.star >= 0)
        node = np.full_like(each.star, -1)
        if star.any():
            node[star] = star_node[each.star[star]]
        unit, winding = np.nonzero(node >= 0)
        first.append(each.node[unit, winding])
        second.append(node[unit, winding])
    size = common + int((star_node >= 0).sum())
    return components(size, np.concatenate(first), np.concatenate(second))[:common]


def _warn_of_dead(c: Context, live: Any, part: Ints) -> None:
    together: dict[int, list[str]] = {}
    for name, label, alive in zip(c.index, part.tolist(), live.tolist(), strict=True):
        if not alive:
            together.setdefault(label, []).append(name)
    for _, dead in sorted(together.items()):
        more = f" and {len(dead) - 6} more" if len(dead) > 6 else ""
        shown = ", ".join(map(quoted, dead[:6])) + more
        c.warnings.append(
            f"bus {shown}: no infeed or generator is connected here in this state;"
            " voltage and currents are 0"
        )
