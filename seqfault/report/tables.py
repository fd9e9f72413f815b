"""A page as data: tables of blocks headed by plain sentences, facts, and lists of sentences.

Nothing here knows widths, colours or encodings; ``layout`` and ``terminal`` do. Structs, not
dataclasses: they take a tenth of the time to define, and every command pays that time.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import msgspec

Cell = float | str | None
"""A number to be formatted by its column, a text as it stands, or nothing."""


class Column(msgspec.Struct, frozen=True):
    """How the numbers of a column are written.

    ``figures`` the least number of significant figures, ``decimals`` their limit; ``fixed`` writes
    exactly ``decimals``. ``unit`` is for those who read the table as data. ``spans`` lets the one
    column of a pattern take the width of its whole group.
    """

    unit: str = ""
    figures: int = 3
    decimals: int | None = None
    fixed: bool = False
    spans: bool = False
    left: bool = False


AMPERE = Column("A")
SHARE = Column("", decimals=3, fixed=True)
PERCENT = Column("%", figures=2, decimals=1)
ANGLE = Column("deg")
KILOVOLT = Column("kV", figures=4, decimals=3)
OHM = Column("ohm", figures=4)
PER_UNIT = Column("pu", figures=4)
WORDS = Column(spans=True)
TEXT = Column(left=True)


class Group(msgspec.Struct, frozen=True):
    """One thing across the table (a kind of fault, a phase): the lines of its heading."""

    heading: tuple[str, ...]
    left: bool = False


class Row(msgspec.Struct, frozen=True):
    """A label and, for each group, one cell a column of the block.

    ``mark`` is the position of the group that holds the greatest of the row.
    """

    label: str
    cells: tuple[tuple[Cell, ...], ...]
    mark: int | None = None


class Block(msgspec.Struct, frozen=True):
    """Rows under a sentence; ``columns`` is the pattern that repeats in every group."""

    heading: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]


class Table(msgspec.Struct, frozen=True):
    """Blocks that share groups, and so stand under one another.

    Tables of a page with the same groups are drawn with the same widths.
    """

    groups: tuple[Group, ...]
    blocks: tuple[Block, ...]
    heading: str = ""


class Title(msgspec.Struct, frozen=True):
    """What the page is about: the installation, the thing asked about, the conditions."""

    over: str
    name: str
    conditions: str


class Fact(msgspec.Struct, frozen=True):
    """A closing line: what it is, the figure, and of what."""

    label: str
    figure: str
    text: str = ""


class Facts(msgspec.Struct, frozen=True):
    """Closing lines under one another."""

    rows: tuple[Fact, ...]


class Sentences(msgspec.Struct, frozen=True):
    """Sentences under a heading, wrapped; ``quiet`` ones may be printed dim."""

    heading: str
    items: tuple[str, ...]
    quiet: bool = False


Part = Title | Table | Facts | Sentences


class Page(msgspec.Struct, frozen=True):
    """Parts in the order they are read."""

    parts: tuple[Part, ...]


def greatest(values: Sequence[float | None]) -> int | None:
    """Position of the greatest value; None where all are the same, and so nothing stands out."""
    known = [v for v in values if v is not None and v == v]
    if len(known) < 2 or max(known) <= 0 or max(known) - min(known) <= 1e-6 * max(known):
        return None
    top = max(known)
    return next(k for k, v in enumerate(values) if v is not None and v >= top * (1 - 1e-9))


def once(items: Iterable[str]) -> tuple[str, ...]:
    """``items`` without repeats, in their order."""
    return tuple(dict.fromkeys(items))


MARKED = "> stands before the greatest of its row."
CAUTION = (
    "Steady-state currents of a linear model of the data entered; nothing here is a setting ready"
    " to apply. Settings are checked and signed by a licensed engineer; local codes, the utility's"
    " rules and the makers' data govern."
)
