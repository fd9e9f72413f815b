"""One value of the file to what a field of its type holds."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Annotated, Any, Literal, get_args, get_origin

from seqfault.case.quantities import (
    LARGEST,
    Dimensions,
    Quantity,
    missing_unit,
    read_quantity,
    wanted,
)
from seqfault.case.ratios import Rated, RatedRatio, read_ratio, wanted_ratio
from seqfault.case.synonyms import words_for
from seqfault.case.units import EXAMPLES
from seqfault.case.wording import listed, shown
from seqfault.errors import FieldError, quoted

Convert = Callable[[object], object]
_FEW_WORDS = 5  # so many are named in full


def converter(hint: Any) -> Convert:
    """Return the function that reads a value for a field of this type."""
    origin, arguments = get_origin(hint), get_args(hint)
    if origin is Annotated:
        mark = arguments[1]
        if isinstance(mark, Dimensions):
            return _quantity(mark)
        return _ratio(mark.dimension) if isinstance(mark, Rated) else _text
    if origin is Literal:
        return _choice(arguments)
    if origin is tuple:
        return _list(hint)
    simple: dict[Any, Convert] = {str: _text, bool: _truth, int: _whole, float: read_number}
    return simple[hint]


def either(parts: list[Any]) -> Convert:
    """Return the function that reads a value of any of these types."""
    if len(parts) == 1:
        return converter(parts[0])
    words = next((get_args(part) for part in parts if get_origin(part) is Literal), ())
    quantity = next(converter(part) for part in parts if get_origin(part) is Annotated)

    def convert(value: object) -> object:
        if value in words:
            return value
        if float in parts and not isinstance(value, str):
            return read_number(value)
        try:
            return quantity(value)
        except FieldError as error:
            if words:
                raise FieldError(f"{error}, or {listed(map(quoted, words))}") from None
            raise

    return convert


def _quantity(dimensions: Dimensions) -> Convert:
    def convert(value: object) -> Quantity:
        if isinstance(value, str):
            return read_quantity(value, dimensions)
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            raise FieldError(f"{shown(value)}: {missing_unit(shown(value), dimensions.names)}")
        raise FieldError(f"{shown(value)}: {wanted(dimensions)}")

    return convert


def _ratio(dimension: str) -> Convert:
    def convert(value: object) -> RatedRatio:
        if isinstance(value, str):
            return read_ratio(value, dimension)
        raise FieldError(f"{shown(value)}: {wanted_ratio(dimension)}")

    return convert


def read_number(value: object) -> float:
    """Return a bare number of the file. Raises FieldError when it is none, or not finite."""
    if isinstance(value, str):
        try:
            bare = float(value)
        except ValueError:
            bare = math.nan
        repair = f"; write {value.strip()} without quotes" if math.isfinite(bare) else ""
        raise FieldError(f"{shown(value)}: a bare number is wanted{repair or ', as in 10'}")
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise FieldError(f"{shown(value)}: a bare number is wanted, as in 10")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise FieldError(f"{shown(value)}: a finite number is wanted")
    if abs(number) > LARGEST or 0 < abs(number) < 1 / LARGEST:
        raise FieldError(f"{shown(value)}: the number is too {'large' if abs(number) > 1 else 'small'}")
    return number


def _whole(value: object) -> int:
    number = read_number(value)
    if number != int(number):
        raise FieldError(f"{shown(value)}: a whole number is wanted")
    return int(number)


def _truth(value: object) -> bool:
    if not isinstance(value, bool):
        raise FieldError(f"{shown(value)}: true or false is wanted, without quotes")
    return value


def _text(value: object) -> str:
    if not isinstance(value, str):
        raise FieldError(f"{shown(value)}: a text in quotes is wanted")
    return proper_text(value)


def proper_text(value: str) -> str:
    """Return ``value``. Raises FieldError when it holds half a character, which no output takes."""
    try:
        value.encode()
    except UnicodeEncodeError:
        raise FieldError(f"{shown(value)}: the text holds half a character") from None
    return value


def _choice(words: tuple[str, ...]) -> Convert:
    def convert(value: object) -> object:
        if isinstance(value, str) and value in words:
            return value
        if isinstance(value, str) and len(words) > _FEW_WORDS:
            meant = words_for(value, words)
            if meant:
                raise FieldError(
                    f"{shown(value)} is not one of its words; write {listed(map(quoted, meant))}"
                )
        known = listed(map(quoted, words))
        raise FieldError(f"{shown(value)}: {known} is wanted")

    return convert


def wanted_list(hint: Any) -> str:
    """Return the clause that says what a list of this type takes."""
    item = get_args(hint)[0]
    mark = get_args(item)[1] if get_origin(item) is Annotated else None
    example = EXAMPLES[mark.names[0]][mark.complex] if isinstance(mark, Dimensions) else "A"
    return f"a list is wanted, as in [{quoted(example)}]"


def _list(hint: Any) -> Convert:
    item = converter(get_args(hint)[0])

    def convert(value: object) -> tuple[object, ...]:
        if not isinstance(value, (list, tuple)):
            raise FieldError(f"{shown(value)}: {wanted_list(hint)}")
        return tuple(map(item, value))

    return convert
