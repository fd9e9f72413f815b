"""Places along lines, terminals and breaks, made buses of a plain network by arithmetic of its own.

Nothing here comes from the package: what it does with ``LINE@37%`` and with poles that open is judged by
networks in which sections, joints and single poles are written out.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from itertools import combinations
from typing import Any

from tests.referee import Short
from tests.spots import Poles, Spot, Trouble
from tests.strategies import PlainCoupling, PlainLine, PlainNetwork, PlainUnit


@dataclass
class Placed:
    """``net`` with buses where faults stand; ``whose`` current joints and sections are in an answer.

    A joint within a line is nobody's.
    """

    net: PlainNetwork
    joints: dict[str, Poles] = field(default_factory=dict)
    bus_of: dict[Spot, tuple[str, ...]] = field(default_factory=dict)
    whose: dict[str, str | None] = field(default_factory=dict)
    spans: dict[str, list[tuple[str, float, float]]] = field(default_factory=dict)

    def shorts(self, troubles: list[Trouble]) -> list[Short]:
        """The shunt faults, and what fallen conductors are."""
        out = []
        for t in troubles:
            buses = self.bus_of[t.spot]
            if not t.opens:
                out.append(Short(buses[0], t.kind, t.phases, t.zf, t.zg))
            elif t.fallen is not None:
                kind = ("line-ground", "line-line-ground", "three-phase-ground")[len(t.phases) - 1]
                out.append(Short(buses[t.fallen], kind, t.phases, t.zf, t.zg))
        return out


def placed(net: PlainNetwork, troubles: list[Trouble]) -> Placed:
    """``net`` with a bus of its own for every spot of ``troubles``, and poles open where they open."""
    tables = {
        name: dict(getattr(net, name))
        for name in net.__dataclass_fields__
        if isinstance(getattr(net, name), dict)
    }
    made = Placed(PlainNetwork(net.frequency, **tables))
    opened = {t.spot: "".join(p for p in "abc" if p not in t.phases) for t in troubles if t.opens}
    spots = list(dict.fromkeys(t.spot for t in troubles))
    for spot in spots:
        if not spot.element:
            made.bus_of[spot] = (spot.bus,)
    elements = dict.fromkeys(s.element for s in spots if s.element)
    for element in elements:
        _split_count(made.net, element)
        for spot in spots:
            if spot.element == element and spot.fraction is None:
                _terminal(made, net, spot, opened.get(spot, "abc"))
        points = [s for s in spots if s.element == element and s.fraction is not None]
        if points:
            _line(made, net, element, sorted(points, key=lambda s: s.fraction or 0), opened)
    _couplings(made)
    return made


def _table(net: PlainNetwork, element: str) -> dict[str, Any]:
    for name in net.__dataclass_fields__:
        table = getattr(net, name)
        if isinstance(table, dict) and name not in ("buses", "neutrals") and element in table:
            return table
    raise KeyError(element)


def _split_count(net: PlainNetwork, element: str) -> None:
    table = _table(net, element)
    count = getattr(table[element], "count", 1)
    if count > 1:
        rest = "one" if count == 2 else str(count - 1)
        table[f"{element}, the other {rest}"] = replace(table[element], count=count - 1)
        table[element] = replace(table[element], count=1)


def _terminal(made: Placed, net: PlainNetwork, spot: Spot, closed: str) -> None:
    table = _table(made.net, spot.element)
    item = table[spot.element]
    own = f"{spot.element}@{spot.bus}"
    made.net.buses[own] = net.buses[spot.bus]
    opened = isinstance(item, PlainLine) and item.open_end == spot.bus
    if isinstance(item, PlainUnit):
        sides = {
            side: replace(w, bus=own if w.bus == spot.bus else w.bus) for side, w in item.sides.items()
        }
        table[spot.element] = replace(item, sides=sides)
    else:
        fields = ("bus", "bus_i", "bus_j", "hv_bus", "lv_bus")
        moved = {f: own for f in fields if getattr(item, f, None) == spot.bus}
        if opened:
            moved["open_end"] = None
        table[spot.element] = replace(item, **moved)
    if opened:
        made.bus_of[spot] = (own,)
        return
    joint = f"joint of {own}"
    made.joints[joint] = Poles(spot.bus, own, closed)
    made.whose[joint] = spot.element
    made.bus_of[spot] = (own,) if closed == "abc" else (spot.bus, own)


def _line(
    made: Placed, net: PlainNetwork, element: str, points: list[Spot], opened: dict[Spot, str]
) -> None:
    line: PlainLine = made.net.lines.pop(element)
    size = line.size()
    spans: list[tuple[str, float, float]] = []
    start, at = line.bus_i, 0.0
    for number, (end_spot, stop) in enumerate([*((p, p.fraction) for p in points), (None, 1.0)]):
        assert stop is not None
        name, end, after = f"{element}#{number}", line.bus_j, ""
        if end_spot is not None:
            whole = net.lines[element]
            after = end = f"{element}@{stop!r}pu"
            if end_spot in opened:
                end, after = f"{after}, {whole.bus_i} side", f"{after}, {whole.bus_j} side"
                made.joints[f"joint of {end}"] = Poles(end, after, opened[end_spot])
                made.whose[f"joint of {end}"] = None
            made.net.buses[end] = made.net.buses[after] = net.buses[whole.bus_i]
            made.bus_of[end_spot] = (end,) if end == after else (end, after)
        length = stop - at
        made.net.lines[name] = PlainLine(
            bus_i=start,
            bus_j=end,
            z1=line.z1 * size * length,
            z0=line.z0 * size * length,
            c1=None if line.c1 is None else line.c1 * size * length,
            c0=None if line.c0 is None else line.c0 * size * length,
            susceptance=False,
            length=None,
            count=1,
            open_end=line.open_end if line.open_end in (start, end) else None,
        )
        made.whose[name] = element
        spans.append((name, at, stop))
        start, at = after, stop
    made.spans[element] = spans


def _couplings(made: Placed) -> None:
    """Couplings of lines that were cut, by pairs of sections that lie side by side."""
    table = made.net.mutual_couplings
    for name, coupling in list(table.items()):
        if not set(coupling.lines) & set(made.spans):
            continue
        del table[name]
        for a, b in combinations(coupling.lines, 2):
            whole = coupling.ohms(a, b)
            for one, low, high in made.spans.get(a, [(a, 0.0, 1.0)]):
                for other, begin, end in made.spans.get(b, [(b, 0.0, 1.0)]):
                    if whole.imag < 0:  # they run against each other
                        begin, end = 1 - end, 1 - begin
                    shared = min(high, end) - max(low, begin)
                    if shared > 0:
                        pair = PlainCoupling((one, other), whole * shared, None, False)
                        table[f"{name} {one} {other}"] = pair
