"""One raw table of the file to one record, field by field, as the annotations of the record say."""

from __future__ import annotations

import math
import types
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from typing import Annotated, Any, Literal, TypeVar, Union, get_args, get_origin, get_type_hints

import msgspec

from seqfault.case.quantities import (
    Dimensions,
    Quantity,
    Refers,
    missing_unit,
    read_quantity,
    wanted,
)
from seqfault.case.synonyms import field_for, is_later_field, unknown_field
from seqfault.case.wording import listed, quoted, shown
from seqfault.errors import FieldError

Complain = Callable[[str, str], None]  # field, problem
Convert = Callable[[object], object]
AnyStruct = TypeVar("AnyStruct", bound=msgspec.Struct)

TOP_LEVEL = ("title", "frequency", "base_power")
STRAY = "this stands below a table header and so became part of that table; move it above the first [table]"


@dataclass(frozen=True, slots=True)
class Field:
    """How one field of a record is read."""

    attribute: str
    hint: Any
    convert: Convert
    struct: type[msgspec.Struct] | None
    required: bool


@cache
def fields_of(kind: type[msgspec.Struct]) -> dict[str, Field]:
    """Return the fields of a record by the name they have in the file."""
    hints = get_type_hints(kind, include_extras=True)
    fields = {}
    for info in msgspec.structs.fields(kind):
        hint = hints[info.name]
        struct = hint if isinstance(hint, type) and issubclass(hint, msgspec.Struct) else None
        convert = _converter(hint) if struct is None else _identity
        fields[info.encode_name] = Field(info.name, hint, convert, struct, info.required)
    return fields


def convert_record(
    kind: type[AnyStruct],
    raw: object,
    complain: Complain,
    table: str = "",
    name: str = "",
    path: str = "",
) -> AnyStruct | None:
    """Return the record that ``raw`` states, or None after complaining about each of its faults.

    ``path`` leads from the record to a table inside it, ``"hv."``.
    """
    fields = fields_of(kind)
    if not isinstance(raw, Mapping):
        complain(path.rstrip("."), f"{shown(raw)}: a table is wanted, with {_needed(fields)}")
        return None
    values: dict[str, object] = {}
    sound = True
    forgiven: set[str] = set()
    for key, value in raw.items():
        field = fields.get(key)
        if value is None:
            continue  # null in JSON: not stated
        if field is None:
            sound, key = False, str(key)
            meant = field_for(key, fields)
            if path == "" and key in TOP_LEVEL:
                complain(key, STRAY)
                continue
            if path == "" and _split_at_dot(value, table, meant, key):
                complain("", _dotted(table, f"{name}.{key}", value))
                return None
            forgiven.add(meant or "")
            complain(path.rstrip("."), unknown_field(table, key, meant, fields))
        elif field.struct is not None:
            nested = convert_record(field.struct, value, complain, table, name, f"{path}{key}.")
            sound = sound and nested is not None
            values[field.attribute] = nested
        else:
            try:
                values[field.attribute] = field.convert(value)
            except FieldError as error:
                sound = False
                values[field.attribute] = None
                complain(path + key, str(error))
    for key, field in fields.items():
        if field.required and field.attribute not in values:
            sound = False
            if key not in forgiven:
                complain(path + key, f"this is missing; {_wanted(field.hint)}")
    return kind(**values) if sound else None


def _split_at_dot(value: object, table: str, meant: str | None, key: str) -> bool:
    """Tell whether a field is there only because TOML parts a bare name at its dots."""
    if meant is not None or is_later_field(table, key):
        return False
    return isinstance(value, Mapping) or (table == "buses" and isinstance(value, str))


def _dotted(table: str, name: str, value: object) -> str:
    entry = f"[{table}.{quoted(name)}]"
    if not isinstance(value, Mapping):
        entry = f"{quoted(name)} = {shown(value)}"
    return f"a name with a dot in it needs quotes; write {entry}"


def _needed(fields: Mapping[str, Field]) -> str:
    return listed((key for key, field in fields.items() if field.required), "and") or "fields"


def _wanted(hint: Any) -> str:
    """Return the clause that says what a missing field takes."""
    if get_origin(hint) is Annotated:
        mark = get_args(hint)[1]
        if isinstance(mark, Dimensions):
            return wanted(mark)
        if isinstance(mark, Refers):
            return f"a name of [{mark.words[0]}] is wanted"
    if isinstance(hint, type) and issubclass(hint, msgspec.Struct):
        return f"a table is wanted, with {_needed(fields_of(hint))}"
    return "a number is wanted" if hint in (int, float) else "a text in quotes is wanted"


def _converter(hint: Any) -> Convert:
    """Return the function that reads a value for a field of this type."""
    origin, arguments = get_origin(hint), get_args(hint)
    if origin is Annotated:
        mark = arguments[1]
        return _quantity(mark) if isinstance(mark, Dimensions) else _text
    if origin in (Union, types.UnionType):
        return _either([part for part in arguments if part is not types.NoneType])
    if origin is Literal:
        return _choice(arguments)
    if origin is tuple:
        return _list(_converter(arguments[0]))
    simple: dict[Any, Convert] = {str: _text, bool: _truth, int: _whole, float: read_number}
    return simple[hint]


def _either(parts: list[Any]) -> Convert:
    if len(parts) == 1:
        return _converter(parts[0])
    words = next((get_args(part) for part in parts if get_origin(part) is Literal), ())
    quantity = next(_converter(part) for part in parts if get_origin(part) is Annotated)

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


def _identity(value: object) -> object:
    return value


def _quantity(dimensions: Dimensions) -> Convert:
    def convert(value: object) -> Quantity:
        if isinstance(value, str):
            return read_quantity(value, dimensions)
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            raise FieldError(f"{shown(value)}: {missing_unit(shown(value), dimensions.names)}")
        raise FieldError(f"{shown(value)}: {wanted(dimensions)}")

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
        known = listed(map(quoted, words))
        only = f"{known} is wanted" if words[1:] else f"this version reads only {known}"
        raise FieldError(f"{shown(value)}: {only}")

    return convert


def _list(item: Convert) -> Convert:
    def convert(value: object) -> tuple[object, ...]:
        if not isinstance(value, (list, tuple)):
            raise FieldError(f'{shown(value)}: a list is wanted, as in ["A"]')
        return tuple(map(item, value))

    return convert
