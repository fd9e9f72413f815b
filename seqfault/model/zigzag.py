"""Zigzag windings in zero sequence: the half-windings' leakage joins the bus to the star point.

Source: IEC 60076-8 and IEEE C62.92.4 (from memory): the two halves on a leg carry opposite currents, so
zero sequence sees only the leakage between them, and nothing of other windings on the core.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import msgspec
import numpy as np

from seqfault.case.records import EarthingTransformer
from seqfault.equations.transformers import split_by_ratio
from seqfault.model.context import Context
from seqfault.model.elements import WindingSets


class ZigzagWinding(msgspec.Struct, frozen=True):
    """One zigzag winding: ``z0`` per unit on the common base and the bus's nominal voltage."""

    name: str
    record: str
    side: str
    bus: int
    neutral: str
    z0: complex
    count: int


def zigzag_sets(c: Context, windings: Sequence[ZigzagWinding]) -> list[WindingSets]:
    """Sets of one winding each: those of transformers by side, then the earthing transformers."""
    rows = [*windings, *_earthing_transformers(c)]
    keys = dict.fromkeys((row.record, row.side) for row in rows)
    return [_set(c, record, side, [r for r in rows if (r.record, r.side) == (record, side)])
            for record, side in keys]  # fmt: skip


def _set(c: Context, record: str, side: str, rows: Sequence[ZigzagWinding]) -> WindingSets:
    m = len(rows)
    bus = np.array([[row.bus] for row in rows], np.int64)
    leakage = np.zeros((3, m, 1, 1), complex)
    leakage[0, :, 0, 0] = [row.count / row.z0 for row in rows]
    joints = []
    for row in rows:
        own = f"{row.name}.{side}" if record == "transformer" else f"{row.name}.neutral"
        joints.append(c.stars.join(own, row.neutral, row.bus, float(c.nominal[row.bus])))
    star_base = np.array([[c.stars.base(star)] for _, star in joints], float)
    return WindingSets(
        kind_of_record=record,
        names=tuple(row.name for row in rows),
        sides=(side,),
        leakage=leakage,
        bus=bus,
        node=c.node[bus],
        kind=np.array([[kind] for kind, _ in joints], np.int64),
        star=np.array([[star] for _, star in joints], np.int64),
        ratio=np.ones((m, 1)),
        star_ratio=star_base / c.nominal[bus],
        sign=np.ones((m, 1)),
        sense=np.zeros((m, 1)),
        rated=c.nominal[bus],
        count=np.array([row.count for row in rows], np.int64),
        magnetised=np.zeros(m, bool),
    )


def _earthing_transformers(c: Context) -> list[ZigzagWinding]:
    records: Mapping[str, EarthingTransformer] = c.in_service("earthing_transformers", lambda r: (r.bus,))
    out = []
    for name, r in records.items():
        bus = c.index[r.bus]
        value: Any = r.z0.value
        if r.z0.dimension == "ratio":
            assert r.rating is not None
            value = value * c.power / r.rating.value.real
        else:
            value = value / float(c.base_z[bus])
        if not isinstance(value, complex):
            if r.x_over_r is None:
                c.ledger.note("earthing transformer", name, "x_over_r not stated, resistance taken as 0")
            value = 1j * value if r.x_over_r is None else split_by_ratio(value, r.x_over_r)
        if r.neutral is None:
            c.ledger.note("earthing transformer", name, "neutral not stated, taken as solidly earthed")
        out.append(
            ZigzagWinding(name, "earthing transformer", "", bus, r.neutral or "solid", complex(value), 1)
        )
    return out
