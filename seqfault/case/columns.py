"""A whole table of the file to its records, column by column, where nothing is wrong with it.

Records that state the same fields are read together, and equal texts once. Nothing is complained
of here: a table with any fault in it is left to ``conversion``, which finds and words them all.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from functools import cache
from operator import itemgetter
from typing import Any, TypeVar

import msgspec

from seqfault.case.fields import Field, fields_of
from seqfault.case.quantities import read_quantities
from seqfault.errors import FieldError

AnyStruct = TypeVar("AnyStruct", bound=msgspec.Struct)


def convert_table(kind: type[AnyStruct], raw: Mapping[str, Any]) -> dict[str, AnyStruct] | None:
    """Return the records of a table by name, in its order; None where any of them has a fault."""
    try:
        try:
            return _by_name(kind, raw)
        except _NullError:
            return _by_name(kind, _stated(raw))
    except (FieldError, RecursionError, _UnsoundError):
        return None


class _UnsoundError(Exception):
    """Something in the table is for the slow way to explain."""


class _NullError(Exception):
    """A field is null, which JSON may write for what is not stated."""


def _stated(raw: Mapping[str, Any]) -> dict[str, Any]:
    return {k: _stated(v) if isinstance(v, dict) else v for k, v in raw.items() if v is not None}


def _by_name(kind: type[AnyStruct], raw: Mapping[str, Any]) -> dict[str, AnyStruct]:
    return dict(zip(raw, _structs(kind, list(raw.values())), strict=True))


def _structs(kind: type[AnyStruct], raws: list[Any]) -> Iterable[AnyStruct]:
    """Return one record for each raw table."""
    if set(map(type, raws)) - {dict}:
        raise _UnsoundError
    alike: dict[tuple[str, ...], list[int]] = {}
    for at, raw in enumerate(raws):
        alike.setdefault(tuple(raw), []).append(at)
    if len(alike) == 1:
        return _of_one_form(kind, next(iter(alike)), raws)
    made: list[Any] = [None] * len(raws)
    for keys, places in alike.items():
        structs = _of_one_form(kind, keys, [raws[at] for at in places])
        for at, struct in zip(places, structs, strict=True):
            made[at] = struct
    return made


def _of_one_form(kind: type[AnyStruct], keys: tuple[str, ...], raws: list[Any]) -> list[AnyStruct]:
    """Return the records of raw tables that all have these keys, in this order."""
    fields = fields_of(kind)
    if not fields.keys() >= set(keys) or any(f.required and k not in keys for k, f in fields.items()):
        raise _UnsoundError
    if not keys:
        return [kind()] * len(raws)
    make = _maker(kind, tuple(fields[key].attribute for key in keys))
    return list(map(make, *[_column(fields[key], list(map(itemgetter(key), raws))) for key in keys]))


@cache
def _maker(kind: type[AnyStruct], attributes: tuple[str, ...]) -> Callable[..., AnyStruct]:
    """Return ``kind`` with these attributes by position, so that ``map`` can call it."""
    passed = ", ".join(f"{attribute}={attribute}" for attribute in attributes)
    made: Callable[..., AnyStruct] = eval(f"lambda {', '.join(attributes)}: _({passed})", {"_": kind})
    return made


def _column(field: Field, column: list[Any]) -> Iterable[Any]:
    """Return the values of one field of all records."""
    types = set(map(type, column))
    if type(None) in types:
        raise _NullError
    if field.struct is not None and (dict in types or not field.plain):
        return _structs(field.struct, column)
    if field.keyed:
        return [_keyed(field, entries) for entries in column]
    if types == {str} and field.dimensions is not None:
        return map(read_quantities(column, field.dimensions).__getitem__, column)
    if types == {str}:  # not of other types: 1, 1.0 and true are equal
        known = {text: field.convert(text) for text in dict.fromkeys(column)}
        return map(known.__getitem__, column)
    return map(field.convert, column)


def _keyed(field: Field, entries: Any) -> dict[str, object]:
    if not isinstance(entries, dict):
        raise _UnsoundError
    if None in entries.values():
        raise _NullError
    return {key: field.convert(entry) for key, entry in entries.items()}
