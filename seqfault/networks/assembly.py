"""Stamps of all elements as triplets.

An element is *strong*, or it is a *weak* branch to earth: a capacitance or what joins a star point to
earth. The two are kept apart, since weak branches can be smaller than the rounding of strong ones.
"""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_impedance
from seqfault.model.elements import Complex, CoupledLines, Ints, Model
from seqfault.model.windings import Incidence, incidence


class Stamps(msgspec.Struct, frozen=True, eq=False):
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


def assemble(model: Model, sequence: int) -> Stamps:
    """The stamps of sequence 0, 1 or 2 of ``model``."""
    n = model.nodes if sequence == 0 else model.common
    lines, sources = model.lines, model.sources
    weak = np.zeros(n, complex)
    single = np.ones(len(lines.names), bool)
    rows, columns, values = [sources.node], [sources.node], [sources.admittance[sequence]]
    triplets = [_triplets(incidence(sets, sequence, model.stars.node)) for sets in model.winding_sets]
    if sequence == 0:
        for group in lines.coupled:
            single[group.line] = False
            triplets.append(_coupled(group, lines.nodes))
        star = model.stars.node
        np.add.at(weak, star[star >= 0], star_admittances(model)[star >= 0])
    single &= (lines.nodes >= 0).all(axis=0)
    i, j = lines.nodes[:, single]
    y = 1 / lines.series[sequence, single]
    rows += [i, j, i, j]
    columns += [i, j, j, i]
    values += [y, y, -y, -y]
    for row, column, value in triplets:
        rows.append(row)
        columns.append(column)
        values.append(value)
    for end in lines.nodes:
        np.add.at(weak, end[end >= 0], lines.shunt[sequence, end >= 0])
    np.add.at(weak, model.capacitances.node, model.capacitances.admittance[sequence])
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


def _coupled(group: CoupledLines, nodes: Ints) -> tuple[Ints, Ints, Complex]:
    """Triplets of the series block of coupled lines; an earthed end is the reference."""
    ends = np.concatenate([nodes[0, group.line], nodes[1, group.line]])
    y = np.block([[group.admittance, -group.admittance], [-group.admittance, group.admittance]])
    row = np.broadcast_to(ends[:, None], y.shape)
    column = np.broadcast_to(ends[None, :], y.shape)
    there = (row >= 0) & (column >= 0)
    return row[there], column[there], y[there]
