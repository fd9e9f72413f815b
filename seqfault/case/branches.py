"""Rules for lines and transformers."""

from __future__ import annotations

import math

from seqfault.case.quantities import Quantity
from seqfault.case.records import Bus, Line, Transformer, Winding
from seqfault.case.subject import Subject, real, said
from seqfault.case.units import normalised
from seqfault.case.vector_group import VectorGroup, parse_vector_group
from seqfault.case.wording import amount, digits, quoted
from seqfault.errors import FieldError

# Common practice, overhead lines and cables of all voltages.
_OHM_PER_KM = (0.005, 5.0)
_FARAD_PER_KM = (0.5e-9, 5e-6)
_LONGEST = 1000e3  # m
_IMPEDANCE = (0.005, 0.30)


def check_line(subject: Subject, line: Line) -> None:
    """Tell what is wrong or doubtful about a line or cable."""
    start, end = subject.bus("from", line.from_), subject.bus("to", line.to)
    if line.from_ == line.to:
        subject.error("", f"both its ends are on bus {quoted(line.to)}")
    elif start is not None and end is not None and _differ(start, end):
        subject.error(
            "",
            f"it joins {normalised(start.voltage.text)} (bus {quoted(line.from_)}) to "
            f"{normalised(end.voltage.text)} (bus {quoted(line.to)}); "
            "a line has one nominal voltage, so a transformer is missing",
        )
    for bus in line.open:
        if bus not in (line.from_, line.to):
            subject.error(
                "open",
                f"{quoted(bus)} is no end of this line; "
                f"its ends are {quoted(line.from_)} and {quoted(line.to)}",
            )
    subject.count(line.count)
    subject.positive({"length": line.length})
    subject.positive({"c1": line.c1, "c0": line.c0, "b1": line.b1, "b0": line.b0}, zero=True)
    for c, b in (("c1", "b1"), ("c0", "b0")):
        if getattr(line, c) is not None and getattr(line, b) is not None:
            subject.error("", f"both {c} and {b} are given; give one of the two")
    _line_values(subject, line)


def _differ(start: Bus, end: Bus) -> bool:
    """Tell whether two nominal voltages, both of them possible, are not the same."""
    one, other = real(start.voltage) or 0.0, real(end.voltage) or 0.0
    return one > 0 and other > 0 and not math.isclose(one, other, rel_tol=1e-6)


def _line_values(subject: Subject, line: Line) -> None:
    length = real(line.length)
    if length is not None and length > _LONGEST:
        subject.usual(
            "length", length, (0, _LONGEST), f"{said(line.length)} is above the usual 1000 km", 1e3
        )
    for field in ("z1", "z0", "c1", "c0", "b1", "b0"):
        quantity = getattr(line, field)
        if quantity is None:
            continue
        if line.length is None and quantity.dimension.endswith("/length"):
            subject.error(field, f"{said(quantity)} is per length, and the length is missing")
        if field in ("z1", "z0"):
            if not subject.impedance(field, quantity):
                continue
            subject.resistive(field, quantity)
        value = _per_km(quantity, length)
        if value is None or value == 0:
            continue
        if field == "z1":
            text = f"{said(quantity)} is {digits(value)} ohm/km, outside the usual 0.005 to 5 ohm/km"
            subject.usual(field, value, _OHM_PER_KM, text, 1e3)
        elif field[0] in "cb":
            if field[0] == "b":
                value /= 2 * math.pi * (subject.site.case.frequency or 50.0)
            text = f"{said(quantity)} is {amount(value, 'F')}/km, outside the usual 0.5 nF/km to 5 uF/km"
            subject.usual(field, value, _FARAD_PER_KM, text, 1e3)


def _per_km(quantity: Quantity, length: float | None) -> float | None:
    if quantity.dimension.endswith("/length"):
        return abs(quantity.value) * 1e3
    return abs(quantity.value) / length * 1e3 if length and length > 0 else None


