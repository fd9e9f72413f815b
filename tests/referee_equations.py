"""The equations of the referee: what a branch obeys, Kirchhoff's laws, and how all are solved."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Matrix = NDArray[np.clongdouble]
Branch = tuple[int, int]
Solution = tuple[Matrix, list[tuple["Group", Matrix]], Matrix]

# Extended precision where the platform has it (Linux); elsewhere plain double, at a loss of digits
# where capacitances are very small.
LONG = np.clongdouble
ONE = np.eye(3, dtype=LONG)
EARTH = 0  # the node all voltages are measured from
TURN = LONG(complex(-0.5, 0.0)) + LONG(1j) * np.sqrt(np.longdouble(3)) / 2  # 120 degrees ahead
# Ohms that make unknowns comparable, and what then is nothing: 1 pF is 3e-9, data carry 1e-16.
SCALE = 10.0
NOTHING = 1e-13


def static(one: complex, zero: complex) -> Matrix:
    """Phase matrix of a static element: self (2 z1 + z0)/3, mutual (z0 - z1)/3."""
    mutual = (LONG(zero) - LONG(one)) / 3
    return LONG(one) * ONE + mutual  # self = z1 + mutual


def rotating(z1: complex, z2: complex, z0: complex) -> Matrix:
    """Phase matrix of a machine: circulant, since it answers differently to the two rotations.

    Currents of rotation a b c see z1, those of rotation a c b see z2, equal currents z0: row a is
    (z0 + z1 + z2, z0 + h z1 + h2 z2, z0 + h2 z1 + h z2)/3 with h the turn by 120 degrees.
    """
    one, two, zero = LONG(z1), LONG(z2), LONG(z0)
    h, h2 = TURN, TURN * TURN
    row = np.array([zero + one + two, zero + h * one + h2 * two, zero + h2 * one + h * two]) / 3
    return np.array([row, np.roll(row, 1), np.roll(row, 2)])


@dataclass(frozen=True)
class Group:
    """Branches, from -> to, that share a law: ``voltage @ v + current @ i = drive``.

    ``elements`` says whose each branch is.
    """

    elements: Sequence[str]
    ends: Sequence[Branch]
    voltage: Matrix
    current: Matrix
    drive: complex | np.clongdouble = 0j


def ohmic(element: str, p: int, q: int, ohms: complex, drive: complex | np.clongdouble = 0j) -> Group:
    """One branch under Ohm's law, v - Z i = drive; zero ohm makes it a joint."""
    return Group([element], [(p, q)], ONE[:1, :1], np.array([[-LONG(ohms)]]), drive)


def kirchhoff(bases: Sequence[float], groups: Sequence[Group]) -> Solution:
    """All laws at once: node voltages, branch currents, node voltages nothing fixes."""
    ends = np.array([pair for g in groups for pair in g.ends])
    joins = np.zeros((len(ends), len(bases)), dtype=LONG)  # 1 where a branch begins, -1 where it ends
    np.add.at(joins, (np.arange(len(ends)), ends[:, 0]), 1)
    np.add.at(joins, (np.arange(len(ends)), ends[:, 1]), -1)
    joins = joins[:, 1:]  # EARTH's voltage is zero, its current law follows from the others
    nodes, count = len(bases) - 1, len(bases) - 1 + len(ends)
    matrix, right = np.zeros((count, count), dtype=LONG), np.zeros(count, dtype=LONG)
    matrix[:nodes, nodes:] = joins.T  # Kirchhoff's current law at every node
    stop = nodes
    for g in groups:  # law of each branch, its voltage by Kirchhoff's voltage law
        start, stop = stop, stop + len(g.ends)
        matrix[start:stop, :nodes] = g.voltage @ joins[start - nodes : stop - nodes]
        matrix[start:stop, start:stop] = g.current
        right[start:stop] = g.drive
    volts_of = np.array(bases)
    level = np.max(volts_of[ends], axis=1)
    level[level == 0] = np.max(volts_of)  # a line earthed at both ends
    scale = np.append(volts_of[1:], level / SCALE).astype(np.longdouble)
    matrix *= scale
    largest = np.max(size(matrix), axis=1)
    largest[largest == 0] = 1  # a bus with nothing on it
    solution, free = eliminate(matrix / largest[:, None], right / largest)
    if free.size and np.max(size(free[nodes:])) > 1e-6:
        raise ArithmeticError("a current is undetermined: resonance, or a loop of no impedance")
    stops = np.cumsum([nodes, *(len(g.ends) for g in groups)])
    volts, *amperes = np.split(solution * scale, stops)[:-1]
    earth = np.zeros((1, free.shape[1]), dtype=LONG)
    pairs = list(zip(groups, amperes, strict=True))
    return np.append(LONG(0), volts), pairs, np.concatenate([earth, free[:nodes]])


def size(values: Matrix) -> NDArray[np.longdouble]:
    return np.abs(values.real) + np.abs(values.imag)


def eliminate(matrix: Matrix, right: Matrix) -> tuple[Matrix, Matrix]:
    """Gauss-Jordan with full pivoting: one solution (free unknowns 0) and the free directions.

    Rows are scaled to 1; what is left below ``NOTHING`` is zero.
    """
    count = rank = len(right)
    work = np.concatenate([matrix, right[:, None]], axis=1)
    order = np.arange(count)
    for k in range(count):
        sizes = size(work[k:, k:count])
        row, column = np.unravel_index(np.argmax(sizes), sizes.shape)
        if sizes[row, column] < NOTHING:
            rank = k
            break
        across, down = np.array([k, k + int(row)]), np.array([k, k + int(column)])
        work[across] = work[across[::-1]]
        work[:, down] = work[:, down[::-1]]
        order[down] = order[down[::-1]]
        work[k, k:] /= work[k, k]
        rows = np.flatnonzero(work[:, k])
        rows = rows[rows != k]
        columns = k + np.flatnonzero(work[k, k:])
        work[np.ix_(rows, columns)] -= np.outer(work[rows, k], work[k, columns])
        work[rows, k] = 0
    left = size(work[rank:, count])
    if left.size and np.max(left) > 1e-10 * max(1.0, float(np.max(size(right)))):
        raise ArithmeticError("the equations contradict each other: no answer exists")
    solution = np.zeros(count, dtype=LONG)
    solution[order[:rank]] = work[:rank, count]
    free = np.zeros((count, count - rank), dtype=LONG)
    free[order[:rank]] = -work[:rank, rank:count]
    free[order[rank:], np.arange(count - rank)] = 1
    return solution, free
