"""What holds voltage and what draws power in the loaded state, as columns beside the sources."""

from __future__ import annotations

from typing import Any

import numpy as np

from seqfault.case.records import Generator, Infeed, Load, Motor
from seqfault.errors import quoted
from seqfault.model.context import Context
from seqfault.model.elements import Operating, Shunts
from seqfault.model.machines import as_number, drawn_power

MOTOR_POWER_FACTOR = 0.85
"""Taken where a motor states none (common practice for motors at rated load)."""


def loads(c: Context) -> tuple[Shunts, list[complex]]:
    """Loads in service, without admittance as yet, and the power each draws, VA."""
    records: dict[str, Load] = c.in_service("loads", lambda r: (r.bus,))
    if not c.loaded:
        if records:
            names = ", ".join(map(quoted, list(records)[:6])) + (" …" if len(records) > 6 else "")
            c.ledger.note("load", names, "left out of the flat state; --loaded takes loads in")
        records = {}
    bus = np.array([c.index[r.bus] for r in records.values()], np.int64)
    power = []
    for name, r in records.items():
        if r.connection is None:
            c.ledger.note("load", name, "connection not stated, taken as star without a path to earth")
        s = complex(r.power.value)
        if r.power_factor is not None:
            s = _by_factor(s.real, as_number(r.power_factor), r.power.text)
        power.append(s)
    y = np.zeros((3, len(records)), complex)
    return Shunts(tuple(records), ("load",) * len(records), bus, c.node[bus], y), power


def _by_factor(value: float, cosine: float, text: str) -> complex:
    """P + jQ of a lagging load; a value in VA is apparent power, one in W active power."""
    active = value * cosine if text.rstrip().endswith("VA") else value
    return complex(active, active * np.sqrt(1 / cosine**2 - 1))


def operating(c: Context, sources: Shunts, drawn: list[complex]) -> Operating | None:
    """The loaded state of ``sources`` (infeeds, motors, loads) and the generators in service.

    ``drawn`` VA of the loads. None on a flat profile.
    """
    if not c.loaded:
        return None
    default = float(c.case.prefault.voltage.value.real)
    m = len(sources.names)
    held, power, earthed = np.full(m, np.nan), np.zeros(m, complex), np.zeros(m, bool)
    loads_left = iter(drawn)
    for k, (name, kind) in enumerate(zip(sources.names, sources.kinds, strict=True)):
        if kind == "infeed":
            infeed: Infeed = c.case.infeeds[name]
            held[k] = default if infeed.voltage is None else infeed.voltage.value.real
            if infeed.voltage is None:
                c.ledger.note("infeed", name, f"voltage not stated, holds {default:g} pu")
        elif kind == "motor":
            motor: Motor = c.case.motors[name]
            power[k], factor_stated = drawn_power(motor, MOTOR_POWER_FACTOR)
            if not factor_stated:
                c.ledger.note(
                    "motor",
                    name,
                    f"draws its rating before the fault, at power factor {MOTOR_POWER_FACTOR:g} (assumed)",
                )
            else:
                c.ledger.note("motor", name, "draws its rated power before the fault")
        else:
            power[k] = next(loads_left)
            earthed[k] = c.case.loads[name].connection == "star-earthed"
    generators: dict[str, Generator] = c.in_service("generators", lambda r: (r.bus,))
    rows = list(generators.items())
    for name, _ in c.in_service("converters", lambda r: (r.bus,)).items():
        c.ledger.note("converter", name, "feeds nothing before the fault")
    for name, r in rows:
        if r.holds is None:
            c.ledger.note("generator", name, f"holds not stated, holds {default:g} pu")
    return Operating(
        held=held,
        drawn=np.asarray(power / c.power, complex),
        earthed=earthed,
        fed=np.array([_fed(r) for _, r in rows], float) / c.power,
        holds=np.array([default if r.holds is None else r.holds.value.real for _, r in rows], float),
        rating=np.array([r.rating.value.real for _, r in rows], float),
    )


def _fed(r: Any) -> float:
    return float("nan") if r.power is None else float(r.power.value.real)
