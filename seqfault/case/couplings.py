"""Rules for the zero-sequence coupling of lines."""

from __future__ import annotations

import math
from itertools import combinations

from seqfault.case.records import Line, MutualCoupling
from seqfault.case.subject import Site, Subject, real, said
from seqfault.case.wording import amount, digits, keyed
from seqfault.errors import quoted

_ROUNDING = 1 + 1e-9


def check_coupling(subject: Subject, coupling: MutualCoupling) -> None:
    """Tell what is wrong or doubtful about the coupling of two lines or more."""
    names = coupling.lines
    lines = {name: line for name in dict.fromkeys(names) if (line := subject.line("lines", name))}
    if len(names) < 2:
        subject.error("lines", f'{len(names)} given: a coupling has two lines or more, as in ["F1", "F2"]')
    for name in sorted({name for name in names if names.count(name) > 1}):
        subject.error("lines", f"{quoted(name)} stands twice; each line stands once")
    for name, line in lines.items():
        if line.count > 1:
            subject.error(
                "lines",
                f"{quoted(name)} is {line.count} circuits in one record; "
                "coupled circuits are written as one line each",
            )
    if coupling.z0.value == 0:
        subject.error("z0", f"{said(coupling.z0)}: this cannot be zero")
    subject.resistive("z0", coupling.z0)
    z = complex(coupling.z0.value)
    if z.real * z.imag < 0:
        subject.warn(
            "z0",
            f"{said(coupling.z0)}: its parts have opposite signs; where a line runs the other way both turn"
            " negative",
        )
    if _lengths(subject, coupling, lines):
        _strength(subject, coupling, lines)


def _lengths(subject: Subject, coupling: MutualCoupling, lines: dict[str, Line]) -> bool:
    """Tell whether the coupled stretch is known where it must be, and lies within each line."""
    sound = subject.positive({"length": coupling.length})
    length, known = _length(coupling, lines), _known(lines)
    for name in coupling.start or {}:
        if name not in coupling.lines:
            subject.error(f"start.{keyed(name)}", "this line is not among those coupled; add it to lines")
            sound = False
    without = next((name for name, line in lines.items() if line.length is None), None)
    if coupling.z0.dimension.endswith("/length") and coupling.length is None and without is not None:
        subject.error(
            "length",
            f"this is missing; z0 = {said(coupling.z0)} is per length, and line {quoted(without)} has none",
        )
        sound = False
    starts = coupling.start or {}
    sound &= subject.positive({f"start.{keyed(name)}": start for name, start in starts.items()}, zero=True)
    if not sound or length is None:
        return sound
    for name, line in lines.items():
        start, whole = real(starts.get(name)), known.get(name)
        if whole is None:
            if start is not None and line.length is None:
                subject.error(
                    f"start.{keyed(name)}", "the line states no length, so no place along it is known"
                )
                sound = False
        elif start is not None and start + length > whole * _ROUNDING:
            subject.error(
                f"start.{keyed(name)}",
                f"{said(starts[name])} and the coupled {amount(length, 'm')} reach "
                f"{amount(start + length, 'm')}, beyond the {said(line.length)} of the line",
            )
            sound = False
        elif length > whole * _ROUNDING:
            text = f"{said(coupling.length)} is longer than the {said(line.length)} of line {quoted(name)}"
            subject.error("length", text)
            sound = False
    return sound


def _known(lines: dict[str, Line]) -> dict[str, float]:
    """Return the lengths (m) that the lines state."""
    stated = ((name, real(line.length)) for name, line in lines.items())
    return {name: length for name, length in stated if length is not None and length > 0}


def _length(coupling: MutualCoupling, lines: dict[str, Line]) -> float | None:
    """Return the coupled length (m), by default that of the shortest line; None if unknown."""
    return real(coupling.length) or min(_known(lines).values(), default=None)


def _strength(subject: Subject, coupling: MutualCoupling, lines: dict[str, Line]) -> None:
    """Complain of a coupling that is stronger than its lines: X_m² < X_a X_b must hold."""
    length = _length(coupling, lines)
    mutual = _reactance(coupling.z0.value)
    if coupling.z0.dimension.endswith("/length"):
        mutual *= length or 0.0
    own = {}
    for name, line in lines.items():
        reactance, whole = _reactance(line.z0.value), real(line.length)
        if line.z0.dimension.endswith("/length"):
            reactance *= length or 0.0
        elif whole and whole > 0 and length:
            reactance *= length / whole
        own[name] = reactance
    for one, other in combinations(own, 2):
        if own[one] <= 0 or own[other] <= 0 or mutual**2 * _ROUNDING < own[one] * own[other]:
            continue
        subject.error(
            "z0",
            f"{said(coupling.z0)}: the mutual reactance {digits(abs(mutual))} ohm must be less than "
            f"{digits(math.sqrt(own[one] * own[other]))} ohm, the geometric mean of the zero-sequence "
            f"reactances {digits(own[one])} ohm of {quoted(one)} and {digits(own[other])} ohm of "
            f"{quoted(other)} over the coupled length",
        )


def _reactance(value: float | complex) -> float:
    return value.imag if isinstance(value, complex) else 0.0


def check_couplings(site: Site) -> None:
    """Complain of two couplings that name the same pair of lines."""
    first: dict[frozenset[str], str] = {}
    for name, coupling in site.case.mutual_couplings.items():
        for pair in combinations(sorted(set(coupling.lines)), 2):
            other = first.setdefault(frozenset(pair), name)
            if other != name:
                Subject(site, "mutual_couplings", name).error(
                    "lines",
                    f"{quoted(pair[0])} and {quoted(pair[1])} are coupled by {quoted(other)} already",
                )
