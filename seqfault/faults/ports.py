"""Faults as branches on the phases of ports.

With E the incidence of the fault branches, Z the port impedances in phase coordinates, v the voltages
before the fault and B what a unit of each free potential of a floating part puts on the phases:

    (Eᵀ Z E + Z_f) i − Eᵀ B u = Eᵀ v,        Σ d i0 = 0 over the ports of each floating part

Source: fault impedance matrices in phase coordinates, as in M. Laughton, "Analysis of unbalanced
polyphase networks by the method of phase co-ordinates", Proc. IEE 115 (1968) (from memory). Positive
sequence between ports of clocks m and n turns by −30° (m − n), negative by +30° (m − n).
"""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.equations.symmetrical import TO_PHASES, TO_SEQUENCE, Complex, clock_turn
from seqfault.errors import NoAnswerError
from seqfault.faults.kinds import Fault, branches
from seqfault.model.elements import Floats, Ints
from seqfault.networks.factors import SEEN, SequenceNetworks

Slack = dict[tuple[int, int], complex]
SINGULAR = 1e-13
CANCELLED = 1e-12
"""A loop whose impedances cancel to this share of their sizes is in series resonance."""


class PortSolution(msgspec.Struct, frozen=True, eq=False):
    """Currents of the faults, in per unit of each place.

    ``current`` (3, r) sequence and ``phases`` (3, r) phase currents from the network into each fault, at
    their true angles, sound phases exactly zero;
    ``impedance`` (3, r) driving-point impedances, infinite where there is no path; ``columns`` of each
    sequence for the ports; ``slack`` the free potentials of each sequence, and ``unseen`` the mixtures
    of zero-sequence ones that no fault branch sees.
    """

    current: Complex
    phases: Complex
    impedance: Complex
    columns: tuple[Complex, Complex, Complex]
    slack: tuple[Slack, Slack, Slack]
    unseen: tuple[Slack, ...]


def solve_ports(
    networks: SequenceNetworks, places: Ints, faults: Sequence[Fault], clocks: Ints, lifted: Complex
) -> PortSolution:
    """Solve ``faults`` at the buses ``places`` (r,), all at once.

    ``clocks`` (r,) are the displacements of the places behind the reference of angles; ``lifted`` (r,)
    what other sources add to the positive-sequence voltage before the fault, in the frame of each
    place. Raises
    ``NoAnswerError`` where the equations have no unique solution.
    """
    model = networks.model
    nodes = model.node[places]
    r = len(nodes)
    turn = np.stack([np.ones(r), clock_turn(clocks), clock_turn(clocks).conj()])
    columns = tuple(networks[s].columns(nodes) for s in range(3))
    z = np.stack([networks[s].port_impedance(nodes, columns[s]) for s in range(3)])
    z = z * turn[:, :, None] * turn[:, None, :].conj()
    before = (model.before[places] + lifted) * turn[1]
    v = before[:, None] * TO_PHASES[:, 1]

    shapes = [branches(fault) for fault in faults]
    widths = [e.shape[1] for e, _ in shapes]
    start = np.concatenate([[0], np.cumsum(widths)])
    incidence = np.zeros((r, 3, start[-1]), complex)
    z_fault = np.zeros((start[-1], start[-1]), complex)
    for k, (e, zf) in enumerate(shapes):
        own = slice(start[k], start[k + 1])
        incidence[k, :, own] = e
        z_fault[own, own] = zf * (model.base_power / model.nominal[places[k]] ** 2)
    # Components of each loop first: one clear of earth has exactly no zero sequence, whose impedance
    # may drown the others in phase coordinates.
    seen = np.einsum("ps,ipa->sia", TO_PHASES, incidence)
    driven = np.einsum("sp,ipa->sia", TO_SEQUENCE, incidence)
    matrix = np.einsum("sia,sij,sjb->ab", seen, z, driven) + z_fault
    terms = np.einsum("sia,sij,sjb->ab", abs(seen), abs(z), abs(driven)) + abs(z_fault)
    rhs = np.einsum("ipa,ip->a", incidence, v)

    lift, constraint, keys, alone = [], [], [], []
    for s in range(3):
        free, names = networks[s].slack_at(nodes)
        for q, name in enumerate(names):
            lift.append((free[:, q] * turn[s]) @ seen[s])
            constraint.append((free[:, q] * turn[s].conj()) @ driven[s])
            keys.append((s, name))
            touched = np.flatnonzero(np.abs(free[:, q]) > SEEN)
            if len(touched) == 1:
                alone.append((s, touched[0]))
    width = int(start[-1])
    up = np.array(lift, complex).reshape(len(keys), width).T
    i, u = _solve(matrix, terms, rhs, up, np.array(constraint, complex).reshape(len(keys), width))

    current = driven @ i
    phases = np.einsum("ipa,a->pi", incidence, i)
    for s, held in alone:
        current[s, held] = 0  # to the last bit, where elimination leaves a rounding
    slack: tuple[Slack, Slack, Slack] = ({}, {}, {})
    for q, (s, name) in enumerate(keys):
        slack[s][name] = complex(u[q])
    unseen = tuple(
        {name: complex(share) for (s, name), share in zip(keys, column, strict=True) if s == 0}
        for column in _null_basis(up).T
    )
    own_z = np.stack([np.diagonal(z[s]) for s in range(3)])
    for s in range(3):
        free, _ = networks[s].slack_at(nodes)
        own_z[s, (np.abs(free) > SEEN).any(axis=1)] = np.inf
    return PortSolution(current, phases, own_z, (columns[0], columns[1], columns[2]), slack, unseen)


