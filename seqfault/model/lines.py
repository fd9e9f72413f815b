"""Overhead lines, cables and series reactors, and the coupling of lines in zero sequence."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import msgspec
import networkx as nx
import numpy as np

from seqfault.case.records import Line, MutualCoupling, SeriesReactor
from seqfault.equations.transformers import split_by_ratio
from seqfault.errors import quoted
from seqfault.model.columns import field, values
from seqfault.model.context import Context
from seqfault.model.elements import Bools, Complex, CoupledLines, Floats, Ints, Lines

BLOCK = 4096
"""Records read at once: they stay in the processor's cache from field to field."""


def lines(c: Context, common: int) -> tuple[Lines, int]:
    """All lines and series reactors in service, and the number of nodes with their open ends.

    An open end is a node of its own, numbered from ``common`` on: its capacitance stays on the line.
    A line out of service and earthed at both ends stands between earth and earth.
    """
    names, rows, near, far = [], [], [], []
    index = c.index.get
    for name, r in c.case.lines.items():
        i, j = index(r.from_, -1), index(r.to, -1)
        standing = not r.out and i >= 0 and j >= 0
        if r.earthed or (standing and not (r.open and r.from_ in r.open and r.to in r.open)):
            names.append(name)
            rows.append(r)
            near.append(i)
            far.append(j)
    ends = np.array([np.array(near, np.int64), np.array(far, np.int64)])
    t = _totals(rows)
    earthed, count = t.earthed, t.count
    closed = np.tile(~earthed, (2, 1))
    for k in np.flatnonzero(t.opened).tolist():
        closed[:, k] &= [rows[k].from_ not in rows[k].open, rows[k].to not in rows[k].open]

    z_base = np.zeros(len(rows))
    inside = ends[0] >= 0
    z_base[inside] = c.base_z[ends[0, inside]]
    for k in np.flatnonzero(~inside).tolist():
        z_base[k] = c.case.buses[rows[k].from_].voltage.value.real ** 2 / c.power
    z1, z0 = t.z1 / z_base / count, t.z0 / z_base / count
    b1 = (c.omega * t.c1 + t.b1) * count * z_base
    b0 = (c.omega * t.c0 + t.b0) * count * z_base
    stated1, stated0 = t.has_c1 | t.has_b1, t.has_c0 | t.has_b0
    for k in np.flatnonzero(~(stated1 & stated0) & ~earthed).tolist():
        if not stated0[k]:
            c.ledger.note("line", names[k], "c0 not stated, taken as 0: no charging current to earth")
        else:
            b1[k] = b0[k]
            c.ledger.note("line", names[k], "c1 not stated, taken equal to c0")
    nodes = np.where(ends >= 0, c.node[ends], -1)
    open_ends = ~closed & ~earthed
    nodes[open_ends] = common + np.arange(int(open_ends.sum()))
    nodes[:, earthed] = -1
    reactors = _reactors(c)
    m = len(reactors.names)
    whole = Lines(
        names=tuple(names) + reactors.names,
        kinds=("line",) * len(rows) + reactors.kinds,
        ends=np.concatenate([ends, reactors.ends], axis=1),
        nodes=np.concatenate([nodes, reactors.nodes], axis=1),
        closed=np.concatenate([closed, reactors.closed], axis=1),
        earthed=np.concatenate([earthed, np.zeros(m, bool)]),
        series=np.concatenate([np.stack([z0, z1, z1]), reactors.series], axis=1),
        shunt=np.concatenate([0.5j * np.stack([b0, b1, b1]), reactors.shunt], axis=1),
        count=np.concatenate([count, reactors.count]),
        voltage=np.concatenate([np.sqrt(z_base * c.power), reactors.voltage]),
        coupled=_coupled(c, names, z0, z_base, t.length),
    )
    return whole, common + int(open_ends.sum())


class _Totals(msgspec.Struct, frozen=True, eq=False):
    """What records of lines (m,) state, of their whole length, 0 where nothing is stated."""

    earthed: Bools
    opened: Bools
    count: Ints
    length: Floats
    z1: Complex
    z0: Complex
    c1: Complex
    has_c1: Bools
    b1: Complex
    has_b1: Bools
    c0: Complex
    has_c0: Bools
    b0: Complex
    has_b0: Bools


def _totals(rows: Sequence[Line]) -> _Totals:
    blocks = [_block(rows[k : k + BLOCK]) for k in range(0, max(len(rows), 1), BLOCK)]
    return _Totals(*map(np.concatenate, zip(*blocks, strict=True)))


