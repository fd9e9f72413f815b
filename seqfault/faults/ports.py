"""Faults as loops on the phases of ports: shunt and series faults, any number at once.

With E the incidence of the loops, Z the port impedances in phase coordinates, v the voltages before the
fault, h the currents that flowed out of the ports before it (through poles that open) and B what a unit
of each free potential of a floating part puts on the phases:

    Eᵀ (v − Z (E i − h) + B u) = Z_f i,        d · (E i − h) = 0 for each free potential

so that a pole that opens is a port of the network opened in all three, its sound poles closed loops of
no impedance, and the voltage that drives them Z h: on a flat profile nothing.

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
from seqfault.model.elements import Floats, Ints
from seqfault.networks.factors import SEEN, SequenceNetworks

Slack = dict[tuple[int, int], complex]
SINGULAR = 1e-13
CANCELLED = 1e-12
"""A loop whose impedances cancel to this share of their sizes is in series resonance."""


class Loops(msgspec.Struct, frozen=True, eq=False):
    """Loops of one fault: ``ports`` (k,) bus indices, ``incidence`` (k, 3, b), ``impedance`` (b, b) pu."""

    ports: Ints
    incidence: Complex
    impedance: Complex


class PortSolution(msgspec.Struct, frozen=True, eq=False):
    """What a set of loops does, in per unit of each port.

    ``loops`` one array of loop currents a fault; ``ports`` (r,) bus indices of all ports; ``drawn``
    (3, r) by sequence what leaves the network at each port beyond what left before, in the frame of the
    port; ``impedance`` (3, r, r) between ports at their true angles, ``bounded`` (3, r) False where a
    port has no path; ``columns`` of each sequence for the ports; ``slack`` the free potentials of each
    sequence, and ``unseen`` the mixtures of them that no loop sees, keyed by sequence first.
    """

    loops: tuple[Complex, ...]
    ports: Ints
    drawn: Complex
    impedance: Complex
    free: tuple[Complex, Complex, Complex]
    columns: tuple[Complex, Complex, Complex]
    slack: tuple[Slack, Slack, Slack]
    unseen: tuple[dict[tuple[int, tuple[int, int]], complex], ...]


def solve_ports(
    networks: SequenceNetworks,
    faults: Sequence[Loops],
    clock: Ints,
    before: Complex,
    flowing: Complex,
) -> PortSolution:
    """Solve ``faults``, all at once.

    ``clock`` (n,) is the displacement of every bus behind the reference of angles; ``before`` (n,)
    the positive-sequence voltage before the fault, in the frame of each bus; ``flowing`` (r,) the
    positive-sequence current that left the network at each port before it. Raises ``NoAnswerError``
    where the equations have no unique solution.
    """
    model = networks.model
    places = np.concatenate([fault.ports for fault in faults])
    nodes, r = model.node[places], len(places)
    turn = np.stack([np.ones(r), clock_turn(clock[places]), clock_turn(clock[places]).conj()])
    columns = tuple(networks[s].columns(nodes) for s in range(3))
    z = np.stack([networks[s].port_impedance(nodes, columns[s]) for s in range(3)])
    z = z * turn[:, :, None] * turn[:, None, :].conj()
    v = (before[places] * turn[1])[:, None] * TO_PHASES[:, 1]
    flowed = np.stack([0 * flowing, flowing * turn[1], 0 * flowing])

    widths = [fault.incidence.shape[2] for fault in faults]
    start = np.concatenate([[0], np.cumsum(widths)])
    width = int(start[-1])
    incidence = np.zeros((r, 3, width), complex)
    z_fault = np.zeros((width, width), complex)
    row = 0
    for k, fault in enumerate(faults):
        own = slice(start[k], start[k + 1])
        incidence[row : row + len(fault.ports), :, own] = fault.incidence
        z_fault[own, own] = fault.impedance
        row += len(fault.ports)
    # Components of each loop first: one clear of earth has exactly no zero sequence, whose impedance
    # may drown the others in phase coordinates.
    seen = np.einsum("ps,ipa->sia", TO_PHASES, incidence)
    driven = np.einsum("sp,ipa->sia", TO_SEQUENCE, incidence)
    matrix = np.einsum("sia,sij,sjb->ab", seen, z, driven) + z_fault
    terms = np.einsum("sia,sij,sjb->ab", abs(seen), abs(z), abs(driven)) + abs(z_fault)
    rhs = np.einsum("ipa,ip->a", incidence, v) + np.einsum("sia,sij,sj->a", seen, z, flowed)

    lift, constraint, target, keys, alone = [], [], [], [], []
    free = []
    for s in range(3):
        potential, names = networks[s].slack_at(nodes)
        free.append(potential)
        for q, name in enumerate(names):
            share = potential[:, q] * turn[s].conj()
            lift.append((potential[:, q] * turn[s]) @ seen[s])
            constraint.append(share @ driven[s])
            target.append(share @ flowed[s])
            keys.append((s, name))
            touched = np.flatnonzero(np.abs(potential[:, q]) > SEEN)
            if len(touched) == 1:
                alone.append((s, touched[0]))
    up = np.array(lift, complex).reshape(len(keys), width).T
    held = np.array(constraint, complex).reshape(len(keys), width)
    i, u = _solve(matrix, terms, rhs, up, held, np.array(target, complex))

    drawn = (driven @ i - flowed) * turn.conj()
    for s, port in alone:
        drawn[s, port] = 0  # to the last bit, where elimination leaves a rounding
    slack: tuple[Slack, Slack, Slack] = ({}, {}, {})
    for q, (s, name) in enumerate(keys):
        slack[s][name] = complex(u[q])
    unseen = tuple(
        {key: complex(part) for key, part in zip(keys, column, strict=True)} for column in null_basis(up).T
    )
    return PortSolution(
        loops=tuple(i[start[k] : start[k + 1]] for k in range(len(faults))),
        ports=places,
        drawn=drawn,
        impedance=z,
        free=(free[0], free[1], free[2]),
        columns=(columns[0], columns[1], columns[2]),
        slack=slack,
        unseen=unseen,
    )


def driving_point(solution: PortSolution, shares: Floats) -> Complex:
    """Impedance (3,) per unit between the ports weighted by ``shares`` (r,), infinite without a path."""
    out: Complex = np.einsum("i,sij,j->s", shares, solution.impedance, shares)
    for s in range(3):
        if solution.free[s].shape[1] and np.abs(shares @ solution.free[s]).max() > SEEN:
            out[s] = np.inf
    return out


def _solve(
    z: Complex, terms: Floats, v: Complex, lift: Complex, constraint: Complex, target: Complex
) -> tuple[Complex, Complex]:
    """Currents i with ``constraint`` i = ``target``, and the free potentials u that go with them.

    ``terms`` (b, b) is the size of what ``z`` is the sum of.
    """
    free = null_basis(constraint)
    first = np.zeros(len(v), complex)
    if target.any():
        first = np.linalg.lstsq(constraint, target, rcond=None)[0]
    if free.shape[1]:
        # The lift of a floating part does no work on currents that obey its constraint.
        work = free.conj().T if not len(constraint) else null_basis(lift.T).T
        small = work @ z @ free
        balance = np.abs(small).max(axis=1, initial=0.0)
        size = (np.abs(work) @ terms @ np.abs(free)).max(axis=1, initial=0.0)
        if (balance <= CANCELLED * size).any() or np.linalg.cond(small / balance[:, None]) > 1 / SINGULAR:
            raise NoAnswerError(
                "the fault current has no limit: the network's impedances to this fault cancel (series"
                " resonance) or are zero; check reactances of opposite sign"
            )
        i: Complex = first + free @ np.linalg.solve(small, work @ (v - z @ first))
    else:
        i = first
    if not lift.size:
        return i, np.zeros(lift.shape[1], complex)
    return i, np.asarray(np.linalg.lstsq(lift, z @ i - v, rcond=None)[0], complex)


def null_basis(rows: Complex) -> Complex:
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
