"""One raw table of the file to one record, field by field, as the annotations of the record say."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TypeVar

import msgspec

from seqfault.case.fields import Field, fields_of, needed, wanted_by
from seqfault.case.synonyms import field_for, unknown_field
from seqfault.case.wording import keyed, shown
from seqfault.errors import FieldError, quoted

Complain = Callable[[str, str], None]  # field, problem
AnyStruct = TypeVar("AnyStruct", bound=msgspec.Struct)

TOP_LEVEL = ("title", "frequency", "base_power")
STRAY = "this stands below a table header and so became part of that table; move it above the first [table]"


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
        complain(path.rstrip("."), f"{shown(raw)}: a table is wanted, with {needed(fields)}")
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
            if path == "" and _split_at_dot(value, table, meant):
                complain("", _dotted(table, f"{name}.{key}", value))
                return None
            forgiven.add(meant or "")
            complain(path.rstrip("."), unknown_field(key, meant, fields))
        elif field.struct is not None and (isinstance(value, Mapping) or not field.plain):
            nested = convert_record(field.struct, value, complain, table, name, f"{path}{key}.")
            sound = sound and nested is not None
            values[field.attribute] = nested
        elif field.keyed:
            entries = _entries(field, value, complain, path + key)
            sound = sound and entries is not None
            values[field.attribute] = entries
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
                complain(path + key, f"this is missing; {wanted_by(field.hint)}")
    return kind(**values) if sound else None


def _entries(field: Field, value: object, complain: Complain, path: str) -> dict[str, object] | None:
    """Return the converted entries of a field keyed by name, None after complaints about them."""
    if not isinstance(value, Mapping):
        complain(path, f"{shown(value)}: {wanted_by(field.hint)}")
        return None
    entries: dict[str, object] = {}
    sound = True
    for key, entry in value.items():
        try:
            if entry is not None:
                entries[str(key)] = field.convert(entry)
        except FieldError as error:
            sound = False
            complain(f"{path}.{keyed(str(key))}", str(error))
    return entries if sound else None


def _split_at_dot(value: object, table: str, meant: str | None) -> bool:
    """Tell whether a field is there only because TOML parts a bare name at its dots."""
    if meant is not None:
        return False
    return isinstance(value, Mapping) or (table == "buses" and isinstance(value, str))


def _dotted(table: str, name: str, value: object) -> str:
    entry = f"[{table}.{quoted(name)}]"
    if not isinstance(value, Mapping):
        entry = f"{quoted(name)} = {shown(value)}"
    return f"a name with a dot in it needs quotes; write {entry}"
