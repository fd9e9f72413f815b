"""The setting sheet as a page, a tree and rows."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import msgspec

from seqfault.report.data import FORMAT, Quantity
from seqfault.report.settings_words import plain, seconds, setting, size
from seqfault.report.tables import (
    CAUTION,
    TEXT,
    Block,
    Cell,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
)
from seqfault.studies.relays import Relay
from seqfault.studies.settings_sheet import SheetRow, Timed, setting_sheet, stage_values
from seqfault.studies.settings_states import States


def sheet_page(study: States) -> Page:
    """The page of the sheet alone."""
    rows = setting_sheet(study)
    name = f"Setting sheet  {len(rows)} relays" if len(rows) != 1 else "Setting sheet  1 relay"
    title = Title(study.case.title, name, "as the case file has them; primary and secondary values")
    return Page(
        (
            title,
            *sheet_parts(rows),
            Sentences("Assumed", study.assumptions),
            Sentences("", (CAUTION,), quiet=True),
        )
    )


def sheet_parts(rows: tuple[SheetRow, ...]) -> tuple[Part, ...]:
    """What is set, and the times."""
    return _what(rows), _times(rows), Sentences("Beside the main stage", tuple(_more(rows)))


def _table(heading: str, columns: tuple[tuple[str, ...], ...], rows: list[Row]) -> Table:
    groups = tuple(Group(column, left=True) for column in columns)
    return Table(groups, (Block("", (TEXT,), tuple(rows)),), heading=heading)


def _cells(*cells: Cell) -> tuple[tuple[Cell, ...], ...]:
    return tuple((cell,) for cell in cells)


def _what(rows: tuple[SheetRow, ...]) -> Table:
    made = []
    for row in rows:
        relay = row.relay
        primary, secondary = stage_values(relay.pickup)
        made.append(
            Row(
                relay.name,
                _cells(
                    relay.device,
                    row.ratio or "-",
                    setting(primary, relay.unit),
                    "-" if secondary is None else setting(secondary, relay.unit),
                    curve(relay),
                    time_setting(relay),
                ),
            )
        )
    columns = (("device",), ("ratio",), ("pickup", "primary"), ("", "secondary"), ("curve",), ("setting",))
    return _table("What is set on each relay (device: IEEE C37.2)", columns, made)


def curve(relay: Relay) -> str:
    """The name of its curve."""
    return "definite time" if relay.curve == "definite" else relay.curve


def time_setting(relay: Relay) -> str:
    """``× 0.25`` or ``0.3 s``."""
    if relay.curve == "definite":
        return "to be set" if relay.delay is None else f"{relay.delay:g} s"
    return "to be set" if relay.multiplier is None else f"× {relay.multiplier:g}"


def _times(rows: tuple[SheetRow, ...]) -> Table:
    made = []
    for row in rows:
        unit = row.relay.unit
        made.append(
            Row(
                row.relay.name,
                _cells(
                    size(row.least.current, unit),
                    _time(row.least),
                    size(row.greatest.current, unit),
                    _time(row.greatest),
                    row.duty,
                ),
            )
        )
    columns = (("least", "it must see"), ("acts", "in"), ("greatest", ""), ("acts", "in"), ("of what it",))
    return _table("When it acts", columns, made)


def _time(timed: Timed) -> str:
    return (
        "to be set" if timed.current == timed.current and timed.time != timed.time else seconds(timed.time)
    )


def _more(rows: tuple[SheetRow, ...]) -> Iterator[str]:
    for row in rows:
        relay, said = row.relay, [f"at {row.relay.at}, {row.relay.measures}"]
        primary, secondary = stage_values(relay.fast)
        if primary is not None:
            both = f" primary, {setting(secondary, relay.unit)} secondary" if secondary is not None else ""
            said.append(f"fast stage {setting(primary, relay.unit)}{both}, {relay.fast_delay:g} s")
        if relay.minimum_time is not None:
            said.append(f"no shorter time than {relay.minimum_time:g} s")
        if relay.direction:
            said.append(
                f"{relay.direction}, characteristic angle {relay.characteristic_angle_deg:.4g}°,"
                f" polarised by {relay.polarisation}" + (f", {relay.vt}" if relay.vt else "")
            )
        said.append(f"breaker {relay.breaker_time:g} s")
        yield f"{relay.name}: {'; '.join(said)}"


def sheet_tree(study: States) -> dict[str, Any]:
    """The sheet as plain values."""
    return {
        "format": FORMAT,
        "case": {"title": study.case.title, "sha256": study.case.sha256},
        "sheet": sheet_values(setting_sheet(study)),
        "assumptions": list(study.assumptions),
        "warnings": list(study.warnings),
    }


def sheet_values(rows: tuple[SheetRow, ...]) -> list[dict[str, Any]]:
    """Rows of the sheet, SI units, null what is open or never."""
    out: list[dict[str, Any]] = []
    for row in rows:
        tree = msgspec.to_builtins(row)
        tree["relay"] = {
            key: value
            for key, value in tree["relay"].items()
            if key not in ("scales", "blind", "out", "protects", "backs_up", "element", "bus", "star")
        }
        out.append(tree)
    return out


def sheet_rows(rows: tuple[SheetRow, ...], kind: str = "setting") -> Iterator[Quantity]:
    """The sheet in long form."""
    for row in rows:
        relay = row.relay
        (primary, secondary), (fast, fast_secondary) = stage_values(relay.pickup), stage_values(relay.fast)
        values: tuple[tuple[str, float | str | None, str], ...] = (
            ("device", relay.device, ""),
            ("measures", relay.measures, ""),
            ("ratio", row.ratio, ""),
            ("pickup, primary", primary, relay.unit),
            ("pickup, secondary", secondary, relay.unit),
            ("curve", relay.curve, ""),
            ("multiplier", relay.multiplier, ""),
            ("delay", relay.delay, "s"),
            ("minimum time", relay.minimum_time, "s"),
            ("fast stage, primary", fast, relay.unit),
            ("fast stage, secondary", fast_secondary, relay.unit),
            ("fast stage delay", relay.fast_delay, "s"),
            ("direction", relay.direction, ""),
            ("characteristic angle", relay.characteristic_angle_deg, "deg"),
            ("breaker time", relay.breaker_time, "s"),
        )
        for name, value, unit in values:
            yield Quantity(relay.name, kind, name, "", value, unit, None, relay.at, "all")
        for label, timed in (("least", row.least), ("greatest", row.greatest)):
            currents: tuple[tuple[str, float, str], ...] = (
                (f"{label} current", timed.current, relay.unit),
                (f"time at {label} current", timed.time, "s"),
            )
            for name, amount, unit in currents:
                yield Quantity(relay.name, kind, name, "", plain(amount), unit, None, relay.at, timed.state)
