"""What joins a bus straight to earth: infeeds, capacitor banks, converters."""

from __future__ import annotations

import numpy as np

from seqfault.case.records import Capacitor, Converter
from seqfault.equations.earthing import zero_sequence_of_level
from seqfault.errors import quoted
from seqfault.model.context import Context
from seqfault.model.elements import Converters, Shunts


def infeeds(c: Context) -> Shunts:
    """Infeeds in service; their zero sequence joins the bus straight to earth."""
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
    return Shunts(tuple(records), ("infeed",) * len(records), bus, c.node[bus], y)


def capacitors(c: Context) -> Shunts:
    """Capacitor banks: in zero sequence only where their star point is earthed.

    Q = ω C U² at nominal voltage; a delta of C a phase acts as a star of 3 C (common practice).
    """
    records: dict[str, Capacitor] = c.in_service("capacitors", lambda r: (r.bus,))
    bus = np.array([c.index[r.bus] for r in records.values()], np.int64)
    y = np.zeros((3, len(records)), complex)
    for k, r in enumerate(records.values()):
        if r.power is not None:
            per_unit = r.power.value.real / c.power
        else:
            assert r.capacitance is not None
            farads = r.capacitance.value.real * (3 if r.connection == "delta" else 1)
            per_unit = c.omega * farads * float(c.base_z[bus[k]])
        y[1:, k] = 1j * per_unit
        if r.connection == "star-earthed":
            y[0, k] = 1j * per_unit
    return Shunts(tuple(records), ("capacitor",) * len(records), bus, c.node[bus], y)


def converters(c: Context) -> Converters:
    """Inverter-fed infeeds in service."""
    records: dict[str, Converter] = c.in_service("converters", lambda r: (r.bus,))
    for name, r in records.items():
        if r.angle is None:
            c.ledger.note("converter", name, "angle not stated, taken as 90 degrees behind V1")
        if r.threshold is None:
            c.ledger.note("converter", name, "threshold not stated, taken as 0.9 pu")
    rows = list(records.values())
    bus = np.array([c.index[r.bus] for r in rows], np.int64)
    return Converters(
        names=tuple(records),
        bus=bus,
        node=c.node[bus],
        limit=np.array([r.fault_current * r.rating.value.real / c.power for r in rows], float),
        angle=np.array([np.pi / 2 if r.angle is None else r.angle.value.real for r in rows], float),
        threshold=np.array([0.9 if r.threshold is None else r.threshold.value.real for r in rows], float),
    )


def joined(a: Shunts, b: Shunts) -> Shunts:
    """Both sets of shunts, one after the other."""
    return Shunts(
        a.names + b.names,
        a.kinds + b.kinds,
        np.concatenate([a.bus, b.bus]),
        np.concatenate([a.node, b.node]),
        np.concatenate([a.admittance, b.admittance], axis=1),
    )
