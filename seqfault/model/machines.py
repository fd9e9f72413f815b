"""Generators and motors: nameplates to columns."""

from __future__ import annotations

from typing import Any

import numpy as np

from seqfault.case.records import Generator, Motor
from seqfault.equations.machines import motor_rating, motor_resistance_ratio, pole_pairs
from seqfault.equations.per_unit import change_base
from seqfault.errors import quoted
from seqfault.model.context import Context
from seqfault.model.elements import STAR, Shunts, WindingSets


def generators(c: Context) -> WindingSets:
    """Synchronous machines in service, one winding each behind its star point."""
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
        kind[k], star[k] = c.stars.join(f"{name}.neutral", neutral, int(bus[k, 0]), float(u))
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
        sides=("",),
        leakage=leakage,
        bus=bus,
        node=c.node[bus],
        kind=kind,
        star=star,
        ratio=np.ones((m, 1)),
        star_ratio=star_base / c.nominal[bus],
        sign=np.ones((m, 1)),
        sense=np.zeros((m, 1)),
        rated=rated,
        count=np.ones(m, np.int64),
        magnetised=np.zeros(m, bool),
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


def motors(c: Context) -> Shunts:
    """Induction motors in service; none but in the subtransient state."""
    records: dict[str, Motor] = c.in_service("motors", lambda r: (r.bus,))
    if c.machine != "subtransient":
        for name in records:
            text = f"left out of the {c.machine} state: its current has decayed"
            if c.loaded:
                text = f"no source in the {c.machine} state, and drew nothing before the fault"
            c.ledger.note("motor", name, text)
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
            rating = motor_rating(shaft, as_number(r.efficiency), as_number(r.power_factor))
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
    return Shunts(tuple(records), ("motor",) * len(records), bus, c.node[bus], y)


def drawn_power(motor: Motor, power_factor: float) -> tuple[complex, bool]:
    """P + jQ (VA) that all motors of a record draw at rated load, and whether it states a power factor.

    ``power_factor`` serves where it states none.
    """
    stated = motor.power_factor is not None
    cosine = as_number(motor.power_factor) if stated else power_factor
    if motor.rating is not None:
        rating = motor.rating.value.real
    else:
        assert motor.shaft_power is not None
        rating = motor_rating(motor.shaft_power.value.real, as_number(motor.efficiency), cosine)
    return motor.count * rating * complex(cosine, np.sqrt(1 - cosine**2)), stated


def as_number(value: Any) -> float:
    """A plain number, or the fraction that a per cent quantity states."""
    return float(getattr(value, "value", value))


def machine_capacitances(c: Context) -> Shunts:
    """Capacitances to earth of generators and motors in service."""
    names, bus, farads = [], [], []
    for table in ("generators", "motors"):
        for name, r in c.in_service(table, lambda r: (r.bus,)).items():
            if r.c0 is not None:
                names.append(name)
                bus.append(c.index[r.bus])
                farads.append(r.c0.value.real * getattr(r, "count", 1))
    at = np.array(bus, np.int64)
    y = 1j * c.omega * np.array(farads, float) * c.base_z[at]
    return Shunts(tuple(names), ("capacitance",) * len(names), at, c.node[at], np.stack([y, y, y]))
