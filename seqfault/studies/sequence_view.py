"""The three sequence networks as seen from one bus: branches, the reference, and what is open.

All impedances are referred to the place through the ratios on the way: a node's potential is scaled so
that every unit passed is a plain branch. Where a loop of unequal ratios closes, its last unit is drawn as
a π, so that what is drawn is the network solved.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from seqfault.faults.network import Network
from seqfault.model.elements import DELTA, ISOLATED, STAR, Model
from seqfault.model.windings import incidence
from seqfault.networks.factors import SequenceFactor
from seqfault.studies.sequence_links import REFERENCE, Link, Links, line_links
from seqfault.studies.sequence_units import unit_links

ALIKE = 1e-9
"""Ratios that differ by less are equal, as in the model."""
SEEN = 1e-9


@dataclass(frozen=True)
class Node:
    """A node: ``kind`` bus, star point, open end or inside; ``names`` the buses, or what it is of.

    ``factor`` is what impedances there are multiplied by to be referred to the place.
    """

    kind: str
    names: tuple[str, ...]
    factor: float


@dataclass(frozen=True)
class Branch:
    """Impedance ``z`` (per unit, at the place) between nodes; ``end`` is −1 at the reference.

    ``elements`` and ``part`` as in ``Link``, and ``ratio`` for what unequal ratios in a loop leave.
    """

    start: int
    end: int
    z: complex
    elements: tuple[str, ...]
    part: str


@dataclass(frozen=True)
class Opening:
    """What is connected at ``node`` and passes nothing in this sequence, and why.

    ``reason``: delta, isolated, unbalanced (no winding balances it), neutral out, source (an infeed
    stated open), motor, capacitor (its star point is not earthed) or converter.
    """

    node: int
    element: str
    side: str
    reason: str


@dataclass(frozen=True)
class SequenceView:
    """One sequence network as far as it hangs together with the place, which is node 0.

    ``thevenin`` (per unit) is what the program solved with, infinite where there is no path;
    ``base`` ohm of one per unit at the place; ``nominal`` V.
    """

    sequence: int
    place: str
    state: str
    nominal: float
    base: float
    base_power: float
    thevenin: complex
    nodes: tuple[Node, ...]
    branches: tuple[Branch, ...]
    openings: tuple[Opening, ...]


def sequence_views(network: Network, place: str) -> tuple[SequenceView, SequenceView, SequenceView]:
    """The networks of sequence 1, 2 and 0 seen from the bus ``place``.

    Raises ``RequestError`` for a place that is no bus in service.
    """
    network.check_place(place)
    one, two, zero = (_view(network, place, sequence) for sequence in (1, 2, 0))
    return one, two, zero


def _view(network: Network, place: str, sequence: int) -> SequenceView:
    model = network.model
    bus = model.index[place]
    links = Links(model.nodes if sequence == 0 else model.common)
    line_links(model, sequence, links)
    unit_links(model, sequence, links)
    at = int(model.node[bus])
    scale = _scales(links, at)
    number = {node: k for k, node in enumerate(scale)}
    names = _names(model, links)
    nodes = tuple(Node(*names[node], factor=k * k) for node, k in scale.items())
    branches = tuple(
        Branch(number[b.start], number.get(b.end, REFERENCE), b.z, b.elements, b.part)
        for link in links.rows
        if link.start in scale
        for b in _referred(link, scale)
    )
    openings = tuple(
        Opening(number[o.node], o.element, o.side, o.reason)
        for o in _openings(network, sequence)
        if o.node in number
    )
    nominal = float(model.nominal[bus])
    return SequenceView(
        sequence=sequence,
        place=place,
        state=model.state,
        nominal=nominal,
        base=nominal**2 / model.base_power,
        base_power=model.base_power,
        thevenin=_thevenin(network.sequences[sequence], at),
        nodes=nodes,
        branches=branches,
        openings=openings,
    )


def _thevenin(factor: SequenceFactor, node: int) -> complex:
    """Driving-point impedance, infinite where nothing fixes the potential."""
    at = np.array([node], np.int64)
    free, _ = factor.slack_at(at)
    if (np.abs(free) > SEEN).any():
        return complex(np.inf)
    return complex(factor.port_impedance(at, factor.columns(at))[0, 0])


def _scales(links: Links, place: int) -> dict[int, float]:
    """Scale of the potential of every node that hangs together with ``place``, nearest first."""
    beside: dict[int, list[tuple[int, float]]] = {}
    for link in links.rows:
        if link.end != REFERENCE:
            ratio = link.weight[1] / link.weight[0]
            beside.setdefault(link.start, []).append((link.end, ratio))
            beside.setdefault(link.end, []).append((link.start, 1 / ratio))
    scale = {place: 1.0}
    queue = [place]
    for here in queue:
        for there, ratio in beside.get(here, ()):
            if there not in scale:
                scale[there] = scale[here] * ratio
                queue.append(there)
    return scale


def _referred(link: Link, scale: dict[int, float]) -> Iterator[Branch]:
    start, end = link.start, link.end
    a = link.weight[0] / scale[start]
    if end == REFERENCE:
        yield Branch(start, end, link.z / a**2, link.elements, link.part)
        return
    b = link.weight[1] / scale[end]
    if abs(a - b) <= ALIKE * abs(a):
        yield Branch(start, end, link.z / a**2, link.elements, link.part)
        return
    yield Branch(start, end, link.z / (a * b), link.elements, link.part)
    yield Branch(start, REFERENCE, link.z / (a * (a - b)), link.elements, "ratio")
    yield Branch(end, REFERENCE, link.z / (b * (b - a)), link.elements, "ratio")


def _names(model: Model, links: Links) -> list[tuple[str, tuple[str, ...]]]:
    """Kind and names of every node."""
    buses: list[list[str]] = [[] for _ in range(model.common)]
    for name, node in zip(model.buses, model.node.tolist(), strict=True):
        buses[node].append(name)
    ends: dict[int, str] = {}
    lines = model.lines
    for end, k in zip(*np.nonzero((lines.nodes >= 0) & ~lines.closed), strict=True):
        ends[int(lines.nodes[end, k])] = f"{lines.names[k]}@{model.buses[lines.ends[end, k]]}"
    out = [("open end", (ends[k],)) if k in ends else ("bus", tuple(own)) for k, own in enumerate(buses)]
    stars = {int(n): name for n, name in zip(model.stars.node, model.stars.names, strict=True)}
    out += [("star point", (stars[k],)) for k in range(model.common, links.nodes)]
    return [*out, *(("inside", (name,)) for name in links.inside)]


def _openings(network: Network, sequence: int) -> Iterator[Opening]:
    """What passes nothing, at the nodes of the model."""
    model = network.model
    if sequence:
        converters = model.converters
        for name, node in zip(converters.names, converters.node.tolist(), strict=True):
            yield Opening(node, name, "", "converter")
        return
    for sets in reversed(model.winding_sets):
        inc = incidence(sets, 0, model.stars.node)
        carries = (inc.admittance != 0).any(axis=2)
        for unit, name in enumerate(sets.names):
            for w, kind in enumerate(sets.kind[unit].tolist()):
                side = sets.sides[w]
                node, star = int(sets.node[unit, w]), int(sets.star[unit, w])
                if kind == DELTA:
                    yield Opening(node, name, side, "delta")
                elif kind == ISOLATED:
                    yield Opening(node, name, side, "isolated")
                elif kind == STAR and not carries[unit, w]:
                    yield Opening(node, name, side, "unbalanced")
                elif kind == STAR and _neutral_out(model, star):
                    yield Opening(node, name, side, "neutral out")
    sources, banks = model.sources, model.capacitances
    for shunts, reasons in ((sources, {"infeed": "source", "motor": "motor"}), (banks, {})):
        for k in np.flatnonzero(shunts.admittance[0] == 0).tolist():
            reason = reasons.get(shunts.kinds[k], "capacitor")
            yield Opening(int(shunts.node[k]), shunts.names[k], "", reason)


def _neutral_out(model: Model, star: int) -> bool:
    stars = model.stars
    return stars.kinds[star] == "neutral" and not bool(np.isfinite(stars.impedance[star]))