def check_transformer(subject: Subject, unit: Transformer) -> None:
    """Tell what is wrong or doubtful about a two-winding transformer."""
    group = None
    try:
        group = parse_vector_group(unit.vector_group)
    except FieldError as error:
        subject.error("vector_group", str(error))
    for side, winding in (("hv", unit.hv), ("lv", unit.lv)):
        subject.bus(f"{side}.bus", winding.bus)
        if subject.positive({f"{side}.voltage": winding.voltage}):
            subject.rated_voltage(f"{side}.voltage", winding.voltage, winding.bus)
        subject.star_point(f"{side}.neutral", winding.neutral)
        if group is not None and winding.neutral is not None:
            _star_point(subject, side, winding, group, unit.vector_group)
    if unit.hv.bus == unit.lv.bus:
        subject.error("", f"both its windings are on bus {quoted(unit.hv.bus)}")
    hv, lv = real(unit.hv.voltage), real(unit.lv.voltage)
    if hv is not None and lv is not None and hv < lv:
        subject.warn(
            "", f"hv {said(unit.hv.voltage)} is below lv {said(unit.lv.voltage)}; sides exchanged?"
        )
    subject.positive({"rating": unit.rating})
    subject.positive({"load_loss": unit.load_loss}, zero=True)
    subject.volt_amperes(unit.rating)
    subject.count(unit.count)
    subject.x_over_r("x_over_r", unit.x_over_r)
    _impedance(subject, unit)
    _zero_sequence(subject, unit, group)
    _tap(subject, unit.tap)


def _star_point(subject: Subject, side: str, winding: Winding, group: VectorGroup, written: str) -> None:
    kind = group.hv if side == "hv" else group.lv
    brought_out = group.hv_star_point if side == "hv" else group.lv_star_point
    neutral = quoted(winding.neutral or "")
    if kind == "delta":
        problem = f"{neutral}: the {side} winding of {written} is a delta and has no star point"
    elif not brought_out:
        letter = "N" if side == "hv" else "n"
        problem = (
            f"{neutral}: {written} says that the {side} star point is not brought out; "
            f"add {letter} to the group or leave neutral out"
        )
    else:
        return
    subject.error(f"{side}.neutral", problem)


def _impedance(subject: Subject, unit: Transformer) -> None:
    sound = subject.impedance("impedance", unit.impedance)
    parts = unit.x_over_r is not None, unit.load_loss is not None
    if isinstance(unit.impedance.value, complex):
        if any(parts):
            field = "x_over_r" if parts[0] else "load_loss"
            subject.error(field, "the impedance states its resistance already; leave this out")
    elif not any(parts):
        subject.error(
            "",
            "its resistance is missing; give x_over_r or load_loss, "
            'or a complex impedance, as in "0.5+j10 %"',
        )
    elif all(parts):
        subject.error("", "both x_over_r and load_loss are given; give one of the two")
    share, rating, loss = _share(unit), real(unit.rating), real(unit.load_loss)
    if not sound or not share:
        return
    text = f"{said(unit.impedance)} is {digits(100 * share)} %, outside the usual 0.5 to 30 %"
    subject.usual("impedance", share, _IMPEDANCE, text, 100)
    if rating and loss and loss / rating > share:
        subject.error(
            "load_loss",
            f"{said(unit.load_loss)} is {digits(100 * loss / rating)} % of the rating, "
            f"more than the impedance {said(unit.impedance)}",
        )


def _share(unit: Transformer) -> float | None:
    """Return the impedance as a fraction of the unit's own, ohms being those seen from hv."""
    size, rating, voltage = abs(unit.impedance.value), real(unit.rating), real(unit.hv.voltage)
    if unit.impedance.dimension == "ratio":
        return size
    return size * rating / voltage**2 if rating and rating > 0 and voltage else None


def _zero_sequence(subject: Subject, unit: Transformer, group: VectorGroup | None) -> None:
    subject.impedance("z0", unit.z0)
    if unit.z0 is not None and unit.z0_over_z1 is not None:
        subject.error("", "both z0 and z0_over_z1 are given; give one of the two")
    if unit.z0_over_z1 is not None and unit.z0_over_z1 <= 0:
        subject.error("z0_over_z1", f"{unit.z0_over_z1:g}: this must be more than zero")
    if group is not None and not group.has_delta and unit.magnetic_circuit is None:
        subject.error(
            "magnetic_circuit",
            "this is missing; a star-star unit without a delta needs it: "
            '"three-limb", "five-limb", "shell-form" or "three-single-phase"',
        )


def _tap(subject: Subject, tap: Quantity | None) -> None:
    share = real(tap)
    if share is None:
        return
    if share <= -1:
        subject.error("tap", f"{said(tap)}: this leaves no turns on the hv winding")
    elif abs(share) > 0.25:
        cure = f'; write "{100 * (share - 1):+.3g} %"?' if 0.75 <= share <= 1.25 else ""
        subject.warn("tap", f"{said(tap)} means {100 * share:+.4g} % of the hv turns{cure}")