def _block(rows: Sequence[Line]) -> list[Any]:
    measured, _, stated = values(field(rows, "length"))
    length = np.where(stated, measured.real, 1.0)
    opened = np.array([bool(buses) for buses in field(rows, "open")], bool)
    out: list[Any] = [np.array(field(rows, "earthed"), bool), opened]
    out += [np.array(field(rows, "count"), np.int64), length]
    for name in ("z1", "z0", "c1", "b1", "c0", "b0"):
        value, along, stated = values(field(rows, name))
        out.append(np.where(along, value * length, value))
        if name[0] != "z":
            out.append(stated)
    return out


def _reactors(c: Context) -> Lines:
    records: Mapping[str, SeriesReactor] = c.in_service("series_reactors", lambda r: (r.from_, r.to))
    m = len(records)
    ends = np.array([[c.index[r.from_], c.index[r.to]] for r in records.values()], np.int64)
    ends = ends.reshape(-1, 2).T
    series = np.zeros((3, m), complex)
    for k, (name, r) in enumerate(records.items()):
        base = float(c.base_z[ends[0, k]])

        def per_unit(q: Any, r: SeriesReactor = r, base: float = base) -> complex:
            value = q.value
            if q.dimension == "ratio":
                assert r.rating is not None
                value = value * c.power / r.rating.value.real
            else:
                value = value / base
            if isinstance(value, complex):
                return value
            return complex(1j * value if r.x_over_r is None else split_by_ratio(value, r.x_over_r))

        if r.x_over_r is None and not isinstance(r.impedance.value, complex):
            c.ledger.note("series reactor", name, "x_over_r not stated, resistance taken as 0")
        if r.z0 is None:
            c.ledger.note("series reactor", name, "z0 not stated, taken equal to its impedance")
        series[1:, k] = per_unit(r.impedance)
        series[0, k] = per_unit(r.z0 or r.impedance)
    return Lines(
        names=tuple(records),
        kinds=("series reactor",) * m,
        ends=ends,
        nodes=c.node[ends],
        closed=np.ones((2, m), bool),
        earthed=np.zeros(m, bool),
        series=series,
        shunt=np.zeros((3, m), complex),
        count=np.ones(m, np.int64),
        voltage=c.nominal[ends[0]],
        coupled=(),
    )


def _coupled(
    c: Context, names: Sequence[str], z0: Complex, z_base: Floats, length: Floats
) -> tuple[CoupledLines, ...]:
    """Groups of lines that couplings join, the series block of each inverted once.

    Between lines of different voltages the base impedance is U_a U_b/S. Source: P. M. Anderson,
    "Analysis of Faulted Power Systems", ch. 5 (mutual impedance of parallel lines).
    """
    if not c.case.mutual_couplings:
        return ()
    position = {name: k for k, name in enumerate(names)}
    pairs: list[tuple[int, int, complex]] = []
    for coupling in c.case.mutual_couplings.values():
        if not coupling.out:
            pairs += _pairs(coupling, position, z_base, length)
    graph = nx.Graph((a, b) for a, b, _ in pairs)
    groups = []
    for members in nx.connected_components(graph):
        at = np.array(sorted(members), np.int64)
        place = {int(k): row for row, k in enumerate(at)}
        block = np.diag(z0[at])
        for a, b, z in pairs:
            if a in place:
                block[place[a], place[b]] += z
                block[place[b], place[a]] += z
        if np.linalg.eigvalsh(block.imag).min() <= 0:
            names = ", ".join(quoted(name) for name, k in position.items() if k in place)
            c.complaints.append(
                f"lines {names}: their mutual couplings are too strong to be possible: the reactances of"
                " the group are not positive definite; check z0 of the couplings against z0 of the lines"
            )
            continue
        groups.append(CoupledLines(at, np.asarray(np.linalg.inv(block), complex)))
    return tuple(groups)


def _pairs(
    coupling: MutualCoupling, position: Mapping[str, int], z_base: Floats, length: Floats
) -> list[tuple[int, int, complex]]:
    at = [position[name] for name in coupling.lines if name in position]
    out = []
    for row, a in enumerate(at):
        for b in at[:row]:
            z = complex(coupling.z0.value)
            if coupling.z0.dimension.endswith("/length"):
                along = coupling.length.value.real if coupling.length else min(length[a], length[b])
                z *= float(along)
            out.append((a, b, z / float(np.sqrt(z_base[a] * z_base[b]))))
    return out
