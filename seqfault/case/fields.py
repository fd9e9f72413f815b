"""The fields of a record by the name they have in the file, and how each is read."""

from __future__ import annotations

import types
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cache
from typing import Annotated, Any, Literal, Union, get_args, get_origin, get_type_hints

import msgspec

from seqfault.case.quantities import Dimensions, Refers, wanted
from seqfault.case.ratios import Rated, wanted_ratio
from seqfault.case.units import EXAMPLES
from seqfault.case.values import Convert, converter, either, proper_text, wanted_list
from seqfault.case.wording import listed
from seqfault.errors import FieldError, quoted


@dataclass(frozen=True, slots=True)
class Field:
    """How one field of a record is read."""

    attribute: str
    hint: Any
    convert: Convert  # of a value, or of each entry where ``keyed``
    struct: type[msgspec.Struct] | None  # what a table becomes
    plain: bool  # whether a value that is no table may stand here
    keyed: bool
    required: bool
    dimensions: Dimensions | None  # where it is a quantity and nothing else


@cache
def fields_of(kind: type[msgspec.Struct]) -> dict[str, Field]:
    """Return the fields of a record by the name they have in the file."""
    hints = get_type_hints(kind, include_extras=True)
    fields = {}
    for info in msgspec.structs.fields(kind):
        hint = hints[info.name]
        parts = _alternatives(hint)
        struct = next((part for part in parts if _is_struct(part)), None)
        keyed = get_origin(parts[0]) is Mapping
        plain = [part for part in parts if part is not struct]
        convert: Convert = _identity
        if keyed:
            convert = converter(get_args(parts[0])[1])
        elif plain:
            convert = either(plain) if struct is None else _or_table(either(plain), struct)
        fields[info.encode_name] = Field(
            info.name,
            hint,
            convert,
            struct,
            bool(plain) and not keyed,
            keyed,
            info.required,
            _dimensions(plain),
        )
    return fields


def _dimensions(plain: list[Any]) -> Dimensions | None:
    marks = [get_args(part)[1] for part in plain if get_origin(part) is Annotated]
    return marks[0] if len(plain) == len(marks) == 1 and isinstance(marks[0], Dimensions) else None


def _alternatives(hint: Any) -> list[Any]:
    """Return the types a field may have when it is stated."""
    if get_origin(hint) not in (Union, types.UnionType):
        return [hint]
    return [part for part in get_args(hint) if part is not types.NoneType]


def _is_struct(hint: Any) -> bool:
    return isinstance(hint, type) and issubclass(hint, msgspec.Struct)


def needed(fields: Mapping[str, Field]) -> str:
    """Return the names of the fields that must be stated, as a message lists them."""
    return listed((key for key, field in fields.items() if field.required), "and") or "fields"


def wanted_by(hint: Any) -> str:
    """Return the clause that says what a missing field takes."""
    parts = _alternatives(hint)
    if parts[1:]:
        table = f", or {_table_of(parts[1])}" if _is_struct(parts[1]) else ""
        return wanted_by(parts[0]) + table
    hint = parts[0]
    if get_origin(hint) is Literal:
        return f"{listed(map(quoted, get_args(hint)))} is wanted"
    if get_origin(hint) is tuple:
        return wanted_list(hint)
    if get_origin(hint) is Mapping:
        mark = get_args(get_args(hint)[1])[1]
        example = EXAMPLES[mark.names[0]][mark.complex]
        return f"a table keyed by name is wanted, as in {{ A = {quoted(example)} }}"
    if get_origin(hint) is Annotated:
        mark = get_args(hint)[1]
        if isinstance(mark, Dimensions):
            return wanted(mark)
        if isinstance(mark, Rated):
            return wanted_ratio(mark.dimension)
        if isinstance(mark, Refers):
            return f"a name of [{mark.words[0]}] is wanted"
    if _is_struct(hint):
        return f"a table is wanted, with {needed(fields_of(hint))}"
    if hint is bool:
        return "true or false is wanted"
    return "a number is wanted" if hint in (int, float) else "a text in quotes is wanted"


def _table_of(struct: type[msgspec.Struct]) -> str:
    return f"a table with {needed(fields_of(struct))}"


def _identity(value: object) -> object:
    return value


def _or_table(convert: Convert, struct: type[msgspec.Struct]) -> Convert:
    """Return ``convert``, whose messages also name the table that may stand there."""

    def read(value: object) -> object:
        try:
            return convert(value)
        except FieldError as error:
            if "wanted" not in str(error):
                raise
            raise FieldError(f"{error}, or {_table_of(struct)}") from None

    return read


def references(
    kind: type[msgspec.Struct], raw: object, path: str = ""
) -> Iterator[tuple[str, Refers, str]]:
    """Yield field, kind and name of every reference that a raw record, sound or not, makes."""
    if not isinstance(raw, Mapping):
        return
    for key, field in fields_of(kind).items():
        value = raw.get(key)
        if field.struct is not None:
            yield from references(field.struct, value, f"{path}{key}.")
        mark = _reference(_alternatives(field.hint)[0])
        if mark is None:
            continue
        for name in value if isinstance(value, (list, tuple)) else (value,):
            if isinstance(name, str) and _proper(name):
                yield path + key, mark, name


def _reference(hint: Any) -> Refers | None:
    if get_origin(hint) is tuple:
        hint = get_args(hint)[0]
    mark = get_args(hint)[1] if get_origin(hint) is Annotated else None
    return mark if isinstance(mark, Refers) else None


def _proper(text: str) -> bool:
    try:
        proper_text(text)
    except FieldError:
        return False
    return True
