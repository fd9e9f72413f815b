"""Rules for what stands between a bus and earth without feeding it: capacitors; and for converters."""

from __future__ import annotations

import math

from seqfault.case.records import Capacitor, Converter
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
