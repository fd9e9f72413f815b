"""What every element contributes to the faults at its bus: part of a page, a tree and rows."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

from seqfault.model.elements import Floats, Model
from seqfault.report.data import QuantityColumn
from seqfault.report.numbers import kilovolt
from seqfault.report.tables import AMPERE, Block, Group, Row, Table
from seqfault.studies.contributions import Contributions

LEAST = 0.01
"""Share of the greatest contribution at its bus below which the page leaves an element out."""
HEADINGS = (
    ("three-", "phase", "k3"),
    ("line-", "line", "k2"),
    ("line-line-", "ground", "k2E"),
    ("line-", "ground", "k1"),
    ("k2E", "to earth", "3I0"),
    ("k1", "to earth", "3I0"),
)
QUANTITIES = {
    "k3": ("three-phase", "contribution"),
    "k2": ("line-line", "contribution"),
    "k2e": ("line-line-ground", "contribution"),
    "k1": ("line-ground", "contribution"),
    "earth": ("line-line-ground", "contribution to earth"),
    "k1_earth": ("line-ground", "contribution to earth"),
}


def _columns(each: Contributions) -> dict[str, Floats]:
    return {name: getattr(each, name) for name in QUANTITIES}


def contributions_table(model: Model, each: Contributions) -> Table:
    """A block a live bus; elements below ``LEAST`` of the greatest at their bus are left out."""
    columns = {name: column.tolist() for name, column in _columns(each).items()}
    start = each.start.tolist()
    blocks = []
    for b, bus in enumerate(model.buses):
        rows = [
            ([columns[name][k] for name in columns], k)
            for k in range(start[b], start[b + 1])
            if model.live[b]
        ]
        top = max((v for values, _ in rows for v in values if math.isfinite(v)), default=0.0)
        shown = tuple(
            Row(
                " ".join(filter(None, (each.element[k], each.side[k]))),
                tuple((v if math.isfinite(v) else "-",) for v in values),
            )
            for values, k in rows
            if top and not max(values) < LEAST * top
        )
        if shown:
            blocks.append(Block(f"{bus}, {kilovolt(float(model.nominal[b]))}", (AMPERE,), shown))
    return Table(
        tuple(Group(heading) for heading in HEADINGS),
        tuple(blocks),
        f"Who feeds the fault: ampere towards it, state {each.state}; what gives less than"
        f" {100 * LEAST:g} % of the greatest at its bus is left out",
    )


def contributions_tree(model: Model, each: Contributions, bus: int) -> list[dict[str, Any]]:
    """The elements at one bus as plain values; null where resonance leaves a current unbounded."""
    out = []
    for k in range(int(each.start[bus]), int(each.start[bus + 1])):
        row: dict[str, Any] = {"element": each.element[k], "side": each.side[k]}
        row["bus"] = model.buses[int(each.bus[k])]
        for name, column in _columns(each).items():
            value = float(column[k])
            row[name] = value if math.isfinite(value) else None
        out.append(row)
    return out


def contributions_rows(model: Model, each: Contributions) -> Iterator[QuantityColumn]:
    """Contributions in long form; ``where`` is the terminal, ELEMENT@BUS."""
    counts = (each.start[1:] - each.start[:-1]).tolist()
    places = [bus for bus, count in zip(model.buses, counts, strict=True) for _ in range(count)]
    where = [
        f"{element}@{model.buses[bus]}"
        for element, bus in zip(each.element, each.bus.tolist(), strict=True)
    ]
    for name, column in _columns(each).items():
        kind, quantity = QUANTITIES[name]
        values = [value if math.isfinite(value) else None for value in column.tolist()]
        yield QuantityColumn(places, kind, quantity, values, "A", where, each.state)
