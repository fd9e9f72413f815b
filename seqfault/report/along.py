"""A line scanned from end to end, as a page, a tree and rows."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from seqfault.faults.network import Network
from seqfault.report.data import Quantity, header, polar
from seqfault.report.facts import after, conditions
from seqfault.report.numbers import figures, kilovolt, quiet
from seqfault.report.tables import (
    Block,
    Cell,
    Column,
    Fact,
    Facts,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
)
from seqfault.studies.along import Along, Scan


def along_page(network: Network, scanned: Along) -> Page:
    """The page of ``scanned``."""
    first = scanned.scans[0].solutions[0]
    opened = f", breaker at {scanned.opened} open" if scanned.opened else ""
    long = "" if scanned.length is None else f", {scanned.length / 1000:g} km"
    title = Title(
        network.model.title,
        f"{scanned.line}  {kilovolt(scanned.nominal)}{long}",
        f"from {scanned.ends[0]} to {scanned.ends[1]}{opened}, {conditions([first])}",
    )
    parts: list[Part] = [title]
    parts += [_table(scanned, scan) for scan in scanned.scans]
    parts.append(Facts(tuple(_facts(scanned))))
    parts.append(
        Sentences(
            "",
            (
                "At 0 and 100 % the fault lies on the line's side of the current transformer there:"
                " currents into the fault and voltages are those of a fault at the bus, and what that end"
                " sees jumps by the fault current.",
            ),
        )
    )
    solutions = [s for scan in scanned.scans for s in scan.solutions]
    names = [f"{scan.kind} at {100 * x:.3g} %" for scan in scanned.scans for x in scanned.fraction.tolist()]
    return Page((*parts, *after(solutions, names)))


def _table(scanned: Along, scan: Scan) -> Table:
    near, far = scanned.ends
    groups = (
        *([] if scanned.length is None else [Group(("", "km"))]),
        Group(("into", "fault")),
        Group(("3I0 to", "earth")),
        Group(("3I0,", "from end")),
        Group(("3I0,", "to end")),
        Group(("phase,", "from end")),
        Group(("phase,", "to end")),
        Group(("left, %", "from")),
        Group(("left, %", "to")),
    )
    rows = []
    for k, x in enumerate(scanned.fraction.tolist()):
        top = scan.solutions[k].largest
        before = scan.solutions[k].before

        def ampere(values: Any, top: float = top) -> tuple[Cell, ...]:
            return (float(abs(quiet(complex(np.asarray(values).ravel()[0]), top))),)

        def percent(row: int, bus: str, k: int = k, before: Any = before) -> tuple[Cell, ...]:
            stood = abs(before[scan.solutions[k].index[bus]])
            least = float(np.abs(scan.left[row, :, k]).min())
            return (f"{100 * least / stood:.1f}" if stood else "dead",)

        rows.append(
            Row(
                f"{100 * x:.3g} %",
                (
                    *([] if scanned.length is None else [(f"{scanned.length * x / 1000:.4g}",)]),
                    ampere(np.abs(scan.current[:, k]).max()),
                    ampere(abs(scan.residual[k])),
                    ampere(abs(scan.seen_residual[0, k])),
                    ampere(abs(scan.seen_residual[1, k])),
                    ampere(np.abs(scan.seen[0, :, k]).max()),
                    ampere(np.abs(scan.seen[1, :, k]).max()),
                    percent(0, near),
                    percent(2, far),
                ),
            )
        )
    heading = (
        f"{scan.kind}: ampere, what the line carries at both ends, and the lowest phase voltage left"
        " at their buses"
    )
    return Table(groups, (Block("", (Column("A"),), tuple(rows)),), heading=heading)


def _facts(scanned: Along) -> Iterator[Fact]:
    for scan in scanned.scans:
        sizes = np.abs(scan.current).max(axis=0)
        k = int(sizes.argmin())
        yield Fact(
            f"Least, {scan.kind}", f"{figures(float(sizes[k]))} A", f"at {100 * scanned.fraction[k]:.3g} %"
        )
        if not np.abs(scan.residual).any():
            continue
        for end, bus in enumerate(scanned.ends):
            if bus == scanned.opened:
                continue
            seen = np.abs(scan.seen_residual[end])
            k = int(seen.argmin())
            yield Fact(
                f"Least 3I0 at {bus}",
                f"{figures(float(seen[k]))} A",
                f"at {100 * scanned.fraction[k]:.3g} %",
            )


def along_tree(network: Network, scanned: Along) -> dict[str, Any]:
    """``scanned`` as plain values."""
    return {
        **header(network),
        "line": scanned.line,
        "ends": list(scanned.ends),
        "nominal": scanned.nominal,
        "length": scanned.length,
        "opened": scanned.opened or None,
        "scans": [
            {
                "kind": scan.kind,
                "points": [
                    {
                        "fraction": x,
                        "current": {p: polar(scan.current[j, k]) for j, p in enumerate("abc")},
                        "residual": polar(scan.residual[k]),
                        "ends": [
                            {
                                "bus": bus,
                                **{p: polar(scan.seen[end, j, k]) for j, p in enumerate("abc")},
                                "residual": polar(scan.seen_residual[end, k]),
                            }
                            for end, bus in enumerate(scanned.ends)
                        ],
                        "voltages": {
                            name: {p: polar(scan.left[row, j, k]) for j, p in enumerate("abc")}
                            for row, name in enumerate(("from", "fault", "to"))
                        },
                    }
                    for k, x in enumerate(scanned.fraction.tolist())
                ],
            }
            for scan in scanned.scans
        ],
        "assumptions": [text for a in network.model.assumptions for text in a.sentences()],
        "warnings": list(network.model.warnings),
    }


def along_rows(scanned: Along) -> Iterator[Quantity]:
    """``scanned`` in long form."""
    for scan in scanned.scans:
        for k, x in enumerate(scanned.fraction.tolist()):
            place = f"{scanned.line}@{100 * x:.10g}%"
            state = scan.solutions[k].state

            def row(
                quantity: str,
                phase: str,
                value: complex,
                unit: str,
                where: str,
                of: tuple[str, str, str] = (place, scan.kind, state),
            ) -> Quantity:
                size, turn = polar(value)
                place, kind, state = of
                return Quantity(place, kind, quantity, phase, size, unit, turn, where, state)

            for j, phase in enumerate("abc"):
                yield row("fault current", phase, scan.current[j, k], "A", place)
            yield row("fault current", "residual", scan.residual[k], "A", place)
            for end, bus in enumerate(scanned.ends):
                at = f"{scanned.line}@{bus}"
                for j, phase in enumerate("abc"):
                    yield row("current into element", phase, scan.seen[end, j, k], "A", at)
                yield row("current into element", "residual", scan.seen_residual[end, k], "A", at)
            for number, where in enumerate((scanned.ends[0], place, scanned.ends[1])):
                for j, phase in enumerate("abc"):
                    yield row("voltage to earth", phase, scan.left[number, j, k], "V", where)