def _solve(
    z: Complex, terms: Floats, v: Complex, lift: Complex, constraint: Complex
) -> tuple[Complex, Complex]:
    """Currents i with ``constraint`` i = 0 exactly, and the free potentials u that go with them.

    ``terms`` (b, b) is the size of what ``z`` is the sum of.
    """
    free = _null_basis(constraint)
    if free.shape[1]:
        # The lift of a floating part does no work on currents that obey its constraint.
        work = free.conj().T if not len(constraint) else _null_basis(lift.T).T
        small = work @ z @ free
        balance = np.abs(small).max(axis=1, initial=0.0)
        size = (np.abs(work) @ terms @ np.abs(free)).max(axis=1, initial=0.0)
        if (balance <= CANCELLED * size).any() or np.linalg.cond(small / balance[:, None]) > 1 / SINGULAR:
            raise NoAnswerError(
                "the fault current has no limit: the network's impedances to this fault cancel (series"
                " resonance) or are zero; check reactances of opposite sign"
            )
        i: Complex = free @ np.linalg.solve(small, work @ v)
    else:
        i = np.zeros(len(v), complex)
    if not lift.shape[1]:
        return i, np.zeros(0, complex)
    return i, np.asarray(np.linalg.lstsq(lift, z @ i - v, rcond=None)[0], complex)


def _null_basis(rows: Complex) -> Complex:
    """Basis (b, q) of the vectors that ``rows`` (k, b) map to zero, by elimination with pivots.

    Entries come out exact where the rows hold ones only, so that currents cancel to the last bit.
    """
    a = np.array(rows, complex)
    width = a.shape[1]
    pivots: list[int] = []
    scale = np.abs(a).max(initial=0.0)
    for _ in range(min(a.shape)):
        left = a[len(pivots) :]
        size = np.abs(left)
        if size.max(initial=0.0) <= 1e-9 * max(scale, 1e-300):
            break
        at, column = divmod(int(size.argmax()), width)
        top = len(pivots)
        a[[top, top + at]] = a[[top + at, top]]
        a[top] /= a[top, column]
        for other in range(len(a)):
            if other != top:
                a[other] -= a[other, column] * a[top]
        pivots.append(column)
    loose = [column for column in range(width) if column not in pivots]
    basis = np.zeros((width, len(loose)), complex)
    for q, column in enumerate(loose):
        basis[column, q] = 1
        for top, pivot in enumerate(pivots):
            basis[pivot, q] = -a[top, column]
    return basis
