"""Text with a unit, ``"10.1 %"`` or ``"0.12+j0.39 ohm/km"``, to value and dimension.

The value is in V, A, VA, ohm, F, S, H, m, s, Hz, K, rpm or radian, per metre where the unit is per
length, and a plain fraction for per cent and per unit.
"""

from __future__ import annotations

import cmath
import math
import re
from dataclasses import dataclass
from functools import lru_cache
from typing import NoReturn

import msgspec

from seqfault.case.units import COMMON, EXAMPLES, KINDS, UNITS, normalised, respelt
from seqfault.case.wording import listed
from seqfault.errors import QuantityError, quoted

# Far beyond any quantity of the trade; squares and products of a few of them stay finite and not 0.
LARGEST = 1e40
_TOO_SMALL = "the number is too small to be held; write 0 if zero is meant"
_NUMBER = r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_TERM = rf"(?:j ?)?{_NUMBER}(?: ?j(?![a-zA-Z]))?"
_LEADING = re.compile(rf"([+-]? ?{_TERM})(?: ?([+-] ?{_TERM}))?")
_ANGLE = re.compile(rf"([+-]? ?{_NUMBER}) ?(°|deg|rad)?(?![a-z])")
_GROUPED = re.compile(r"(?<![0-9.,])[1-9][0-9]{0,2}(?:[ ,'][0-9]{3})+(?![0-9,])")
_COMMA = re.compile(r"(?<=[0-9]),(?=[0-9])")
_NOT_FINITE = re.compile(r"[+-]? ?(?:nan|inf|infinity|∞)\b", re.IGNORECASE)


class Quantity(msgspec.Struct, frozen=True, array_like=True, gc=False):
    """A value in SI units, its dimension, and the text it was read from.

    ``value`` is complex exactly when an imaginary part or an angle was written.
    """

    value: float | complex
    dimension: str
    text: str


@dataclass(frozen=True, init=False, slots=True)
class Dimensions:
    """Annotation: the dimensions a field may have, and whether its value may be complex."""

    names: tuple[str, ...]
    complex: bool

    def __init__(self, *names: str, complex: bool = False) -> None:
        object.__setattr__(self, "names", names)
        object.__setattr__(self, "complex", complex)


@dataclass(frozen=True, init=False, slots=True)
class Refers:
    """Annotation: a name of one of these tables, or one of these words."""

    words: tuple[str, ...]

    def __init__(self, *words: str) -> None:
        object.__setattr__(self, "words", words)


@lru_cache(maxsize=1 << 16)
def parse_quantity(text: str) -> Quantity:
    """Return the quantity ``text`` states.

    Raises QuantityError, whose message repeats the text and says what would be right.
    """
    return _interpret(text, ())


def read_quantity(text: str, dimensions: Dimensions) -> Quantity:
    """Return the quantity ``text`` states, of one of ``dimensions``.

    Raises QuantityError when it is of another dimension, or complex where that cannot be.
    """
    try:
        quantity = parse_quantity(text)
    except QuantityError:
        return _interpret(text, dimensions.names)  # raises again, now naming what is wanted
    if quantity.dimension not in dimensions.names:
        problem = f"this is {KINDS[quantity.dimension]}; {wanted(dimensions)}"
        if quantity.dimension == "inductance" and "impedance" in dimensions.names:
            problem += " (X = 2 pi f L)"
        raise QuantityError(f"{quoted(text, 80)}: {problem}")
    if isinstance(quantity.value, complex) and not dimensions.complex:
        raise QuantityError(
            f"{quoted(text, 80)}: this is complex; a plain {_kinds(dimensions).split(' ', 1)[1]} "
            f"is wanted, as in {_examples(dimensions)}"
        )
    return quantity


def wanted(dimensions: Dimensions) -> str:
    """Return the clause that says what a field takes, with an example."""
    return f"{_kinds(dimensions)} is wanted, as in {_examples(dimensions)}"


def _kinds(dimensions: Dimensions) -> str:
    return listed(KINDS[name] for name in dimensions.names)


def _examples(dimensions: Dimensions) -> str:
    examples = (EXAMPLES[name][dimensions.complex] for name in dimensions.names)
    return listed(f'"{example}"' for example in examples)


def missing_unit(number: str, dimensions: tuple[str, ...]) -> str:
    """Return what to say of a bare ``number`` where a unit is needed."""
    if len(dimensions) == 1:
        units = COMMON[dimensions[0]]
    else:
        units = tuple(COMMON[name][0] for name in dimensions or ("voltage", "current", "impedance"))
    fixes = listed(quoted(f"{number} {unit}", 80) for unit in units)
    return f"the unit is missing; write {fixes}" + ("" if dimensions else ", for example")


