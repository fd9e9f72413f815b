"""Rules for lines, series reactors and ties: what joins two buses of one nominal voltage."""

from __future__ import annotations

import math

from seqfault.case.quantities import Quantity
from seqfault.case.records import Bus, Case, Line, SeriesReactor, Tie
from seqfault.case.subject import Subject, is_usual, real, said
from seqfault.case.units import normalised
from seqfault.case.wording import amount, digits
from seqfault.errors import quoted

# Common practice, overhead lines and cables of all voltages.
_OHM_PER_KM = (0.005, 5.0)
_FARAD_PER_KM = (2e-9, 5e-6)
_LONGEST = 1000e3  # m
_REACH = ((1e3, 10e3), (40e3, 150e3), (150e3, 400e3))
"""Longest usual line (m) up to a nominal voltage (V)."""


def check_line(subject: Subject, line: Line) -> None:
    """Tell what is wrong or doubtful about a line or cable."""
    if unremarkable(line, subject.site.case):
        return
    _ends(subject, line, "a line")
    for bus in line.open:
        if bus not in (line.from_, line.to):
            subject.error(
                "open",
                f"{quoted(bus)} is no end of this line; "
                f"its ends are {quoted(line.from_)} and {quoted(line.to)}",
            )
    if line.earthed and not line.out:
        subject.error(
            "earthed",
            "a line in service is not earthed at its ends; write out = true beside it, or earthed = false",
        )
    subject.count(line.count)
    subject.positive({"length": line.length, "screen_current": line.screen_current})
    subject.positive({"c1": line.c1, "c0": line.c0, "b1": line.b1, "b0": line.b0}, zero=True)
    for c, b in (("c1", "b1"), ("c0", "b0")):
        if getattr(line, c) is not None and getattr(line, b) is not None:
            subject.error("", f"both {c} and {b} are given; give one of the two")
    _line_values(subject, line)


def unremarkable(line: Line, case: Case) -> bool:
    """Tell whether every rule would pass a line over: quick, and false where that takes more to know."""
    start, end, length = case.buses.get(line.from_), case.buses.get(line.to), line.length
    if start is None or end is None or length is None or line.earthed or line.count < 1:
        return False
    metres, nominal, z1, z0 = length.value.real, start.voltage.value.real, line.z1.value, line.z0.value
    if nominal != end.voltage.value or metres <= 0:
        return False
    if metres > _REACH[0][1] and metres > _longest(nominal):
        return False
    if not (isinstance(z1, complex) and isinstance(z0, complex) and line.from_ != line.to):
        return False
    if z1.real < 0 or z1.imag < 0 or z0.real < 0 or z0.imag < 0:
        return False
    one = abs(z1) if line.z1.dimension == "impedance/length" else abs(z1) / metres
    zero = abs(z0) if line.z0.dimension == "impedance/length" else abs(z0) / metres
    if not _OHM_PER_KM[0] <= 1e3 * one <= min(1e3 * zero, _OHM_PER_KM[1]):
        return False
    if line.open and not {line.from_, line.to}.issuperset(line.open):
        return False
    if line.screen_current is not None and line.screen_current.value.real <= 0:
        return False
    if line.b1 is line.b0 is None:
        return _usual_capacitances(line.c1, line.c0, metres, 1.0)
    omega = 2 * math.pi * (case.frequency or 50.0)
    return line.c1 is line.c0 is None and _usual_capacitances(line.b1, line.b0, metres, omega)


def _usual_capacitances(one: Quantity | None, zero: Quantity | None, metres: float, omega: float) -> bool:
    """Tell whether both sequences are usual, or neither is stated; ``omega`` makes susceptances of them."""
    if one is None or zero is None:
        return one is zero
    if one.dimension != zero.dimension:
        return False
    per_km = 1e3 / omega if one.dimension.endswith("/length") else 1e3 / omega / metres
    return _FARAD_PER_KM[0] <= per_km * zero.value.real <= per_km * one.value.real <= _FARAD_PER_KM[1]


def _longest(nominal: float | None) -> float:
    """Return the usual length (m) that a line of a nominal voltage (V) does not exceed."""
    return next((far for volts, far in _REACH if nominal and nominal <= volts), _LONGEST)


