"""Transformers: nameplates to winding sets."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from seqfault.case.records import Transformer
from seqfault.case.vector_group import parse_vector_group
from seqfault.equations.transformers import (
    delta_sense,
    split_by_loss,
    split_by_ratio,
    two_winding_leakage,
)
from seqfault.model.elements import DELTA, STAR, Ints, WindingSets

if TYPE_CHECKING:
    from seqfault.model.build import Context

REVERSED = (2, 6, 10)
"""Clocks of a star-star unit whose lv winding is wound the other way about (IEC 60076-1)."""


def transformer_sets(c: Context) -> tuple[WindingSets, Ints]:
    """All two-winding transformers in service, and their clock numbers (m,)."""
    records: dict[str, Transformer] = c.in_service("transformers", lambda r: (r.hv.bus, r.lv.bus))
    m = len(records)
    z1, z0 = np.ones(m, complex), np.ones(m, complex)
    bus, star, kind = (np.full((m, 2), -1, np.int64) for _ in range(3))
    rated, star_base = np.ones((m, 2)), np.ones((m, 2))
    sign, sense = np.ones((m, 2)), np.zeros((m, 2))
    clock = np.zeros(m, np.int64)
    rating, count = np.ones(m), np.ones(m, np.int64)
    for k, (name, r) in enumerate(records.items()):
        group = parse_vector_group(r.vector_group)
        clock[k], rating[k], count[k] = group.clock, r.rating.value.real, r.count
        sides = ((r.hv, group.hv, group.hv_star_point), (r.lv, group.lv, group.lv_star_point))
        for w, (winding, connection, brought_out) in enumerate(sides):
            bus[k, w] = c.index[winding.bus]
            rated[k, w] = winding.voltage.value.real
            if connection == "delta":
                kind[k, w] = DELTA
                sense[k, w] = delta_sense(group.clock, w == 0)
                continue
            neutral = winding.neutral or ("solid" if brought_out else "isolated")
            side = ("hv", "lv")[w]
            if brought_out and winding.neutral is None:
                c.ledger.note("transformer", name, f"{side} neutral not stated, taken as solidly earthed")
            nominal = float(c.nominal[bus[k, w]])
            kind[k, w], star[k, w] = c.stars.join(f"{name}.{side}", neutral, int(bus[k, w]), nominal)
            star_base[k, w] = c.stars.base(int(star[k, w]))
        z1[k] = _impedance(r, r.impedance)
        z0[k] = _zero_sequence(c, name, r, z1[k])
        if group.hv == group.lv == "star":
            if group.clock in REVERSED:
                sign[k, 1] = -1
            _assume_core(c, name, r, kind[k])
        if r.tap is not None:
            rated[k, 0] *= 1 + r.tap.value.real
    scale = (rating * count / c.power)[:, None, None]
    positive = two_winding_leakage(z1) * scale
    sets = WindingSets(
        kind_of_record="transformer",
        names=tuple(records),
        sides=("hv", "lv"),
        leakage=np.stack([two_winding_leakage(z0) * scale, positive, positive]),
        bus=bus,
        kind=kind,
        star=star,
        ratio=c.nominal[bus] / rated,
        star_ratio=star_base / rated,
        sign=sign,
        sense=sense,
        rated=rated,
        count=count,
    )
    return sets, clock


def _impedance(r: Transformer, quantity: Any) -> complex:
    """Per unit on the unit's rating; ohm are those seen from hv at its rated voltage."""
    value = quantity.value
    if quantity.dimension == "impedance":
        value = value * r.rating.value.real / r.hv.voltage.value.real**2
    if isinstance(value, complex):
        return value
    if r.load_loss is not None:
        return complex(split_by_loss(value, r.load_loss.value.real, r.rating.value.real))
    assert r.x_over_r is not None
    return complex(split_by_ratio(value, r.x_over_r))


def _zero_sequence(c: Context, name: str, r: Transformer, z1: complex) -> complex:
    if r.z0 is None:
        if r.z0_over_z1 is None:
            c.ledger.note("transformer", name, "z0 not stated, taken equal to z1 (z0_over_z1 = 1)")
        return z1 * (1.0 if r.z0_over_z1 is None else r.z0_over_z1)
    value = r.z0.value
    if r.z0.dimension == "impedance":
        value = value * r.rating.value.real / r.hv.voltage.value.real**2
    if isinstance(value, complex):
        return value
    c.ledger.note("transformer", name, "z0 stated as a magnitude, taken at the angle of z1")
    return complex(value * z1 / abs(z1))


def _assume_core(c: Context, name: str, r: Transformer, kind: Any) -> None:
    if not (kind == STAR).any():
        return
    what = "zero-sequence magnetising branch left out (taken as open)"
    if r.magnetic_circuit == "three-limb":
        what += "; a three-limb core really has one of finite impedance"
    c.ledger.note("transformer", name, what)