def _interpret(text: str, dimensions: tuple[str, ...]) -> Quantity:
    """Return the quantity; ``dimensions`` serve the messages alone."""
    plain = normalised(text)
    if not plain:
        _refuse(text, "a number with its unit is wanted")
    if _NOT_FINITE.match(plain):
        _refuse(text, "a finite number is wanted")
    bracket = plain[0] == "("
    inner = plain[1:].lstrip() if bracket else plain
    found = _LEADING.match(inner)
    if found is None:
        _refuse(text, _no_number(plain, dimensions))
    rest = inner[found.end() :].lstrip()
    angle = None
    if rest.startswith("∠"):
        angle, rest = _angle(text, rest[1:], "°")
    if bracket:
        if not rest.startswith(")"):
            _refuse(text, 'the bracket "(" is not closed after the number')
        rest = rest[1:].lstrip()
    unit, mark, after = rest.partition("∠")
    if not mark:
        unit, mark, after = f" {rest}".partition(" at ")
    if mark:
        if angle is not None:
            _refuse(text, "two angles; write one")
        angle, left = _angle(text, after, "°" if mark == "∠" else None)
        if left:
            _refuse(text, f"{quoted(left, 40)} follows the angle, where nothing can")
    unit = unit.strip().replace(" /", "/").replace("/ ", "/")
    if unit not in UNITS:
        number = plain.removesuffix(rest).rstrip() if rest else plain
        _refuse(text, _unknown_unit(plain, number, unit, dimensions))
    dimension, power, factor = UNITS[unit]
    value = _rectangular(text, found[1], found[2], power, factor)
    if angle is not None:
        if isinstance(value, complex):
            _refuse(text, "both an imaginary part and an angle; write one of the two")
        if value < 0:
            _refuse(text, "a magnitude is not negative; add 180 to the angle instead")
        value = cmath.rect(value, angle)
    size = abs(value.real) + abs(value.imag)
    if not size < LARGEST:
        _refuse(text, "the number is too large; a finite number is wanted")
    if 0 < size < 1 / LARGEST:
        _refuse(text, _TOO_SMALL)
    return Quantity(value, dimension, text)


def _rectangular(text: str, first: str, second: str | None, power: int, factor: float) -> float | complex:
    value = _number(text, first, power) * factor
    if second is None:
        return complex(0.0, value) if "j" in first else value
    other = _number(text, second, power) * factor
    if ("j" in first) == ("j" in second):
        _refuse(text, f"two {'imaginary' if 'j' in first else 'real'} parts; write R+jX")
    return complex(other, value) if "j" in first else complex(value, other)


def _angle(text: str, written: str, default: str | None) -> tuple[float, str]:
    """Return the angle in radians and what follows it."""
    found = _ANGLE.match(written.lstrip())
    if found is None:
        _refuse(text, "an angle is wanted after the magnitude, as in 0.41 ohm/km at 73.8 deg")
    unit = found[2] or default
    if unit is None:
        _refuse(text, f"the angle has no unit; write at {found[1]} deg")
    value = _number(text, found[1])
    if not math.isfinite(value):
        _refuse(text, "the angle is too large; a finite number is wanted")
    return (
        value if unit == "rad" else math.radians(value),
        written.lstrip()[found.end() :].strip(),
    )


def _number(text: str, written: str, power: int = 0) -> float:
    mantissa, _, exponent = written.replace(" ", "").replace("j", "").lower().partition("e")
    if len(exponent) > 9:
        _refuse(text, "the exponent is too large; a finite number is wanted")
    value = float(f"{mantissa}e{int(exponent or 0) + power}")
    if value == 0 and re.search("[1-9]", mantissa):
        _refuse(text, _TOO_SMALL)
    return value


def _refuse(text: str, problem: str) -> NoReturn:
    raise QuantityError(f"{quoted(text, 80)}: {problem}")


def _no_number(plain: str, dimensions: tuple[str, ...]) -> str:
    strange = next((char for char in plain if not char.isascii() and char not in "∠°"), None)
    if strange is not None:
        return f"{quoted(strange)} cannot stand in a quantity; a number with its unit is wanted"
    examples = [EXAMPLES[name][False] for name in dimensions] or ["11 kV"]
    return f"a number is wanted before the unit, as in {listed(map(quoted, examples))}"


def _unknown_unit(plain: str, number: str, unit: str, dimensions: tuple[str, ...]) -> str:
    """Say what is wrong with ``plain``, whose ``unit`` is none, and what was meant if sure."""
    if not unit:
        return missing_unit(number, dimensions)
    if _GROUPED.search(plain):
        joined = _GROUPED.sub(lambda group: re.sub("[ ,']", "", group[0]), plain)
        fixes = _repairs(joined, dimensions)
        if "," in plain and plain.count(",") == 1:
            fixes = _repairs(_COMMA.sub(".", plain), dimensions) + fixes
        if fixes:
            return f"a number is written without groups of digits; write {listed(fixes)}"
    if unit[0] == ",":
        pointed = _COMMA.sub(".", plain)
        fixes = _repairs(pointed, dimensions)
        write = listed(fixes) if fixes else f"{quoted(pointed, 40)} with its unit"
        return f"the decimal sign is a point; write {write}"
    if not unit[0].isascii() and unit[0] != "°":
        return _no_number(unit, dimensions)
    fixes = _repairs(plain, dimensions)
    problem = f"there is no unit {quoted(unit, 40)}"
    if fixes:
        return f"{problem}; write {listed(fixes)}"
    if not dimensions:
        return f'{problem}; write it as in "11 kV", "6.35 ohm" or "10.1 %"'
    examples = listed(f'"{EXAMPLES[name][False]}"' for name in dimensions)
    return f"{problem}; write it as in {examples}"


def _repairs(plain: str, dimensions: tuple[str, ...]) -> list[str]:
    """Return ``plain`` with its unit respelt, each in quotes, for every unit it may have meant."""
    found = _LEADING.match(plain)
    if found is None:
        return []
    unit, mark, angle = plain[found.end() :].strip().partition(" at ")
    candidates = [unit] if unit in UNITS else respelt(unit)
    fitting = [name for name in candidates if not dimensions or UNITS[name][0] in dimensions]
    return [quoted(f"{found[0]} {name}{mark}{angle}", 80) for name in fitting]
