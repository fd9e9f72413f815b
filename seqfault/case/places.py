"""Places of faults: a bus, ``ELEMENT@BUS`` for a terminal, ``LINE@37%`` for a point along a line."""

from __future__ import annotations

import difflib
from collections.abc import Iterator

import msgspec

from seqfault.case.quantities import Dimensions, read_quantity
from seqfault.case.records import Case, Line, Record, SeriesReactor, Transformer
from seqfault.case.wording import Spelling, amount, listed
from seqfault.errors import QuantityError, RequestError, quoted

_ALONG = Dimensions("ratio", "length")
TABLES = (
    "infeeds",
    "generators",
    "motors",
    "lines",
    "transformers",
    "earthing_transformers",
    "series_reactors",
    "capacitors",
    "loads",
)
"""Tables whose records have terminals that a fault can stand at."""


class Place(msgspec.Struct, frozen=True):
    """Where a fault is asked for.

    A bus: ``bus`` alone. A terminal: ``element`` of ``table``, its ``side`` and its ``bus``. A point
    along a line: ``element`` and ``fraction`` between 0 and 1 from its ``from`` end, ``bus`` empty.
    ``jumped`` tells of a point asked for that is an end of its line.
    """

    text: str
    bus: str = ""
    table: str = ""
    element: str = ""
    side: str = ""
    fraction: float | None = None
    jumped: bool = False

    @property
    def name(self) -> str:
        """The place as answers name it."""
        if self.fraction is not None or not self.element:
            return self.text
        return f"{self.element}@{self.bus}"


def terminals(table: str, record: Record) -> Iterator[tuple[str, str]]:
    """Side and bus of each terminal of a record."""
    if isinstance(record, (Line, SeriesReactor)):
        yield "from", record.from_
        yield "to", record.to
    elif isinstance(record, Transformer):
        for side in ("hv", "lv", "tv"):
            winding = getattr(record, side)
            if winding is not None:
                yield side, winding.bus
    elif table in TABLES:
        yield "", record.bus  # type: ignore[attr-defined]  # every other kind there has one bus


def read_place(case: Case, text: str) -> Place:
    """The place that ``text`` names in the state of ``case``.

    Raises ``RequestError`` where there is none, or what it is at is out of service.
    """
    element, at, where = text.partition("@")
    if not at:
        return _bus(case, text)
    element, where = element.strip(), where.strip()
    owner = {name: table for table in TABLES for name in getattr(case, table)}
    if element not in owner:
        if element in case.ties:
            raise RequestError(
                f"place {quoted(text)}: a tie has no place of its own; name one of its buses"
            )
        raise RequestError(
            f"place {quoted(text)}: there is no element {quoted(element)}{Spelling(owner).hint(element)}"
        )
    table = owner[element]
    record: Record = getattr(case, table)[element]
    ends = list(terminals(table, record))
    if record.out:
        raise RequestError(f"place {quoted(text)}: {quoted(element)} is out of service in this state")
    dead = [bus for _, bus in ends if bus in case.buses and case.buses[bus].out]
    if dead:
        raise RequestError(
            f"place {quoted(text)}: {quoted(element)} is at bus {quoted(dead[0])}, which is out of service"
            " in this state"
        )
    for side, bus in ends:
        if bus == where:
            return Place(text, bus, table, element, side)
    if isinstance(record, Line):
        return _along(text, element, record, where)
    choices = listed((quoted(f"{element}@{bus}") for _, bus in ends), "or")
    raise RequestError(
        f"place {quoted(text)}: {quoted(element)} has no terminal at {quoted(where)}; write {choices}"
    )


def _bus(case: Case, text: str) -> Place:
    if text in case.buses:
        if case.buses[text].out:
            raise RequestError(f"place {quoted(text)}: this bus is out of service in this state")
        return Place(text, text)
    for table in TABLES:
        record = getattr(case, table).get(text)
        if record is not None:
            ends = [quoted(f"{text}@{bus}") for _, bus in terminals(table, record)]
            more = [quoted(f"{text}@50%")] if table == "lines" else []
            raise RequestError(
                f"place {quoted(text)}: this is an element, not a bus; write {listed([*ends, *more], 'or')}"
            )
    if text in case.neutrals:
        raise RequestError(
            f"place {quoted(text)}: this is a neutral, not a bus; name the bus whose earth fault is meant"
        )
    live = [name for name, bus in case.buses.items() if not bus.out]
    near = difflib.get_close_matches(text, live, n=1, cutoff=0.5)
    hint = f"did you mean {quoted(near[0])}?" if near else "inspect CASE --places lists them"
    raise RequestError(f"place {quoted(text)}: no bus has this name; {hint}")


def _along(text: str, element: str, line: Line, where: str) -> Place:
    """A point along ``line``; its ends are terminals."""
    try:
        read = read_quantity(where, _ALONG)
    except QuantityError as error:
        choices = listed(quoted(f"{element}@{end}") for end in (line.from_, line.to, "37%", "0.4km"))
        raise RequestError(
            f"place {quoted(text)}: this is neither an end of the line nor a point along it; write"
            f" {choices} ({error})"
        ) from None
    value = float(read.value.real)
    if read.dimension == "length":
        if line.length is None:
            raise RequestError(
                f"place {quoted(text)}: line {quoted(element)} states no length; write the point in per"
                f" cent, as in {quoted(f'{element}@50%')}"
            )
        whole = float(line.length.value.real)
        if not -1e-9 * whole <= value <= whole * (1 + 1e-9):
            raise RequestError(
                f"place {quoted(text)}: the line is {amount(whole, 'm')} long, from {quoted(line.from_)}"
            )
        value /= whole
    if not -1e-9 <= value <= 1 + 1e-9:
        raise RequestError(f"place {quoted(text)}: a point along a line lies between 0 and 100 %")
    if value <= 1e-9:
        return Place(text, line.from_, "lines", element, "from", jumped=True)
    if value >= 1 - 1e-9:
        return Place(text, line.to, "lines", element, "to", jumped=True)
    return Place(text, "", "lines", element, fraction=value)
