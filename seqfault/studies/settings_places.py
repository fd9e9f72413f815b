"""Where the faults of a setting study lie: buses, terminals, points along lines, remote breakers open."""

from __future__ import annotations

from collections.abc import Iterator

import msgspec
import numpy as np

from seqfault.case.places import terminals
from seqfault.case.records import Case

POINTS = 5
"""Points along a line, both ends among them, where not told otherwise."""
_ELEMENTS = ("generators", "motors", "earthing_transformers", "series_reactors", "capacitors")


class Spot(msgspec.Struct, frozen=True):
    """A place of faults: ``owner`` the bus, element or winding it is a part of.

    ``opened`` is the line end whose breaker is open meanwhile, ``LINE@BUS``, or empty.
    """

    place: str
    owner: str
    opened: str = ""

    def __str__(self) -> str:
        return f"{self.place}, {self.opened} open" if self.opened else self.place


def spots(case: Case, points: int = POINTS) -> Iterator[Spot]:
    """The places of faults of ``case`` in its state, ``points`` of them along each line."""

    def live(*buses: str) -> bool:
        return not any(case.buses[bus].out for bus in buses)

    for name, bus in case.buses.items():
        if not bus.out:
            yield Spot(name, name)
    inner = [f"{100 * x:.6g}%" for x in np.linspace(0, 1, max(points, 2))[1:-1].tolist()]
    for name, line in case.lines.items():
        if line.out or not live(line.from_, line.to):
            continue
        places = [f"{name}@{where}" for where in (line.from_, *inner, line.to)]
        for place in places:
            yield Spot(place, name)
        for end in (line.from_, line.to):
            if end not in line.open:
                yield from (Spot(place, name, f"{name}@{end}") for place in places)
    for name, unit in case.transformers.items():
        sides = {bus: side for side, bus in reversed(list(terminals("transformers", unit)))}
        if not unit.out and live(*sides):
            yield from (Spot(f"{name}@{bus}", f"{name}.{side}") for bus, side in sides.items())
    for table in _ELEMENTS:
        for name, record in getattr(case, table).items():
            buses = [bus for _, bus in terminals(table, record)]
            if not record.out and live(*buses):
                yield from (Spot(f"{name}@{bus}", name) for bus in dict.fromkeys(buses))
