"""Overhead lines, cables and series reactors, and the coupling of lines in zero sequence."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import networkx as nx
import numpy as np

from seqfault.case.records import Line, MutualCoupling, SeriesReactor
from seqfault.equations.transformers import split_by_ratio
from seqfault.errors import quoted
from seqfault.model.columns import field, values
from seqfault.model.context import Context
from seqfault.model.elements import Bools, Complex, CoupledLines, Floats, Lines


def lines(c: Context, common: int) -> tuple[Lines, int]:
    """All lines and series reactors in service, and the number of nodes with their open ends.

    An open end is a node of its own, numbered from ``common`` on: its capacitance stays on the line.
    A line out of service and earthed at both ends stands between earth and earth.
    """
    kept: Mapping[str, Line] = {
        name: r
        for name, r in c.case.lines.items()
        if r.earthed
        or (
            not r.out
            and r.from_ in c.index
            and r.to in c.index
            and not (r.open and r.from_ in r.open and r.to in r.open)
        )
    }
    rows = list(kept.values())
    measured, _, stated = values(field(rows, "length"))
    length: Floats = np.where(stated, measured.real, 1.0)
    count = np.array(field(rows, "count"), np.int64)
    earthed = np.array(field(rows, "earthed"), bool)
    sides = field(rows, "from_"), field(rows, "to")
    ends = np.array([np.array([c.index.get(bus, -1) for bus in side], np.int64) for side in sides])
    closed = np.tile(~earthed, (2, 1))
    for k in [k for k, buses in enumerate(field(rows, "open")) if buses]:
        closed[:, k] &= [side[k] not in rows[k].open for side in sides]

    z_base = np.zeros(len(rows))
    inside = ends[0] >= 0
    z_base[inside] = c.base_z[ends[0, inside]]
    for k in np.flatnonzero(~inside).tolist():
        z_base[k] = c.case.buses[sides[0][k]].voltage.value.real ** 2 / c.power
    z1 = _total(rows, "z1", length)[0] / z_base / count
    z0 = _total(rows, "z0", length)[0] / z_base / count
    (c1, has_c1), (direct1, has_b1) = _total(rows, "c1", length), _total(rows, "b1", length)
    (c0, has_c0), (direct0, has_b0) = _total(rows, "c0", length), _total(rows, "b0", length)
    b1 = (c.omega * c1 + direct1) * count * z_base
    b0 = (c.omega * c0 + direct0) * count * z_base
    stated1, stated0 = has_c1 | has_b1, has_c0 | has_b0
    names = tuple(kept)
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
        names=names + reactors.names,
        kinds=("line",) * len(kept) + reactors.kinds,
        ends=np.concatenate([ends, reactors.ends], axis=1),
        nodes=np.concatenate([nodes, reactors.nodes], axis=1),
        closed=np.concatenate([closed, reactors.closed], axis=1),
        earthed=np.concatenate([earthed, np.zeros(m, bool)]),
        series=np.concatenate([np.stack([z0, z1, z1]), reactors.series], axis=1),
        shunt=np.concatenate([0.5j * np.stack([b0, b1, b1]), reactors.shunt], axis=1),
        count=np.concatenate([count, reactors.count]),
        voltage=np.concatenate([np.sqrt(z_base * c.power), reactors.voltage]),
        coupled=_coupled(c, kept, z0, z_base, length),
    )
    return whole, common + int(open_ends.sum())


def _total(rows: Sequence[Line], name: str, length: Floats) -> tuple[Complex, Bools]:
    """The quantity ``name`` of whole lines (m,), 0 where it is not stated, and where it is stated."""
    value, along, stated = values(field(rows, name))
    return np.where(along, value * length, value), stated


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
    c: Context, kept: Mapping[str, Line], z0: Complex, z_base: Floats, length: Floats
) -> tuple[CoupledLines, ...]:
    """Groups of lines that couplings join, the series block of each inverted once.

    Between lines of different voltages the base impedance is U_a U_b/S. Source: P. M. Anderson,
    "Analysis of Faulted Power Systems", ch. 5 (mutual impedance of parallel lines).
    """
    if not c.case.mutual_couplings:
        return ()
    position = {name: k for k, name in enumerate(kept)}
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