def _ends(subject: Subject, branch: Line | SeriesReactor | Tie, kind: str) -> None:
    """Complain of ends that are one bus, unknown, or of two nominal voltages."""
    start, end = subject.bus("from", branch.from_), subject.bus("to", branch.to)
    if branch.from_ == branch.to:
        subject.error("", f"both its ends are on bus {quoted(branch.to)}")
    elif start is not None and end is not None and _differ(start, end):
        subject.error(
            "",
            f"it joins {normalised(start.voltage.text)} (bus {quoted(branch.from_)}) to "
            f"{normalised(end.voltage.text)} (bus {quoted(branch.to)}); "
            f"{kind} has one nominal voltage, so a transformer is missing",
        )


def _differ(start: Bus, end: Bus) -> bool:
    """Tell whether two nominal voltages, both of them possible, are not the same."""
    one, other = real(start.voltage) or 0.0, real(end.voltage) or 0.0
    return one > 0 and other > 0 and not math.isclose(one, other, rel_tol=1e-6)


def _line_values(subject: Subject, line: Line) -> None:
    length = real(line.length)
    nominal = _nominal(subject, line)
    longest = _longest(nominal)
    if length is not None and length > longest:
        at = f" at {amount(nominal, 'V')}" if nominal else ""
        text = f"{said(line.length)} is above the usual {longest / 1e3:g} km{at}"
        subject.usual("length", length, (0, longest), text, 1e3)
    _sequences(subject, line)
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
        if field == "z1" and not is_usual(value, _OHM_PER_KM):
            text = f"{said(quantity)} is {digits(value)} ohm/km, outside the usual 0.005 to 5 ohm/km"
            subject.usual(field, value, _OHM_PER_KM, text, 1e3)
        elif field[0] in "cb":
            if field[0] == "b":
                value /= 2 * math.pi * (subject.site.case.frequency or 50.0)
            if not is_usual(value, _FARAD_PER_KM):
                text = f"{said(quantity)} is {amount(value, 'F')}/km, outside the usual 2 nF/km to 5 uF/km"
                subject.usual(field, value, _FARAD_PER_KM, text, 1e3)


def _nominal(subject: Subject, line: Line) -> float | None:
    bus = subject.site.case.buses.get(line.from_)
    return real(bus.voltage) if bus is not None else None


def _sequences(subject: Subject, line: Line) -> None:
    """Doubt a zero sequence below the positive one, and a capacitance to earth above the whole."""
    length = real(line.length)
    z1, z0 = _per_km(line.z1, length), _per_km(line.z0, length)
    if z1 and z0 and _OHM_PER_KM[0] <= z0 < z1 <= _OHM_PER_KM[1]:
        subject.warn(
            "z0",
            f"{said(line.z0)} is smaller than z1 = {said(line.z1)}; in a line or cable it is the larger",
        )
    for one, zero in ((line.c1, line.c0), (line.b1, line.b0)):
        if one is None or zero is None or one.dimension != zero.dimension:
            continue
        usual = line.b1 is not None or (_per_km(one, length) or 0.0) >= _FARAD_PER_KM[0]
        if usual and abs(zero.value) > 1.001 * abs(one.value) > 0:
            name = "c0" if zero is line.c0 else "b0"
            text = f"{said(zero)} is larger than {name[0]}1 = {said(one)}; to earth it is never more"
            subject.warn(name, text)


def _per_km(quantity: Quantity, length: float | None) -> float | None:
    if quantity.dimension.endswith("/length"):
        return abs(quantity.value) * 1e3
    return abs(quantity.value) / length * 1e3 if length and length > 0 else None


def check_series_reactor(subject: Subject, reactor: SeriesReactor) -> None:
    """Tell what is wrong or doubtful about a reactor in series."""
    _ends(subject, reactor, "a series reactor")
    subject.positive({"rating": reactor.rating})
    subject.volt_amperes(reactor.rating)
    subject.x_over_r("x_over_r", reactor.x_over_r)
    for field in ("impedance", "z0"):
        subject.impedance(field, getattr(reactor, field))
    if subject.own_base("impedance", reactor.impedance, reactor.rating):
        subject.own_base("z0", reactor.z0, reactor.rating)
    if isinstance(reactor.impedance.value, complex) and reactor.x_over_r is not None:
        subject.error("x_over_r", "the impedance states its resistance already; leave this out")


def check_tie(subject: Subject, tie: Tie) -> None:
    """Tell what is wrong about a bus coupler or section switch."""
    _ends(subject, tie, "a tie")
