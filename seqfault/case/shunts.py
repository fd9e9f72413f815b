"""Rules for what stands between a bus and earth without feeding it: capacitors; and for converters."""

from __future__ import annotations

import math

from seqfault.case.quantities import Quantity
from seqfault.case.records import Capacitor, Converter, Load
from seqfault.case.subject import Subject, real, said
from seqfault.case.units import normalised

_LARGEST, _USUAL = 3.0, 2.0  # times rated current, common practice for semiconductors
_THRESHOLD = (0.1, 1.0)


def check_capacitor(subject: Subject, bank: Capacitor) -> None:
    """Tell what is wrong or doubtful about a capacitor bank."""
    subject.bus("bus", bank.bus)
    subject.positive({"power": bank.power, "capacitance": bank.capacitance})
    if bank.power is None and bank.capacitance is None:
        subject.error("", "its size is missing; give power in Mvar, or capacitance in F a phase")
    elif bank.power is not None and bank.capacitance is not None:
        subject.error("", "both power and capacitance are given; give one of the two")
    if bank.power is not None and not normalised(bank.power.text).endswith("var"):
        text = f"{said(bank.power)}: the power of a capacitor is in var; this counts as so many var"
        subject.warn("power", text)


def check_load(subject: Subject, load: Load) -> None:
    """Tell what is wrong or doubtful about a load."""
    subject.bus("bus", load.bus)
    power, factor = load.power.value, load.power_factor
    if isinstance(power, complex):
        if power.real < 0:
            subject.error("power", f"{said(load.power)}: its active part cannot be negative")
        if factor is not None:
            subject.error("power_factor", "power is written with both parts, P+jQ; leave power_factor out")
    else:
        subject.positive({"power": load.power})
        if factor is None:
            subject.error(
                "power_factor", "this is missing; give it, as in 0.9, or power with both parts, P+jQ"
            )
    value = factor.value if isinstance(factor, Quantity) else factor
    if value is not None and not isinstance(value, complex) and not 0 < value <= 1:
        subject.error("power_factor", f"{value:g}: this is above 0 and up to 1, lagging")


def check_converter(subject: Subject, converter: Converter) -> None:
    """Tell what is wrong or doubtful about an inverter-fed infeed."""
    subject.bus("bus", converter.bus)
    subject.positive({"rating": converter.rating})
    subject.volt_amperes(converter.rating)
    current = converter.fault_current
    if not 0 < current <= _LARGEST:
        repair = f"; write {current / 100:g}?" if 50 <= current <= 100 * _LARGEST else ""
        subject.error(
            "fault_current",
            f"{current:g}: this is in times rated current, above 0 and up to {_LARGEST:g}{repair}",
        )
    elif current > _USUAL:
        subject.warn("fault_current", f"{current:g} times rated current is above the usual {_USUAL:g}")
    angle = real(converter.angle)
    if angle is not None and abs(angle) > math.pi * (1 + 1e-9):
        subject.error("angle", f"{said(converter.angle)}: this lies between -180 and 180 deg")
    threshold, (low, high) = real(converter.threshold), _THRESHOLD
    if threshold is not None and not low * (1 - 1e-9) <= threshold <= high * (1 + 1e-9):
        text = f"{said(converter.threshold)}: this lies between {low:g} and {high:g} pu"
        subject.error("threshold", text)
