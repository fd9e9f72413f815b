"""What earth-fault relays see of earth faults, for every impedance of one neutral.

A relay's current is linear in the fault's zero-sequence current, the neutral device's current and the
free potentials; each is a ratio of two linear forms in the device over one bottom (``neutral_ports``), and
so is the relay's current. Two devices tell its top.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

import msgspec
import numpy as np
from msgspec.structs import replace

from seqfault.case.arrangement import Label
from seqfault.equations.per_unit import base_current
from seqfault.faults.flows import sequence_flows, terminal_map
from seqfault.faults.neutral_faults import driven_voltage
from seqfault.faults.neutral_ports import Form, KindForms, NeutralPorts, device_of
from seqfault.faults.ports import CANCELLED
from seqfault.model.elements import Complex, Ints, Model
from seqfault.networks.factors import SEEN, SequenceFactor

ENDS: Complex = np.eye(2, dtype=complex)
"""Solid and open, rows β and α: two devices tell a linear form in them."""
BETWEEN: Complex = np.array([[1, 0.4 - 0.1j], [0.3 + 0.2j, 1]])
"""Two others, where the network has no answer at an end."""


class RelayView(msgspec.Struct, frozen=True):
    """Where an earth-fault relay looks: a terminal (``element``, ``bus``) or the star point ``star``.

    ``pickup`` A primary. Of a record that stands for several circuits it sees one.
    """

    name: str
    element: str
    bus: str
    star: str
    pickup: float


class RelayForms(msgspec.Struct, frozen=True, eq=False):
    """Residual (or neutral) current of one relay: a form for each kind of fault, ``scale`` A a unit."""

    view: RelayView
    forms: tuple[Form, Form]
    scale: float


def relay_forms(
    zero: SequenceFactor,
    ports: NeutralPorts,
    view: RelayView,
    labels: Mapping[tuple[str, str], Label | None] = MappingProxyType({}),
) -> RelayForms | None:
    """The forms of ``view`` in the zero-sequence network ``zero`` without the device.

    ``labels`` name the terminals of a network made for a place along a line.

    None where it is not in service, or more free potentials are tied by nothing than two voltages tell.
    """
    model = ports.model
    impedance = model.stars.impedance.copy()
    impedance[ports.star] = np.inf
    opened = replace(model, stars=replace(model.stars, impedance=impedance))
    picked = _pick(model, view, labels)
    if picked is None:
        return None
    rows, star, scale = picked
    response = _responses(opened, zero, ports, rows, star)
    own = view.star == model.stars.names[ports.star]
    forms = []
    for kind in ports.forms:
        regular = (np.abs(kind.bottom) > CANCELLED * kind.size).all()
        probes = ENDS if regular else BETWEEN
        i0, j = kind.sequence[0].at(probes), kind.neutral.at(probes)
        u = _free_potentials(kind, response, probes)
        if u is None:
            return None
        value = j if own else response.fault * i0 + response.device * j + response.free @ u
        top = (value * (kind.bottom @ probes)) @ np.linalg.inv(probes)
        forms.append(Form(np.asarray(top), kind.bottom))
    return RelayForms(view, (forms[0], forms[1]), scale)


def _pick(
    model: Model, view: RelayView, labels: Mapping[tuple[str, str], Label | None]
) -> tuple[Ints, int, float] | None:
    """Terminals (t,) a relay's current is the sum of, or its star point, and A of one per unit."""
    if view.star:
        if view.star not in model.stars.names:
            return None
        star = model.stars.names.index(view.star)
        return (
            np.zeros(0, np.int64),
            star,
            3 * float(base_current(model.stars.base[star], model.base_power)),
        )
    t = terminal_map(model)
    at = model.index.get(view.bus, -1)

    def element(k: int) -> str:
        label = labels.get((t.element[k], t.side[k]))
        return t.element[k] if label is None else label.element

    mine = [k for k in np.flatnonzero(t.bus == at).tolist() if t.closed[k] and element(k) == view.element]
    rows = np.array(mine, np.int64)
    if at < 0 or not len(rows):
        return None
    scale = 3 * float(base_current(model.nominal[at], model.base_power)) / int(t.count[rows[0]])
    return rows, -1, scale


def relay_currents(ports: NeutralPorts, relay: RelayForms, ohms: Complex) -> Complex:
    """Current (2, n) A of ``relay`` for both kinds of fault and ``ohms`` (n,) of the device."""
    device = device_of(np.asarray(ohms, complex), ports.device_base)
    driven = driven_voltage(ports, device)
    return np.stack([form.at(device) * driven[k] * relay.scale for k, form in enumerate(relay.forms)])


