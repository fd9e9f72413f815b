"""The case rewritten so that places along lines and at terminals are buses of their own.

A line with a point of interest becomes two sections and a bus between them. A terminal becomes a bus of
the element, joined to the bus it was at by a tie that stands for its current transformer and breaker:
closed, both are one node; broken, only the sound poles join them. Where a record stands for several
circuits or units, one of them is taken out first: places concern one.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import msgspec
from msgspec.structs import replace

from seqfault.case.coupled_sections import Span, split_couplings
from seqfault.case.places import Place, terminals
from seqfault.case.quantities import Quantity
from seqfault.case.records import Bus, Case, Line, Record, Tie, Transformer
from seqfault.errors import RequestError, quoted


class Label(msgspec.Struct, frozen=True):
    """How answers name a terminal of a rewritten record: element, kind of record, side."""

    element: str
    kind: str
    side: str


class Arranged(msgspec.Struct, frozen=True):
    """A rewritten case.

    ``case`` with every break closed; ``bus_of`` the bus that stands for each place by its name;
    ``breaks`` by place name the tie that is broken there, and its two buses; ``labels`` how answers name
    terminals, by record and side (None: not shown), where that is not what the model says.
    """

    case: Case
    bus_of: Mapping[str, str]
    breaks: Mapping[str, tuple[str, str, str]]
    labels: Mapping[tuple[str, str], Label | None]

    def broken(self) -> tuple[Case, tuple[tuple[str, str], ...]]:
        """The case with the breaks open, and the pairs of buses that only sound poles join."""
        ties = dict(self.case.ties)
        for tie, _, _ in self.breaks.values():
            ties[tie] = replace(ties[tie], closed=False)
        return replace(self.case, ties=ties), tuple((p, q) for _, p, q in self.breaks.values())


class _Tables:
    """The tables of a case while they are rewritten."""

    def __init__(self, case: Case) -> None:
        self.case = case
        self._changed: dict[str, dict[str, Any]] = {}
        self.labels: dict[tuple[str, str], Label | None] = {}
        self.bus_of: dict[str, str] = {}
        self.breaks: dict[str, tuple[str, str, str]] = {}
        self.spans: dict[str, list[Span]] = {}

    def __getitem__(self, table: str) -> dict[str, Any]:
        if table not in self._changed:
            self._changed[table] = dict(getattr(self.case, table))
        return self._changed[table]

    def insert(self, table: str, after: str, records: Mapping[str, Record]) -> None:
        """Put ``records`` behind ``after``, which gives way where it is not among them."""
        out: dict[str, Any] = {}
        for name, record in self[table].items():
            if name != after:
                out[name] = record
            else:
                out |= records if name in records else {name: record, **records}
        self._changed[table] = out

    def bus(self, name: str, like: str) -> str:
        """A bus called ``name``, or nearly, of the voltage of bus ``like``."""
        while name in self["buses"]:
            name += "'"
        self["buses"][name] = Bus(voltage=self["buses"][like].voltage)
        return name

    def finished(self) -> Arranged:
        """The case made of them."""
        if self.spans:
            own = self.case
            self._changed["mutual_couplings"] = split_couplings(own.mutual_couplings, own.lines, self.spans)
        return Arranged(replace(self.case, **self._changed), self.bus_of, self.breaks, self.labels)


def arranged(case: Case, places: Iterable[Place], breaks: Iterable[Place]) -> Arranged:
    """``case`` with a bus for each of ``places`` and a break at each of ``breaks``.

    Places that are buses stay as they are. Raises ``RequestError`` for a break that cannot be.
    """
    t = _Tables(case)
    broken = {(p.element, p.side, p.fraction): p for p in breaks}
    for place in broken.values():
        if not place.element:
            raise RequestError(
                f"place {quoted(place.text)}: a pole opens at a terminal or along a line; write"
                f" ELEMENT@{place.bus} or LINE@50%"
            )
    wanted = {(p.element, p.side, p.fraction): p for p in places if p.element} | broken
    for element in dict.fromkeys(p.element for p in wanted.values()):
        own = [p for p in wanted.values() if p.element == element]
        _one_of(t, own[0].table, element)
        for place in own:
            if place.fraction is None:
                _terminal(t, place, (element, place.side, None) in broken)
        points = sorted((p for p in own if p.fraction is not None), key=lambda p: p.fraction or 0)
        if points:
            _sections(t, element, points, broken)
    return t.finished()


def _one_of(t: _Tables, table: str, element: str) -> None:
    """Take one circuit or unit out of a record that stands for several."""
    record = t[table][element]
    count = getattr(record, "count", 1)
    if count == 1:
        return
    rest = f"{element}, the other {count - 1 if count > 2 else 'one'}"
    t.insert(table, element, {rest: replace(record, count=count - 1)})
    t[table][element] = replace(record, count=1)


def _terminal(t: _Tables, place: Place, broken: bool) -> None:
    """Give the terminal a bus of its own."""
    element, side, bus = place.element, place.side, place.bus
    record = t[place.table][element]
    own = t.bus(place.name, bus)
    t.bus_of[place.name] = own
    opened = isinstance(record, Line) and bus in record.open
    t[place.table][element] = _moved(record, side, own)
    kind = _KINDS[place.table]
    others = [other for at, other in terminals(place.table, record) if at != side]
    beyond = "from " + " and ".join(others) if others else "from itself"
    t.labels[element, side] = Label(element, kind, beyond)
    if opened:
        if broken:
            raise RequestError(
                f"place {quoted(place.text)}: the line is open at this end already; no pole can open there"
            )
        return
    tie = f"{place.name} joint"
    t["ties"][tie] = Tie(from_=bus, to=own, closed=True)
    t.labels[tie, "from"] = Label(element, kind, side)
    t.labels[tie, "to"] = Label(element, kind, f"from {bus}")
    if broken:
        t.breaks[place.name] = (tie, bus, own)


_KINDS = {
    "infeeds": "infeed",
    "generators": "generator",
    "motors": "motor",
    "lines": "line",
    "transformers": "transformer",
    "earthing_transformers": "earthing transformer",
    "series_reactors": "series reactor",
    "capacitors": "capacitor",
    "loads": "load",
}


def _moved(record: Record, side: str, bus: str) -> Record:
    """The record with one terminal at another bus."""
    if isinstance(record, Transformer):
        return replace(record, **{side: replace(getattr(record, side), bus=bus)})
    if isinstance(record, Line):
        old = record.from_ if side == "from" else record.to
        record = replace(record, open=tuple(b for b in record.open if b != old))
    field = {"from": "from_", "to": "to"}.get(side, "bus")
    return replace(record, **{field: bus})


def _sections(
    t: _Tables, element: str, points: list[Place], broken: Mapping[tuple[str, str, float | None], Place]
) -> None:
    """Cut the line ``element`` at ``points``, sorted along it."""
    line: Line = t["lines"][element]
    whole: Line = t.case.lines[element]
    spans: list[Span] = []
    records: dict[str, Record] = {}
    start, at = line.from_, 0.0
    labels = {end: t.labels.get((element, end), Label(element, "line", end)) for end in ("from", "to")}
    toward = (f"from {whole.from_}", f"from {whole.to}")

    def section(end: str, to: float) -> None:
        name = element if not records else f"{element} from {100 * at:.6g} %"
        while name != element and name in t["lines"]:
            name += "'"
        length = to - at
        records[name] = replace(
            line,
            from_=start,
            to=end,
            length=None,
            open=tuple(b for b in line.open if b in (start, end)),
            **{f: _part(getattr(line, f), line, length) for f in ("z1", "z0", "c1", "c0", "b1", "b0")},
        )
        spans.append(Span(name, at, to))
        # Seen from a point between, a section feeds from the end of the line that lies beyond it.
        t.labels[name, "from"] = labels["from"] if at == 0 else Label(element, "line", toward[1])
        t.labels[name, "to"] = labels["to"] if to == 1 else Label(element, "line", toward[0])

    for place in points:
        assert place.fraction is not None
        is_broken = (element, place.side, place.fraction) in broken
        near = t.bus(f"{place.name}, {whole.from_} side" if is_broken else place.name, whole.from_)
        far = near
        if is_broken:
            far = t.bus(f"{place.name}, {whole.to} side", whole.to)
            tie = f"{place.name} joint"
            t["ties"][tie] = Tie(from_=near, to=far, closed=True)
            t.labels[tie, "from"] = t.labels[tie, "to"] = None
            t.breaks[place.name] = (tie, near, far)
        section(near, place.fraction)
        t.bus_of[place.name] = near
        start, at = far, place.fraction
    section(line.to, 1.0)
    t.insert("lines", element, records)
    t.spans[element] = spans


def _part(quantity: Quantity | None, line: Line, share: float) -> Quantity | None:
    """A share of the whole line's quantity, no longer per length."""
    if quantity is None:
        return None
    value = quantity.value * share
    if quantity.dimension.endswith("/length"):
        assert line.length is not None
        value = value * line.length.value.real
    return Quantity(value, quantity.dimension.removesuffix("/length"), quantity.text)
