"""The rated ratio of an instrument transformer, ``"200/1 A"`` or ``"11 kV/110 V"``, to two values."""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from typing import NoReturn

import msgspec

from seqfault.case.quantities import Dimensions, Quantity, read_quantity
from seqfault.case.units import UNITS, normalised
from seqfault.errors import FieldError, QuantityError, quoted

EXAMPLES = {"current": "200/1 A", "voltage": "11 kV/110 V"}
_UNIT = {"current": "A", "voltage": "V"}
_NUMBER = re.compile(r"[0-9.]+(?:[eE][+-]?[0-9]+)?")


class RatedRatio(msgspec.Struct, frozen=True, array_like=True):
    """Rated primary and secondary, both in A or both in V, and the text they were read from."""

    primary: float
    secondary: float
    text: str


@dataclass(frozen=True, slots=True)
class Rated:
    """Annotation: a rated ratio of two currents or of two voltages."""

    dimension: str


def wanted_ratio(dimension: str) -> str:
    """Return the clause that says what a field takes, with an example."""
    return f"a ratio of two {dimension}s is wanted, as in {quoted(EXAMPLES[dimension])}"


@lru_cache(maxsize=1 << 12)
def read_ratio(text: str, dimension: str) -> RatedRatio:
    """Return the ratio ``text`` states; a unit behind the second number alone is that of both.

    Raises FieldError where it does not read, is of another dimension, or is not above zero.
    """
    plain = normalised(text)
    parts = [part.strip() for part in plain.split("/")]
    if len(parts) != 2 and plain.count(":") == 1 and "/" not in plain:
        written = plain.replace(":", "/")
        unit = f" {_UNIT[dimension]}" if written[-1:].isdigit() else ""
        _refuse(text, f"a ratio is written with a stroke; write {quoted(written + unit, 80)}")
    if len(parts) != 2 or not all(parts):
        _refuse(text, wanted_ratio(dimension))
    first, second = parts
    if _NUMBER.fullmatch(second):
        _refuse(text, f"the unit is missing; write {quoted(f'{plain} {_UNIT[dimension]}', 80)}")
    other = _read(text, second, dimension)
    if _NUMBER.fullmatch(first):
        first = f"{first} {_unit(second)}"
    one = _read(text, first, dimension)
    for value in (one.value, other.value):
        if not isinstance(value, complex) and value > 0:
            continue
        _refuse(text, "both its numbers must be more than zero")
    return RatedRatio(float(one.value.real), float(other.value.real), text)


def _read(text: str, part: str, dimension: str) -> Quantity:
    try:
        return read_quantity(part, Dimensions(dimension))
    except QuantityError as error:
        _refuse(text, str(error))


def _unit(part: str) -> str:
    for start in range(len(part)):
        if part[start:] in UNITS:
            return part[start:]
    return ""


def _refuse(text: str, problem: str) -> NoReturn:
    raise FieldError(f"{quoted(text, 80)}: {problem}")
