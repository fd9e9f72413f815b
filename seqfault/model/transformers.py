"""Transformers of two and three windings: nameplates to winding sets."""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

import msgspec
import numpy as np

from seqfault.case.records import Transformer, Winding
from seqfault.case.vector_group import parse_vector_group
from seqfault.equations.transformers import delta_sense, two_winding_leakage
from seqfault.model.columns import field
from seqfault.model.context import Context
from seqfault.model.elements import DELTA, STAR, ZIGZAG, Ints, WindingSets
from seqfault.model.impedances import (
    positive_leakage,
    two_winding_impedances,
    zero_leakage,
    zigzag_impedance,
)
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


class Scheme(msgspec.Struct, frozen=True):
    """What a vector group says of its windings, hv first, by ``sides``.

    ``connections``; whether star points are ``brought_out``; ``clocks`` behind hv; zero-sequence ``sign``
    of stars and ``sense`` of deltas against the first star.
    """

    sides: tuple[str, ...]
    connections: tuple[str, ...]
    brought_out: tuple[bool, ...]
    clocks: tuple[int, ...]
    sign: tuple[float, ...]
    sense: tuple[float, ...]

    @property
    def auto(self) -> bool:
        """Whether hv and lv share a winding."""
        return self.connections[1] == "auto"


@lru_cache(maxsize=1024)
def scheme_of(text: str, windings: int) -> Scheme:
    """The scheme of a vector group of ``windings`` windings."""
    group = parse_vector_group(text)
    connections: tuple[str, ...] = (group.hv, group.lv)
    clocks: tuple[int, ...] = (0, group.clock)
    brought_out: tuple[bool, ...] = (group.hv_star_point, group.lv_star_point)
    if windings == 3 and group.tv is not None:
        connections += (group.tv,)
        clocks += (group.tv_clock,)
        brought_out += (group.tv_star_point,)
    sign, sense = _polarity(connections, clocks)
    return Scheme(SIDES[: len(clocks)], connections, brought_out, clocks, sign, sense)


def _scheme(r: Transformer) -> Scheme:
    return scheme_of(r.vector_group, 2 if r.tv is None else 3)


def _windings(r: Transformer) -> tuple[Winding, ...]:
    return (r.hv, r.lv) if r.tv is None else (r.hv, r.lv, r.tv)


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
        high = c.index[r.hv.bus]
        for winding, lag in zip(_windings(r)[1:], _scheme(r).clocks[1:], strict=True):
            hv.append(high)
            lv.append(c.index[winding.bus])
            clock.append(lag)
            names.append(name)
    return Transformers(
        sets=tuple(sets),
        zigzags=tuple(zigzags),
        hv=c.node[np.array(hv, np.int64)],
        lv=c.node[np.array(lv, np.int64)],
        clock=np.array(clock, np.int64),
        names=tuple(names),
    )


