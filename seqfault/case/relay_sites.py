"""Where a relay can stand: the terminals of elements, and star points by their names."""

from __future__ import annotations

import msgspec

from seqfault.case.places import TABLES
from seqfault.case.records import Case, Record, Transformer
from seqfault.case.vector_group import parse_vector_group
from seqfault.case.wording import Spelling
from seqfault.errors import FieldError

ELEMENTS = (*TABLES, "converters", "ties")


class StarUser(msgspec.Struct, frozen=True):
    """A winding that ends in a star point: its element, the side (``neutral`` of a machine), its bus.

    ``neutral`` is what joins the star point to earth: ``solid``, ``isolated`` or a neutral's name.
    """

    element: str
    side: str
    bus: str
    neutral: str


def terminals(record: Record) -> tuple[str, ...]:
    """Return the buses of an element."""
    if isinstance(record, Transformer):
        sides = (record.hv, record.lv) if record.tv is None else (record.hv, record.lv, record.tv)
        return tuple(side.bus for side in sides)
    single = getattr(record, "bus", None)
    return (single,) if single is not None else (record.from_, record.to)  # type: ignore[attr-defined]  # a branch


def elements(case: Case) -> dict[str, tuple[str, Record]]:
    """Return table and record of every element, by name."""
    return {name: (table, record) for table in ELEMENTS for name, record in getattr(case, table).items()}


def star_point_users(case: Case) -> dict[str, tuple[StarUser, ...]]:
    """Return the windings of every star point that is brought out, by the name it has in answers."""
    users: dict[str, tuple[StarUser, ...]] = {}

    def join(element: str, side: str, bus: str, neutral: str) -> None:
        name = f"{element}.{side}" if neutral in ("solid", "isolated") else neutral
        users[name] = (*users.get(name, ()), StarUser(element, side, bus, neutral))

    for name, unit in case.transformers.items():
        try:
            group = parse_vector_group(unit.vector_group)
        except FieldError:
            continue  # told already
        for side in ("hv", "lv", "tv"):
            winding = getattr(unit, side)
            common = side == "lv" and group.lv == "auto"
            if winding is not None and getattr(group, f"{side}_star_point") and not common:
                join(name, side, winding.bus, winding.neutral or "solid")
    for name, machine in case.generators.items():
        join(name, "neutral", machine.bus, machine.neutral or "isolated")
    for name, earthing in case.earthing_transformers.items():
        join(name, "neutral", earthing.bus, earthing.neutral or "solid")
    return users


class Places:
    """All of them, found once for all relays.

    ``stars`` are star points by the name they have in answers, ``own`` their names by winding, as in
    ``T1.lv``.
    """

    def __init__(self, case: Case) -> None:
        self.elements = elements(case)
        self.stars = star_point_users(case)
        self.own = {
            f"{user.element}.{user.side}": name for name, users in self.stars.items() for user in users
        }
        self.spelling = Spelling([*self.elements, *self.stars])
