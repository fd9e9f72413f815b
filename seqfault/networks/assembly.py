"""Stamps of all elements as triplets.

An element is *strong*, or it is a *weak* branch to earth: a capacitance or what joins a star point to
earth. The two are kept apart, since weak branches can be smaller than the rounding of strong ones.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from seqfault.equations.per_unit import base_impedance
from seqfault.model.elements import Complex, Ints, Lines, Model
from seqfault.model.windings import Incidence, incidence


@dataclass(frozen=True, eq=False)
class Stamps:
    """One sequence: strong triplets ``row``, ``column``, ``value``, and ``weak`` (n,) to earth."""

    size: int
    row: Ints
    column: Ints
    value: Complex
    weak: Complex


def star_admittances(model: Model) -> Complex:
    """Per-unit admittance of each star point's device to earth, zero where it is no node.

    A current in the star point is three times the zero-sequence current: y = Z_base/(3 Z_n).
    """
    stars = model.stars
    y = np.zeros(len(stars.names), complex)
    k = (stars.node >= 0) & np.isfinite(stars.impedance)
    y[k] = base_impedance(stars.base[k], model.base_power) / (3 * stars.impedance[k])
    return y


def open_ended(lines: Lines, sequence: int) -> tuple[Complex, Complex]:
    """Admittance (m,) a line shows at its closed end, and the voltage at its open end over that.

    The far half of the π hangs behind the series impedance: y/2 + y/2/(1 + z y/2).
    """
    y = lines.shunt[sequence]
    share = 1 / (1 + lines.series[sequence] * y)
    return y + y * share, share


def assemble(model: Model, sequence: int) -> Stamps:
    """The stamps of sequence 0, 1 or 2 of ``model``."""
    n = model.nodes if sequence == 0 else len(model.buses)
    lines = model.lines
    whole = lines.closed.all(axis=0)
    i, j = lines.ends[:, whole]
    y = 1 / lines.series[sequence, whole]
    rows, columns, values = [i, j, i, j], [i, j, j, i], [y, y, -y, -y]
    rows.append(model.sources.bus)
    columns.append(model.sources.bus)
    values.append(model.sources.admittance[sequence])
    for sets in model.winding_sets:
        for part, into in zip(
            _triplets(incidence(sets, sequence, model.stars.node)),
            (rows, columns, values),
            strict=True,
        ):
            into.append(part)
    weak = np.zeros(n, complex)
    for end in (i, j):
        np.add.at(weak, end, lines.shunt[sequence, whole])
    partly, _ = open_ended(lines, sequence)
    for end in (0, 1):
        alone = lines.closed[end] & ~lines.closed[1 - end]
        np.add.at(weak, lines.ends[end, alone], partly[alone])
    np.add.at(weak, model.capacitances.bus, model.capacitances.admittance[sequence])
    if sequence == 0:
        star = model.stars.node
        np.add.at(weak, star[star >= 0], star_admittances(model)[star >= 0])
    value = np.concatenate(values)
    there = value != 0
    return Stamps(n, np.concatenate(rows)[there], np.concatenate(columns)[there], value[there], weak)


def _triplets(part: Incidence) -> tuple[Ints, Ints, Complex]:
    """Triplets of Nᵀ y N over all units at once."""
    m, w = part.node.shape[:2]
    node, weight = part.node.reshape(m, 2 * w), part.weight.reshape(m, 2 * w)
    y = np.repeat(np.repeat(part.admittance, 2, axis=1), 2, axis=2)
    block = weight[:, :, None] * y * weight[:, None, :]
    row = np.broadcast_to(node[:, :, None], block.shape)
    column = np.broadcast_to(node[:, None, :], block.shape)
    there = (block != 0) & (row >= 0) & (column >= 0)
    return row[there], column[there], block[there]
