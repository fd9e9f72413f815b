"""Transformers of two and three windings: nameplates to winding sets."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import msgspec
import numpy as np

from seqfault.case.records import Transformer, Winding
from seqfault.case.vector_group import VectorGroup, parse_vector_group
from seqfault.equations.transformers import delta_sense
from seqfault.model.context import Context
from seqfault.model.elements import DELTA, STAR, ZIGZAG, Ints, WindingSets
from seqfault.model.impedances import positive_leakage, zero_leakage, zigzag_impedance
from seqfault.model.zigzag import ZigzagWinding

REVERSED = (2, 6, 10)
"""Clock between two star windings of which one is wound the other way about (IEC 60076-1)."""
SIDES = ("hv", "lv", "tv")


class Transformers(msgspec.Struct, frozen=True, eq=False):
    """Winding sets by number of windings, zigzag windings, and every pair hv–other by its clock.

    ``hv``, ``lv``, ``clock`` (p,) and ``names`` are one entry a pair: nodes and displacement.
    """

    sets: tuple[WindingSets, ...]
    zigzags: tuple[ZigzagWinding, ...]
    hv: Ints
    lv: Ints
    clock: Ints
    names: tuple[str, ...]


class Side(msgspec.Struct, frozen=True):
    """One winding of one unit as its vector group and record give it."""

    name: str
    record: Winding
    connection: str
    brought_out: bool
    clock: int


def sides_of(r: Transformer, group: VectorGroup) -> tuple[Side, ...]:
    """The windings of a unit, hv first."""
    out = [
        Side("hv", r.hv, group.hv, group.hv_star_point, 0),
        Side("lv", r.lv, group.lv, group.lv_star_point, group.clock),
    ]
    if r.tv is not None and group.tv is not None:
        out.append(Side("tv", r.tv, group.tv, group.tv_star_point, group.tv_clock))
    return tuple(out)


def transformer_sets(c: Context) -> Transformers:
    """All transformers in service."""
    records: Mapping[str, Transformer] = c.in_service(
        "transformers",
        lambda r: (r.hv.bus, r.lv.bus) + ((r.tv.bus,) if r.tv is not None else ()),
    )
    zigzags: list[ZigzagWinding] = []
    sets = []
    for w in (2, 3):
        group = {n: r for n, r in records.items() if (r.tv is not None) == (w == 3)}
        sets.append(_set(c, group, w, zigzags))
    hv, lv, clock, names = [], [], [], []
    for name, r in records.items():
        for side in sides_of(r, parse_vector_group(r.vector_group))[1:]:
            hv.append(c.node[c.index[r.hv.bus]])
            lv.append(c.node[c.index[side.record.bus]])
            clock.append(side.clock)
            names.append(name)
    return Transformers(
        sets=tuple(sets),
        zigzags=tuple(zigzags),
        hv=np.array(hv, np.int64),
        lv=np.array(lv, np.int64),
        clock=np.array(clock, np.int64),
        names=tuple(names),
    )


def _set(
    c: Context, records: Mapping[str, Transformer], w: int, zigzags: list[ZigzagWinding]
) -> WindingSets:
    m = len(records)
    bus, star, kind = (np.full((m, w), -1, np.int64) for _ in range(3))
    rated, star_base = np.ones((m, w)), np.ones((m, w))
    sign, sense = np.ones((m, w)), np.zeros((m, w))
    leakage = np.zeros((3, m, w, w), complex)
    magnetised = np.zeros(m, bool)
    for k, (name, r) in enumerate(records.items()):
        sides = sides_of(r, parse_vector_group(r.vector_group))
        for v, side in enumerate(sides):
            bus[k, v] = c.index[side.record.bus]
            rated[k, v] = side.record.voltage.value.real
            kind[k, v], star[k, v] = _joint(c, name, r, side, sides, zigzags)
            star_base[k, v] = c.stars.base(int(star[k, v])) if star[k, v] >= 0 else 1.0
        sign[k], sense[k] = _polarity(sides)
        if sides[1].connection == "auto":
            c.metal.append((int(bus[k, 0]), int(bus[k, 1])))
        scale = r.rating.value.real * r.count / c.power
        leakage[1:, k] = positive_leakage(c, name, r) * scale
        zero, magnetised[k] = zero_leakage(c, name, r, sides)
        leakage[0, k] = zero * scale
        if r.tap is not None:
            rated[k, 0] *= 1 + r.tap.value.real
        _assume_core(c, name, r, kind[k], bool(magnetised[k]))
    return WindingSets(
        kind_of_record="transformer",
        names=tuple(records),
        sides=SIDES[:w],
        leakage=leakage,
        bus=bus,
        node=c.node[bus],
        kind=kind,
        star=star,
        ratio=c.nominal[bus] / rated,
        star_ratio=star_base / rated,
        sign=sign,
        sense=sense,
        rated=rated,
        count=np.array([r.count for r in records.values()], np.int64),
        magnetised=magnetised,
        autos=frozenset(
            name for name, r in records.items() if parse_vector_group(r.vector_group).lv == "auto"
        ),
    )


def _joint(
    c: Context,
    name: str,
    r: Transformer,
    side: Side,
    sides: tuple[Side, ...],
    zigzags: list[ZigzagWinding],
) -> tuple[int, int]:
    """Winding kind and star point of one side; a zigzag winding is set aside."""
    if side.connection == "delta":
        return DELTA, -1
    auto = sides[1].connection == "auto" and side.name in ("hv", "lv")
    first = sides[0] if auto else side  # an auto-transformer's common star point is stated on hv
    if first.record.neutral is None and first.brought_out and side is first:
        c.ledger.note("transformer", name, f"{side.name} neutral not stated, taken as solidly earthed")
    neutral = first.record.neutral or ("solid" if first.brought_out else "isolated")
    bus = c.index[first.record.bus]
    nominal = float(c.nominal[bus])
    if side.connection == "zigzag":
        z0 = zigzag_impedance(c, name, r, side.record)
        zigzags.append(ZigzagWinding(name, "transformer", side.name, bus, neutral, z0, r.count))
        return ZIGZAG, -1
    return c.stars.join(f"{name}.{first.name}", neutral, bus, nominal, shared=auto)


def _polarity(sides: tuple[Side, ...]) -> tuple[list[float], list[float]]:
    """Zero-sequence signs of star windings, and the senses of deltas, against the first star."""
    stars = [side for side in sides if side.connection in ("star", "auto")]
    reference = stars[0].clock if stars else 0
    sign, sense = [], []
    for side in sides:
        lag = (side.clock - reference) % 12
        star = side.connection in ("star", "auto")
        sign.append(-1.0 if star and lag in REVERSED else 1.0)
        odd = side.connection == "delta" and lag % 2 == 1
        sense.append(float(delta_sense(lag, on_hv=False)) if odd else 0.0)
    return sign, sense


def _assume_core(c: Context, name: str, r: Transformer, kind: Any, magnetised: bool) -> None:
    if magnetised or (kind == DELTA).any() or not (kind == STAR).any():
        return
    what = "zero-sequence magnetising branch left out (taken as open)"
    if r.magnetic_circuit == "three-limb":
        what += "; a three-limb core really has one of finite impedance"
    c.ledger.note("transformer", name, what)
