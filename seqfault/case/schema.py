"""The JSON Schema of the case file, from the annotations of the records.

It serves editors: it knows the fields, their types and the units of each dimension. The rules
across records are the reader's alone.
"""

from __future__ import annotations

import re
import types
from collections.abc import Mapping
from typing import Annotated, Any, Literal, Union, get_args, get_origin

import msgspec

from seqfault.case.fields import fields_of
from seqfault.case.findings import SINGULAR
from seqfault.case.protection import Demands
from seqfault.case.quantities import Dimensions, Refers, wanted
from seqfault.case.ratios import Rated, wanted_ratio
from seqfault.case.records import TABLES, Prefault
from seqfault.case.units import UNITS

_DRAFT = "https://json-schema.org/draft/2020-12/schema"
_SIMPLE: dict[Any, dict[str, Any]] = {
    str: {"type": "string"},
    bool: {"type": "boolean"},
    int: {"type": "integer"},
    float: {"type": "number"},
}


def case_schema() -> dict[str, Any]:
    """Return the schema of a whole case file, JSON Schema draft 2020-12."""
    top = {
        "title": {"type": "string"},
        "frequency": _quantity(Dimensions("frequency")),
        "base_power": _quantity(Dimensions("power")),
        "prefault": {"$ref": "#/$defs/prefault"},
        "demands": {"$ref": "#/$defs/demands"},
        **{table: _keyed({"$ref": f"#/$defs/{_definition(table)}"}) for table in TABLES},
    }
    names = {"type": "array", "items": {"type": "string"}}
    scenario = {
        "type": "object",
        "properties": {
            "note": {"type": "string"},
            **dict.fromkeys(("in", "out", "open", "close"), names),
            **{key: {"type": "object"} for key in ("prefault", *TABLES)},
            **{key: top[key] for key in ("title", "frequency", "base_power")},
        },
        "additionalProperties": False,
    }
    definitions = {_definition(table): _record(kind) for table, kind in TABLES.items()}
    voltage = definitions["bus"]["properties"]["voltage"]
    definitions["bus"] = {"anyOf": [voltage, definitions["bus"]]}
    return {
        "$schema": _DRAFT,
        "title": "Case file of seqfault, version 1",
        "type": "object",
        "properties": {**top, "scenarios": _keyed(scenario)},
        "required": ["frequency", "buses"],
        "additionalProperties": False,
        "$defs": {**definitions, "prefault": _record(Prefault), "demands": _record(Demands)},
    }


def _definition(table: str) -> str:
    return SINGULAR[table].replace(" ", "_")


def _keyed(entry: dict[str, Any]) -> dict[str, Any]:
    """Return the schema of a table keyed by name."""
    names = {"pattern": r"^[^@]*\S[^@]*$", "not": {"enum": ["base", "all"]}}
    return {"type": "object", "propertyNames": names, "additionalProperties": entry}


def _record(kind: type[msgspec.Struct]) -> dict[str, Any]:
    fields = fields_of(kind)
    return {
        "type": "object",
        "properties": {name: _value(field.hint) for name, field in fields.items()},
        "required": [name for name, field in fields.items() if field.required],
        "additionalProperties": False,
        "description": (kind.__doc__ or "").replace("``", "").split("\n")[0],
    }


def _value(hint: Any) -> dict[str, Any]:
    origin, arguments = get_origin(hint), get_args(hint)
    if origin is Annotated:
        mark = arguments[1]
        if isinstance(mark, Dimensions):
            return _quantity(mark)
        if isinstance(mark, Rated):
            text = wanted_ratio(mark.dimension)
            return {"type": "string", "pattern": "^[^/]+/[^/]+$", "description": text}
        return _reference(mark)
    if origin in (Union, types.UnionType):
        parts = [_value(part) for part in arguments if part is not types.NoneType]
        return parts[0] if len(parts) == 1 else {"anyOf": parts}
    if origin is Literal:
        return {"enum": list(arguments)}
    if origin is Mapping:
        names = {"description": _reference(get_args(arguments[0])[1])["description"]}
        return {"type": "object", "propertyNames": names, "additionalProperties": _value(arguments[1])}
    if origin is tuple:
        return {"type": "array", "items": _value(arguments[0])}
    if isinstance(hint, type) and issubclass(hint, msgspec.Struct):
        return _record(hint)
    return dict(_SIMPLE[hint])


def _reference(mark: Refers) -> dict[str, Any]:
    words = [f'"{word}"' for word in mark.words[1:]]
    text = ", or ".join([f"a name of [{mark.words[0]}]", *words])
    return {"type": "string", "description": text}


def _quantity(dimensions: Dimensions) -> dict[str, Any]:
    """Return the schema of a quantity: a number somewhere, then a unit of the right dimension."""
    units = [unit for unit, (dimension, _, _) in UNITS.items() if dimension in dimensions.names]
    written = "|".join(re.escape(unit) for unit in sorted(units, key=len, reverse=True))
    look_alikes = written.replace("ohm", "(?:ohm|Ω|Ω)").replace("u", "[uµμ]")
    return {
        "type": "string",
        "pattern": rf"^.*[0-9].*(?:{look_alikes})\s*(?:at .*|∠.*)?$",
        "description": wanted(dimensions),
    }
