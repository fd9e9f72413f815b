"""A file of steps, ``[[steps]]`` in TOML: the faults and opened poles that stand at each moment."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from typing import Any

import msgspec

from seqfault.case.quantities import Dimensions, read_quantity
from seqfault.case.wording import Spelling, shown
from seqfault.errors import CaseError, QuantityError, quoted

_OHM = Dimensions("impedance", complex=True)
_FAULT = ("place", "kind", "phases", "zf", "zg", "fallen")
_OPEN = ("place", "phases")
_STEP = ("title", "faults", "open")


class StatedFault(msgspec.Struct, frozen=True):
    """A fault as a step states it; ``zf`` and ``zg`` in ohm, ``phases`` None where not stated."""

    place: str
    kind: str = "line-ground"
    phases: str | None = None
    zf: complex = 0j
    zg: complex = 0j
    fallen: str = ""


class Step(msgspec.Struct, frozen=True):
    """What stands at one moment: all of it, not what is new."""

    title: str
    faults: tuple[StatedFault, ...]


def read_steps(path: str) -> tuple[Step, ...]:
    """The steps in a file.

    Raises ``CaseError`` with everything that is wrong with it.
    """
    try:
        with open(path, "rb") as file:
            tree = tomllib.load(file)
    except OSError as error:
        raise CaseError([f"the file cannot be read: {error.strerror}"], path) from None
    except UnicodeDecodeError:
        raise CaseError(["the file is not UTF-8 text"], path) from None
    except tomllib.TOMLDecodeError as error:
        raise CaseError([f"this is not TOML: {error}"], path) from None
    return steps_from_tree(tree, path)


def steps_from_tree(tree: Mapping[str, Any], source: str = "steps") -> tuple[Step, ...]:
    """The steps of a tree as ``read_steps`` reads it from a file. Raises ``CaseError``."""
    complaints: list[str] = []
    for key in tree:
        if key != "steps":
            complaints.append(f"there is no key {quoted(key)}; write [[steps]]")
    rows = tree.get("steps")
    if not isinstance(rows, list) or not rows:
        complaints.append('there is no step; write [[steps]] and below it faults = [{ place = "main" }]')
        rows = []
    steps = [_step(row, number, complaints) for number, row in enumerate(rows, 1)]
    if complaints:
        raise CaseError(complaints, source)
    return tuple(steps)


def _step(row: Any, number: int, complaints: list[str]) -> Step:
    where = f"step {number}"
    if not isinstance(row, Mapping):
        complaints.append(f"{where}: {shown(row)}: a table is wanted, [[steps]]")
        return Step("", ())
    _known(row, _STEP, where, complaints)
    title = row.get("title", "")
    if not isinstance(title, str):
        complaints.append(f"{where}, title: {shown(title)}: a text in quotes is wanted")
        title = ""
    faults = []
    for key in ("faults", "open"):
        rows = row.get(key, [])
        if not isinstance(rows, list):
            complaints.append(f"{where}, {key}: {shown(rows)}: a list is wanted")
            continue
        for k, item in enumerate(rows, 1):
            here = f"{where}, {key} {k}"
            read = _opened if key == "open" else _fault
            faults.append(read(item, here, complaints))
    if not faults and not complaints:
        complaints.append(f"{where}: nothing stands in it; give faults or open")
    return Step(title, tuple(faults))


def _known(row: Mapping[str, Any], known: tuple[str, ...], where: str, complaints: list[str]) -> None:
    for key in row:
        if key not in known:
            hint = Spelling(known).hint(key)
            complaints.append(f"{where}: there is no field {quoted(key)}{hint}")


def _text(row: Mapping[str, Any], key: str, where: str, complaints: list[str], default: Any = "") -> Any:
    value = row.get(key, default)
    if value is not default and not isinstance(value, str):
        complaints.append(f"{where}, {key}: {shown(value)}: a text in quotes is wanted")
        return default
    return value


def _fault(item: Any, where: str, complaints: list[str]) -> StatedFault:
    if isinstance(item, str):
        item = {"place": item}
    if not isinstance(item, Mapping):
        complaints.append(f'{where}: {shown(item)}: a table is wanted, as in {{ place = "main" }}')
        return StatedFault("")
    _known(item, _FAULT, where, complaints)
    if "place" not in item:
        complaints.append(f"{where}: its place is missing")
    ohms = {}
    for key in ("zf", "zg"):
        value = item.get(key)
        if value is None:
            continue
        try:
            if not isinstance(value, str):
                raise QuantityError(f'{shown(value)}: a text with its unit is wanted, as in "0.5 ohm"')
            ohms[key] = complex(read_quantity(value, _OHM).value)
        except QuantityError as error:
            complaints.append(f"{where}, {key}: {error}")
    return StatedFault(
        _text(item, "place", where, complaints),
        _text(item, "kind", where, complaints, "line-ground"),
        _text(item, "phases", where, complaints, None),
        ohms.get("zf", 0j),
        ohms.get("zg", 0j),
        _text(item, "fallen", where, complaints),
    )


def _opened(item: Any, where: str, complaints: list[str]) -> StatedFault:
    if isinstance(item, str):
        item = {"place": item}
    if not isinstance(item, Mapping) or not isinstance(item.get("place"), str):
        complaints.append(
            f'{where}: {shown(item)}: a place is wanted, "F1@main", or'
            ' { place = "F1@main", phases = "a" }'
        )
        return StatedFault("")
    _known(item, _OPEN, where, complaints)
    phases = _text(item, "phases", where, complaints, "abc") or "abc"
    kind = {1: "open-one", 2: "open-two"}.get(len(phases), "open-three")
    return StatedFault(item["place"], kind, phases)