class _Response(msgspec.Struct, frozen=True, eq=False):
    """A relay's current for a unit drawn at the place (``fault``), at the star point (``device``), and of
    each free potential (``free`` (k,)).

    ``above`` (2, 2) what the two do to the potentials of place and star point above the references,
    ``direction`` (2, k) what the free ones do; ``compliance`` (k, k) what ties these to earth, None where
    nothing ties one of them. ``bound`` (k, t) spans those that something ties, and ``tied`` (t, k) are the
    currents to earth of each potential, along these.
    """

    fault: complex
    device: complex
    free: Complex
    above: Complex
    direction: Complex
    compliance: Complex | None
    bound: Complex
    tied: Complex


def _responses(model: Model, zero: SequenceFactor, ports: NeutralPorts, rows: Ints, star: int) -> _Response:
    place, device = int(model.node[ports.place]), int(model.stars.node[ports.star])
    nodes = np.array([place, device])
    columns = zero.columns(nodes)

    def seen(w: Complex, v: Complex) -> complex:
        flows = sequence_flows(model, 0, w, v)
        return complex(flows.star[star] if star >= 0 else flows.terminal[rows].sum())

    parts = [p for p in dict.fromkeys(zero.free.part[nodes].tolist()) if p >= 0]
    sizes = [int(zero.free.dimension[p]) for p in parts]
    k = sum(sizes)
    free: list[complex] = []
    direction, compliance = np.zeros((2, k), complex), np.zeros((k, k), complex)
    for part, size in zip(parts, sizes, strict=True):
        inside, at = zero.free.part == part, len(free)
        for q in range(size):
            w = np.where(inside, -zero.drop[:, q], 0)
            v = np.where(inside, zero.free.basis[:, q] - zero.drop[:, q], 0)
            direction[:, at + q] = np.where(zero.free.part[nodes] == part, zero.direction[nodes, q], 0)
            free.append(seen(w, v))
        compliance[at : at + size, at : at + size] = zero.compliance[part, :size, :size]
    bound, tied = _ties(zero, parts, sizes)
    return _Response(
        fault=seen(-columns[:, 0], -columns[:, 0]),
        device=seen(-columns[:, 1], -columns[:, 1]),
        free=np.array(free, complex),
        above=-columns[nodes],
        direction=direction,
        compliance=compliance if bound.shape[1] == k else None,
        bound=bound,
        tied=tied,
    )


def _ties(zero: SequenceFactor, parts: list[int], sizes: list[int]) -> tuple[Complex, Complex]:
    """``bound`` and ``tied`` of a response, over all ``parts``."""
    bound: list[Complex] = []
    tied: list[Complex] = []
    for part, size in zip(parts, sizes, strict=True):
        inside, slacks = zero.free.part == part, int(zero.slacks[part])
        basis, drop = zero.free.basis[inside, :size], zero.drop[inside, :size]
        load = zero.stamps.weak[inside, None] * basis
        own = np.eye(size, dtype=complex)
        if slacks:
            own = np.linalg.svd(zero.slack[part, :size, :slacks])[0][:, slacks:]
        bound.append(own)
        tied.append(own.T @ (basis.T @ load - load.T @ drop))
    return _blocks(bound), _blocks(tied)


def _blocks(each: list[Complex]) -> Complex:
    """The matrices along a diagonal."""
    out = np.zeros((sum(len(m) for m in each), sum(m.shape[1] for m in each)), complex)
    row = column = 0
    for m in each:
        out[row : row + len(m), column : column + m.shape[1]] = m
        row, column = row + len(m), column + m.shape[1]
    return out


def _free_potentials(kind: KindForms, response: _Response, probes: Complex) -> Complex | None:
    """Free potentials (k, n) at the ``probes``.

    From what ties them to earth; where nothing ties some, from the voltages of place and star point as
    well: the place's zero-sequence voltage is a third of the phases' sum, and faulted phases are at zero.
    None where all these do not tell what the relay sees of them.
    """
    drawn = np.stack([kind.sequence[0].at(probes), kind.neutral.at(probes)])
    if response.compliance is not None:
        return np.asarray(-response.compliance @ response.direction.T @ drawn)
    place = np.sum([form.at(probes) for form in kind.sound], axis=0) / 3
    stood = np.stack([place, kind.star.at(probes)]) - response.above @ drawn
    effect = np.where(np.abs(response.direction) > SEEN, response.direction, 0)
    told = np.concatenate([response.tied, effect])
    amount = np.concatenate([-response.bound.T @ response.direction.T @ drawn, stood])
    size = np.abs(told).max(axis=1, initial=0.0)
    told, amount = told[size > 0] / size[size > 0, None], amount[size > 0] / size[size > 0, None]
    left, values, right = np.linalg.svd(told)
    rank = int((values > SEEN).sum())
    untold = right[rank:] @ response.free
    if np.abs(untold).max(initial=0.0) > SEEN * np.abs(response.free).max(initial=0.0):
        return None
    along = (left.conj().T @ amount)[:rank] / values[:rank, None]
    return np.asarray(right[:rank].conj().T @ along)
