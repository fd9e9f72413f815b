"""A case in one state -> the model: one small function a kind of record.

Everything becomes per unit on the case's base power and the nominal voltage of the bus here, and
nowhere else.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import Any, Literal

import numpy as np

from seqfault.case.records import Case, Generator, Line, Motor, Record
from seqfault.equations.earthing import zero_sequence_of_level
from seqfault.equations.machines import motor_rating, motor_resistance_ratio, pole_pairs
from seqfault.equations.per_unit import base_impedance, change_base
from seqfault.errors import CaseError, quoted
from seqfault.model.assumptions import Ledger
from seqfault.model.elements import STAR, Ints, Lines, Model, Shunts, WindingSets
from seqfault.model.stars import StarRegister
from seqfault.model.transformers import transformer_sets
from seqfault.model.zones import components, displacements, live_buses

Machine = Literal["subtransient", "transient", "synchronous"]
MACHINES: tuple[Machine, ...] = ("subtransient", "transient", "synchronous")


class Context:
    """What the builders share: the buses in service, the base, the ledger, the star points."""

    def __init__(self, case: Case, machine: Machine) -> None:
        self.case = case
        self.machine = machine
        self.power = case.base_power
        self.omega = 2 * np.pi * case.frequency
        kept = {name: bus for name, bus in case.buses.items() if not bus.out}
        self.index = {name: k for k, name in enumerate(kept)}
        self.nominal = np.array([bus.voltage.value.real for bus in kept.values()], float)
        self.base_z = base_impedance(self.nominal, self.power)
        self.ledger = Ledger()
        self.warnings: list[str] = []
        self.complaints: list[str] = []
        self.stars = StarRegister(case.neutrals, len(kept))

    def in_service(self, table: str, ends: Callable[[Any], Iterable[str]]) -> dict[str, Any]:
        """Records of ``table`` that are in, at buses that are in."""
        records: dict[str, Record] = getattr(self.case, table)
        return {
            name: record
            for name, record in records.items()
            if not record.out and all(bus in self.index for bus in ends(record))
        }


def build_model(case: Case, machine: Machine = "subtransient") -> Model:
    """The per-unit model of ``case`` with its machines behind the reactance named by ``machine``.

    Raises ``CaseError`` where vector groups do not close a loop or a reactance that is needed is not
    stated.
    """
    c = Context(case, machine)
    lines = _lines(c)
    infeeds = _infeeds(c)
    generators = _generators(c)
    motors = _motors(c)
    transformers, hv_clock = transformer_sets(c)
    capacitances = _machine_capacitances(c)
    n = len(c.index)
    through = lines.closed.all(axis=0)
    zone = components(n, lines.ends[0, through], lines.ends[1, through])
    hv, lv = transformers.bus[:, 0], transformers.bus[:, 1]
    clock, misfits = displacements(zone, zone[hv], zone[lv], hv_clock, transformers.names)
    if c.complaints or misfits:
        raise CaseError([*c.complaints, *misfits], case.source)
    part = components(
        n,
        np.concatenate([lines.ends[0, through], hv]),
        np.concatenate([lines.ends[1, through], lv]),
    )
    live = live_buses(part, np.concatenate([infeeds.bus, generators.bus[:, 0]]))
    _warn_of_dead(c, live, part)
    stars = c.stars.columns()
    return Model(
        title=case.title,
        state=case.state,
        machine=machine,
        sha256=case.sha256,
        frequency=case.frequency,
        base_power=case.base_power,
        buses=tuple(c.index),
        index=c.index,
        nominal=c.nominal,
        clock=clock,
        live=live,
        galvanic=_galvanic(zone, (generators, transformers), stars.node, n),
        before=np.where(live, complex(case.prefault.voltage.value), 0j),
        lines=lines,
        sources=_joined(infeeds, motors),
        capacitances=capacitances,
        winding_sets=(generators, transformers),
        stars=stars,
        assumptions=c.ledger.entries(),
        warnings=(*case.warnings, *c.warnings),
    )


def _lines(c: Context) -> Lines:
    records: dict[str, Line] = c.in_service("lines", lambda line: (line.from_, line.to))
    kept = {name: r for name, r in records.items() if not {r.from_, r.to} <= set(r.open)}
    rows = list(kept.values())
    length = np.array([r.length.value.real if r.length else 1.0 for r in rows])
    count = np.array([r.count for r in rows], np.int64)
    ends = np.array([[c.index[r.from_], c.index[r.to]] for r in rows], np.int64).reshape(-1, 2).T
    closed = np.array([[r.from_ not in r.open, r.to not in r.open] for r in rows]).reshape(-1, 2).T

    def total(quantities: list[Any]) -> Any:
        value = np.array([q.value if q else 0 for q in quantities], complex)
        scaled = [bool(q) and q.dimension.endswith("/length") for q in quantities]
        return np.where(scaled, value * length, value)

    z_base = c.base_z[ends[0]]
    z1, z0 = (total([getattr(r, key) for r in rows]) / z_base / count for key in ("z1", "z0"))
    susceptance = []
    for farads, siemens in (("c1", "b1"), ("c0", "b0")):
        b = c.omega * total([getattr(r, farads) for r in rows])
        susceptance.append((b + total([getattr(r, siemens) for r in rows])) * count * z_base)
    b1, b0 = susceptance
    for k, (name, r) in enumerate(kept.items()):
        stated1, stated0 = r.c1 or r.b1, r.c0 or r.b0
        if stated0 and not stated1:
            b1[k] = b0[k]
            c.ledger.note("line", name, "c1 not stated, taken equal to c0")
        elif not stated0:
            c.ledger.note("line", name, "c0 not stated, taken as 0: no charging current to earth")
    return Lines(
        names=tuple(kept),
        ends=ends,
        closed=closed.astype(bool),
        series=np.stack([z0, z1, z1]),
        shunt=0.5j * np.stack([b0, b1, b1]),
        count=count,
    )


def _infeeds(c: Context) -> Shunts:
    records = c.in_service("infeeds", lambda r: (r.bus,))
    bus = np.array([c.index[r.bus] for r in records.values()], np.int64)
    y = np.zeros((3, len(records)), complex)
    for k, (name, r) in enumerate(records.items()):
        u = c.nominal[bus[k]]
        if r.z1 is not None:
            z1 = complex(r.z1.value)
        else:
            level = r.three_phase.value.real
            size = u**2 / level if r.three_phase.dimension == "power" else u / (np.sqrt(3) * level)
            z1 = size * (1 + 1j * r.x_over_r) / np.hypot(1, r.x_over_r)
        if r.z2 is None:
            c.ledger.note("infeed", name, "z2 not stated, taken equal to z1")
        z2 = z1 if r.z2 is None else complex(r.z2.value)
        z_base = c.base_z[bus[k]]
        y[1, k], y[2, k] = z_base / z1, z_base / z2
        if r.line_ground is not None:
            try:
                z0 = zero_sequence_of_level(z1, z2, r.line_ground.value.real, u, r.x0_over_r0)
            except ValueError as error:
                c.complaints.append(f"infeed {quoted(name)}, line_ground: {error}")
                continue
            y[0, k] = z_base / z0
        elif r.z0 != "open":
            y[0, k] = z_base / complex(r.z0.value)
    return Shunts(tuple(records), ("infeed",) * len(records), bus, y)


def _generators(c: Context) -> WindingSets:
    records: dict[str, Generator] = c.in_service("generators", lambda r: (r.bus,))
    m = len(records)
    bus = np.array([c.index[r.bus] for r in records.values()], np.int64).reshape(m, 1)
    leakage = np.zeros((3, m, 1, 1), complex)
    kind, star = np.full((m, 1), STAR, np.int64), np.zeros((m, 1), np.int64)
    star_base = np.ones((m, 1))
    rated = np.ones((m, 1))
    for k, (name, r) in enumerate(records.items()):
        u = c.nominal[bus[k, 0]]
        rated[k] = r.voltage.value.real if r.voltage else u
        if r.voltage is None:
            c.ledger.note("generator", name, "rated voltage not stated, taken as the bus's nominal")
        neutral = r.neutral or "isolated"
        if r.neutral is None:
            c.ledger.note("generator", name, "neutral not stated, taken as isolated")
        kind[k], star[k] = c.stars.join(f"{name}.neutral", neutral, int(bus[k, 0]), u)
        star_base[k] = c.stars.base(int(star[k, 0]))
        own = c.machine
        main = getattr(r, own)
        if main is None:
            c.complaints.append(
                f"generator {quoted(name)}, {own}: not stated, and the {own} state was asked for"
            )
            continue
        if r.x2 is None:
            c.ledger.note("generator", name, "x2 not stated, taken equal to the subtransient reactance")
        if r.resistance is None and not isinstance(main.value, complex):
            c.ledger.note("generator", name, "resistance not stated, taken as 0")
        values = (r.x0, main, r.x2 or r.subtransient)
        for s, value in enumerate(values):
            if value is not None:
                z = _machine_impedance(c, r, value, float(rated[k, 0]), float(c.base_z[bus[k, 0]]))
                leakage[s, k, 0, 0] = 1 / z
    return WindingSets(
        kind_of_record="generator",
        names=tuple(records),
        sides=("neutral",),
        leakage=leakage,
        bus=bus,
        kind=kind,
        star=star,
        ratio=np.ones((m, 1)),
        star_ratio=star_base / c.nominal[bus],
        sign=np.ones((m, 1)),
        sense=np.zeros((m, 1)),
        rated=rated,
        count=np.ones(m, np.int64),
    )


def _machine_impedance(c: Context, r: Generator, value: Any, rated: float, base_z: float) -> complex:
    """Per-unit impedance of one sequence; a real quantity is a reactance behind ``resistance``."""

    def per_unit(q: Any) -> complex:
        if q.dimension == "impedance":
            return complex(q.value / base_z)
        nominal = np.sqrt(base_z * c.power)
        return complex(change_base(q.value, r.rating.value.real, rated, c.power, nominal))

    if isinstance(value.value, complex):
        return per_unit(value)
    return 1j * per_unit(value) + (per_unit(r.resistance) if r.resistance else 0)


def _motors(c: Context) -> Shunts:
    records: dict[str, Motor] = c.in_service("motors", lambda r: (r.bus,))
    if c.machine != "subtransient":
        for name in records:
            c.ledger.note("motor", name, f"left out of the {c.machine} state: its current has decayed")
        records = {}
    bus = np.array([c.index[r.bus] for r in records.values()], np.int64)
    y = np.zeros((3, len(records)), complex)
    for k, (name, r) in enumerate(records.items()):
        u = c.nominal[bus[k]]
        rated = r.voltage.value.real if r.voltage else u
        if r.voltage is None:
            c.ledger.note("motor", name, "rated voltage not stated, taken as the bus's nominal")
        if r.rating is not None:
            rating, shaft = r.rating.value.real, None
        else:
            assert r.shaft_power is not None
            shaft = r.shaft_power.value.real
            rating = motor_rating(shaft, _number(r.efficiency), _number(r.power_factor))
        if r.x_over_r is not None:
            q = r.x_over_r
        else:
            pairs = pole_pairs(c.case.frequency, r.speed.value.real) if r.speed else None
            r_over_x = motor_resistance_ratio(rated, (shaft or rating) / pairs if pairs else None)
            q = 1 / r_over_x
            c.ledger.note(
                "motor",
                name,
                f"x_over_r not stated, R/X = {r_over_x:g} with locked rotor (IEC 60909-0)",
            )
        z = (1 + 1j * q) / np.hypot(1, q) / r.locked_rotor
        y[1:, k] = r.count / change_base(z, rating, rated, c.power, u)
    return Shunts(tuple(records), ("motor",) * len(records), bus, y)


def _number(value: Any) -> float:
    return float(getattr(value, "value", value))


def _machine_capacitances(c: Context) -> Shunts:
    names, bus, farads = [], [], []
    for table in ("generators", "motors"):
        for name, r in c.in_service(table, lambda r: (r.bus,)).items():
            if r.c0 is not None:
                names.append(name)
                bus.append(c.index[r.bus])
                farads.append(r.c0.value.real * getattr(r, "count", 1))
    at = np.array(bus, np.int64)
    y = 1j * c.omega * np.array(farads, float) * c.base_z[at]
    return Shunts(tuple(names), ("capacitance",) * len(names), at, np.stack([y, y, y]))


def _joined(a: Shunts, b: Shunts) -> Shunts:
    return Shunts(
        a.names + b.names,
        a.kinds + b.kinds,
        np.concatenate([a.bus, b.bus]),
        np.concatenate([a.admittance, b.admittance], axis=1),
    )


def _galvanic(zone: Ints, sets: tuple[WindingSets, ...], star_node: Ints, n: int) -> Ints:
    """Labels (n,) of the buses joined by metal: lines, and star points that share a neutral."""
    first, second = [np.arange(n)], [zone + n]
    size = 2 * n + int((star_node >= 0).sum())
    for each in sets:
        joined = (each.kind == STAR) & (each.star >= 0)
        node = np.full_like(each.star, -1)
        if joined.any():
            node[joined] = star_node[each.star[joined]]
        unit, winding = np.nonzero(node >= 0)
        first.append(each.bus[unit, winding])
        second.append(node[unit, winding] + n)
    return components(size, np.concatenate(first), np.concatenate(second))[:n]


def _warn_of_dead(c: Context, live: Any, part: Ints) -> None:
    for label in np.unique(part[~live]):
        dead = [quoted(name) for name, k in c.index.items() if part[k] == label]
        shown = ", ".join(dead[:6]) + (f" and {len(dead) - 6} more" if len(dead) > 6 else "")
        c.warnings.append(
            f"bus {shown}: no infeed or generator is connected here in this state;"
            " voltage and currents are 0"
        )