def _set(
    c: Context, records: Mapping[str, Transformer], w: int, zigzags: list[ZigzagWinding]
) -> WindingSets:
    m = len(records)
    kinds, stars = [], []  # winding by winding: small lists of lists would busy the garbage collector
    star_base, sign, sense = [], [], []
    leakage = np.zeros((3, m, w, w), complex)
    magnetised = np.zeros(m, bool)
    rows = list(records.values())
    windings = [field(rows, side) for side in SIDES[:w]]
    bus = np.array([[c.index[v.bus] for v in column] for column in windings], np.int64).T
    rated = np.array([[v.voltage.value.real for v in column] for column in windings], float).T.copy()
    buses = bus.tolist()
    series = two_winding_impedances(rows) if w == 2 else None
    impedances: list[complex | None] = [None] * m if series is None else series.tolist()
    zero_series = [1 + 0j] * m
    whole: list[int] = []  # units whose zero-sequence matrix is more than a series impedance
    for k, (name, r) in enumerate(records.items()):
        scheme = _scheme(r)
        at, z1 = buses[k], impedances[k]
        for v in range(w):
            joint, star = _joint(c, name, r, v, scheme, at, zigzags)
            kinds.append(joint)
            stars.append(star)
            star_base.append(c.stars.base(star) if star >= 0 else 1.0)
        sign.append(scheme.sign)
        sense.append(scheme.sense)
        if scheme.auto:
            c.metal.append((at[0], at[1]))
        if z1 is None:
            leakage[1:, k] = positive_leakage(c, name, r)
        zero, magnetic = zero_leakage(c, name, r, scheme.connections, z1)
        if isinstance(zero, complex):
            zero_series[k] = zero
        else:
            leakage[0, k], magnetised[k] = zero, magnetic
            whole.append(k)
        if r.tap is not None:
            rated[k, 0] *= 1 + r.tap.value.real
        if not magnetic and STAR in kinds[-w:] and DELTA not in kinds[-w:]:
            _assume_core(c, name, r)
    if series is not None:
        leakage[1:] = two_winding_leakage(series)
        plain = np.ones(m, bool)
        plain[whole] = False
        leakage[0, plain] = two_winding_leakage(np.array(zero_series)[plain])
    count = np.array(field(rows, "count"), np.int64)
    rating = np.array([r.rating.value.real for r in rows], float)
    leakage *= (rating * count / c.power)[:, None, None]
    return WindingSets(
        kind_of_record="transformer",
        names=tuple(records),
        sides=SIDES[:w],
        leakage=leakage,
        bus=bus,
        node=c.node[bus],
        kind=np.array(kinds, np.int64).reshape(m, w),
        star=np.array(stars, np.int64).reshape(m, w),
        ratio=c.nominal[bus] / rated,
        star_ratio=np.array(star_base, float).reshape(m, w) / rated,
        sign=np.array(sign, float).reshape(m, w),
        sense=np.array(sense, float).reshape(m, w),
        rated=rated,
        count=count,
        magnetised=magnetised,
        autos=frozenset(name for name, r in records.items() if _scheme(r).auto),
    )


def _joint(
    c: Context,
    name: str,
    r: Transformer,
    v: int,
    scheme: Scheme,
    at: list[int],
    zigzags: list[ZigzagWinding],
) -> tuple[int, int]:
    """Winding kind and star point of winding ``v``, buses ``at``; a zigzag winding is set aside."""
    connection = scheme.connections[v]
    if connection == "delta":
        return DELTA, -1
    auto = scheme.auto and v < 2
    first = 0 if auto else v  # an auto-transformer's common star point is stated on hv
    stated, brought_out = _windings(r)[first].neutral, scheme.brought_out[first]
    if stated is None and brought_out and first == v:
        c.ledger.note("transformer", name, f"{SIDES[v]} neutral not stated, taken as solidly earthed")
    neutral = stated or ("solid" if brought_out else "isolated")
    bus = at[first]
    if connection == "zigzag":
        z0 = zigzag_impedance(c, name, r, _windings(r)[v])
        zigzags.append(ZigzagWinding(name, "transformer", SIDES[v], bus, neutral, z0, r.count))
        return ZIGZAG, -1
    return c.stars.join(f"{name}.{SIDES[first]}", neutral, bus, float(c.nominal[bus]), shared=auto)


def _polarity(
    connections: tuple[str, ...], clocks: tuple[int, ...]
) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """Zero-sequence signs of star windings, and the senses of deltas, against the first star."""
    stars = [k for k, connection in enumerate(connections) if connection in ("star", "auto")]
    reference = clocks[stars[0]] if stars else 0
    sign, sense = [], []
    for k, connection in enumerate(connections):
        lag = (clocks[k] - reference) % 12
        sign.append(-1.0 if k in stars and lag in REVERSED else 1.0)
        odd = connection == "delta" and lag % 2 == 1
        sense.append(float(delta_sense(lag, on_hv=False)) if odd else 0.0)
    return tuple(sign), tuple(sense)


def _assume_core(c: Context, name: str, r: Transformer) -> None:
    what = "zero-sequence magnetising branch left out (taken as open)"
    if r.magnetic_circuit == "three-limb":
        what += "; a three-limb core really has one of finite impedance"
    c.ledger.note("transformer", name, what)
