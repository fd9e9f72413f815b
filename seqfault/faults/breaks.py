"""Breaks: what they cut off, and the current that flows on through their poles."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from msgspec.structs import replace

from seqfault.case.arrangement import Label
from seqfault.equations.symmetrical import to_sequence
from seqfault.errors import RequestError, quoted
from seqfault.faults.kinds import Fault
from seqfault.faults.solution import FaultState, Terminals
from seqfault.faults.standing import Standing
from seqfault.model.elements import Bools, Ints, Model
from seqfault.networks.connectivity import connected


def lost_buses(model: Model, standing: Sequence[Standing], where: Sequence[Ints]) -> Bools:
    """Buses (n,) that had a source before the breaks and have none behind them."""
    if not any(len(at) == 2 for at in where):
        return np.zeros(len(model.buses), bool)
    joined = [at for each, at in zip(standing, where, strict=True) if len(at) == 2 and _passes(each)]
    near = model.node[np.array([at[0] for at in joined], np.int64)]
    far = model.node[np.array([at[1] for at in joined], np.int64)]
    return np.asarray(model.live & ~_fed(model, near, far)[model.node])


def _fed(model: Model, near: Ints, far: Ints) -> Bools:
    """Nodes (n,) that a source reaches, the nodes ``near`` and ``far`` joined."""
    part = connected(model, near, far)
    infeeds = np.array([kind == "infeed" for kind in model.sources.kinds], bool)
    sources = [model.sources.node[infeeds]]
    sources += [sets.node[:, 0] for sets in model.winding_sets if sets.kind_of_record == "generator"]
    return np.asarray(np.isin(part, part[np.concatenate(sources)]))


def fallen_side(model: Model, fault: Fault, names: tuple[str, str], sides: tuple[str, str]) -> int:
    """Which of the ``sides`` (buses) of a break lies on earth; ``names`` is what they are called.

    Raises ``RequestError`` where ``fault.fallen`` is neither, or source and load cannot be told apart.
    """
    if fault.fallen in names:
        return names.index(fault.fallen)
    choices = f"{quoted(names[0])} or {quoted(names[1])}"
    if fault.fallen not in ("source", "load"):
        raise RequestError(f"fallen {quoted(fault.fallen)}: write source or load, or the side: {choices}")
    nothing = np.zeros(0, np.int64)
    fed = _fed(model, nothing, nothing)[model.node[[model.index[bus] for bus in sides]]]
    if fed.all() or not fed.any():
        which = "both sides have a source" if fed.all() else "neither side has a source"
        raise RequestError(f"fallen {quoted(fault.fallen)}: {which} behind the break; write {choices}")
    return int(fed.argmax()) if fault.fallen == "source" else int(fed.argmin())


def _passes(standing: Standing) -> bool:
    return len(standing.fault.phases) < 3


def with_breaks(
    terminals: Terminals, standing: Sequence[Standing], faults: Sequence[FaultState], model: Model
) -> Terminals:
    """``terminals`` and both sides of every break."""
    for each, state in zip(standing, faults, strict=True):
        if state.through is None or state.sides is None:
            continue
        passing = to_sequence(state.through)
        terminals = terminals.extended(
            (each.joint, each.joint),
            "tie",
            ("from", "to"),
            np.array([model.index[bus] for bus in state.sides], np.int64),
            model.buses,
            np.stack([passing, -passing], axis=1),
        )
    return terminals


def relabelled(terminals: Terminals, labels: Mapping[tuple[str, str], Label | None]) -> Terminals:
    """``terminals`` as answers name them; those labelled None are left out."""
    if not labels:
        return terminals
    element, kind, side = [], [], []
    keep = []
    rows = zip(terminals.element, terminals.kind, terminals.side, strict=True)
    for k, (name, own, end) in enumerate(rows):
        label = labels.get((name, end), Label(name, own, end))
        if label is None:
            continue
        keep.append(k)
        element.append(label.element)
        kind.append(label.kind)
        side.append(label.side)
    at = np.array(keep, np.int64)
    return replace(
        terminals,
        element=tuple(element),
        kind=tuple(kind),
        side=tuple(side),
        bus=tuple(terminals.bus[k] for k in keep),
        bus_index=terminals.bus_index[at],
        count=terminals.count[at],
        sequence=terminals.sequence[:, at],
    )
