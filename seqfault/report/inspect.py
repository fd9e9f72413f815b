"""What was read of a case, as a page, a tree and rows."""

from __future__ import annotations

import cmath
from collections.abc import Iterator
from typing import Any

from seqfault.report.data import FORMAT, Quantity, cartesian
from seqfault.report.numbers import counted, figures, kilovolt, ohms
from seqfault.report.protection import protection_parts, protection_rows, protection_tree
from seqfault.report.tables import (
    CAUTION,
    PER_UNIT,
    TEXT,
    Block,
    Cell,
    Column,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
)
from seqfault.studies.inspect import Element, Inspection, Winding

EFFECTS = {
    ("star", "path"): "a path to earth through its star point",
    ("star", "open"): "earthed, but nothing balances it: no path",
    ("auto", "path"): "a path to earth through the common star point",
    ("zigzag", "path"): "a path to earth that the other windings do not see",
    ("zigzag", "open"): "open: its star point is joined to nothing",
    ("delta", "circulates"): "circulates inside, none leaves",
    ("delta", "open"): "none flows",
    ("isolated star", "open"): "open: its star point is joined to nothing",
}
PLURALS = {
    "infeed": "Infeeds",
    "generator": "Generators",
    "motor": "Motors",
    "transformer": "Transformers",
    "earthing transformer": "Earthing transformers",
    "line": "Lines",
    "series reactor": "Series reactors",
}
DEVICES = {
    "tie": "Ties",
    "capacitor": "Capacitor banks",
    "load": "Loads",
    "voltage": "Voltages before a fault, in the loaded state (phase to phase)",
    "converter": "Converters",
    "line": "Lines out of service, earthed",
}


def inspect_page(inspection: Inspection) -> Page:
    """The page of ``inspection``."""
    i = inspection
    buses = sum(len(zone.buses) for zone in i.zones)
    what = f"{counted(buses, 'bus', 'buses')}, {counted(len(i.elements), 'element')}"
    loaded = any(d.kind == "voltage" for d in i.devices)
    before = "load flows" if loaded else f"{i.prefault:.2f} of nominal"
    title = Title(
        "",
        i.title or "Case without a title",
        f"{what}, {i.frequency:g} Hz, base {i.base_power / 1e6:g} MVA,"
        f" before a fault {before}, state: {i.state}",
    )
    parts: list[Part] = [title, _zones(i), Sentences("Buses", _buses(i))]
    if i.elements:
        parts.append(_impedances(i))
    negative = [e.name for e in i.elements if " of star" in e.name and e.impedance[1].imag < 0]
    parts.append(
        Sentences(
            "Negative branches of a star equivalent (no winding has one; their pairs do not)",
            tuple(negative),
        )
    )
    if i.couplings:
        parts.append(_couplings(i))
    for kind, heading in DEVICES.items():
        items = tuple(f"{d.name}: {d.text}" for d in i.devices if d.kind == kind)
        parts.append(Sentences(heading, items))
    if i.windings:
        parts.append(_windings(i.windings))
    if i.stars:
        parts.append(_stars(i))
    if i.protection is not None:
        parts += protection_parts(i.protection)
    off = [element for element in i.elements if abs(element.ratio - 1) > 1e-9]
    parts += [
        Sentences("Rated voltage ratio, tap included", tuple(map(_ratio, off))),
        Sentences("Out of service in this state", i.out),
        Sentences("Scenarios", tuple(f"{n}: {note}" if note else n for n, note in i.scenarios)),
        Sentences("Assumed", tuple(text for a in i.assumptions for text in a.sentences())),
    ]
    if i.protection is not None:
        parts.append(Sentences("", (CAUTION,), quiet=True))
    return Page(tuple(parts))


def _zones(i: Inspection) -> Table:
    rows = []
    for zone in i.zones:
        values = (zone.base_impedance, zone.base_current, zone.charging)
        count = str(len(zone.buses))
        rows.append(Row(kilovolt(zone.nominal), (*((v,) for v in values), (count,))))
    groups = (
        Group(("base", "ohm")),
        Group(("base", "ampere")),
        Group(("charging", "ampere")),
        Group(("", "buses")),
    )
    return Table(
        groups,
        (Block("", (Column("", figures=4),), tuple(rows)),),
        heading="Voltage zones (charging: 3I0 of all capacitances in an unearthed earth fault)",
    )


def _buses(i: Inspection) -> tuple[str, ...]:
    lines = []
    for zone in i.zones:
        names = [f"{n} (dead)" if n in zone.dead else n for n in zone.buses[:SHOWN]]
        more = len(zone.buses) - SHOWN
        end = f" and {more} more (--places lists all)" if more > 0 else ""
        lines.append(f"{kilovolt(zone.nominal)}: {', '.join(names)}{end}")
    return tuple(lines)


SHOWN = 20
"""Buses of a zone named on the page; all are in JSON and in ``--places``."""


def _impedances(i: Inspection) -> Table:
    blocks = []
    for kind, heading in PLURALS.items():
        rows = tuple(_impedance(e) for e in i.elements if e.kind == kind)
        if rows:
            blocks.append(Block(heading, (PER_UNIT, PER_UNIT), rows))
    groups = tuple(Group((f"{name} sequence", "R, X")) for name in ("positive", "negative", "zero"))
    return Table(
        groups,
        tuple(blocks),
        heading=f"Impedances per unit on {i.base_power / 1e6:g} MVA and the nominal voltages",
    )


def _impedance(element: Element) -> Row:
    cells: list[tuple[Cell, ...]] = []
    for k in (1, 2, 0):
        z = complex(element.impedance[k])
        cells.append((z.real, z.imag) if cmath.isfinite(z) else ("", "no path"))
    name = f"{element.name} (all {element.count})" if element.count > 1 else element.name
    return Row(name, tuple(cells))


def _windings(windings: tuple[Winding, ...]) -> Table:
    rows = []
    for w in windings:
        text = EFFECTS.get((w.connection, w.effect), w.effect)
        if w.effect == "through":
            text = f"passes zero sequence on to {' and '.join(w.others)}"
        rows.append(Row(f"{w.element} {w.side}".rstrip(), ((w.connection,), (w.bus,), (text,))))
    groups = tuple(Group((name,), left=True) for name in ("winding", "at bus", "zero sequence"))
    block = Block("", (TEXT,), tuple(rows))
    return Table(groups, (block,), heading="What each winding does to zero sequence")


def _couplings(i: Inspection) -> Table:
    rows = tuple(
        Row(" with ".join(c.lines), (((c.impedance.real, c.impedance.imag)),)) for c in i.couplings
    )
    return Table(
        (Group(("zero sequence", "R, X")),),
        (Block("", (PER_UNIT, PER_UNIT), rows),),
        heading="Mutual impedances of coupled lines, per unit",
    )


def _stars(i: Inspection) -> Table:
    rows = []
    for star in i.stars:
        how = star.kind
        if star.kind == "neutral":
            how = "out of service"
            if cmath.isfinite(star.impedance):
                ampere = star.voltage / abs(star.impedance) if star.impedance else 0.0
                passes = f", passes {figures(ampere)} A" if ampere else ""
                how = f"{ohms(star.impedance, 4)}{passes}"
        rows.append(Row(star.name, ((how,), (", ".join(star.windings),))))
    groups = (Group(("to earth",), left=True), Group(("star point of",), left=True))
    return Table(groups, (Block("", (TEXT,), tuple(rows)),), heading="Star points")


def _ratio(element: Element) -> str:
    percent = 100 * (element.ratio - 1)
    side = "above" if percent > 0 else "below"
    return f"{element.name}: {figures(abs(percent))} % {side} the ratio of the nominal voltages"


def inspect_tree(inspection: Inspection) -> dict[str, Any]:
    """``inspection`` as plain values for JSON; impedances ``[R, X]``, null where no path."""
    i = inspection
    return {
        "format": FORMAT,
        "case": {"title": i.title, "sha256": i.sha256},
        "scenario": i.state,
        "frequency": i.frequency,
        "base_power": i.base_power,
        "prefault": i.prefault,
        "zones": [
            {
                "nominal": zone.nominal,
                "base_impedance": zone.base_impedance,
                "base_current": zone.base_current,
                "charging": zone.charging,
                "buses": list(zone.buses),
                "dead": list(zone.dead),
            }
            for zone in i.zones
        ],
        "elements": [
            {
                "element": e.name,
                "kind": e.kind,
                "buses": list(e.buses),
                "count": e.count,
                "ratio": e.ratio,
                "per_unit": {f"z{k}": cartesian(e.impedance[k]) for k in (1, 2, 0)},
            }
            for e in i.elements
        ],
        "windings": [
            {
                "element": w.element,
                "side": w.side,
                "bus": w.bus,
                "connection": w.connection,
                "effect": w.effect,
            }
            for w in i.windings
        ],
        "star_points": [
            {
                "name": s.name,
                "kind": s.kind,
                "impedance": cartesian(s.impedance),
                "bus": s.bus,
                "windings": list(s.windings),
            }
            for s in i.stars
        ],
        "couplings": [{"lines": list(c.lines), "per_unit": cartesian(c.impedance)} for c in i.couplings],
        "devices": [{"name": d.name, "kind": d.kind, "text": d.text} for d in i.devices],
        **protection_tree(i.protection),
        "out": list(i.out),
        "scenarios": [{"name": name, "note": note} for name, note in i.scenarios],
        "assumptions": [text for a in i.assumptions for text in a.sentences()],
        "warnings": list(i.warnings),
    }


def inspect_rows(inspection: Inspection) -> Iterator[Quantity]:
    """Base values and per-unit impedances in long form; ``kind`` is the kind of record."""
    state = inspection.state
    for zone in inspection.zones:
        for bus in zone.buses:
            for name, value, unit in (
                ("nominal voltage", zone.nominal, "V"),
                ("base impedance", zone.base_impedance, "ohm"),
                ("base current", zone.base_current, "A"),
            ):
                yield Quantity(bus, "bus", name, "", value, unit, None, bus, state)
    for e in inspection.elements:
        for k in (1, 2, 0):
            z = complex(e.impedance[k])
            for name, part in (("resistance", z.real), ("reactance", z.imag)):
                finite = part if cmath.isfinite(z) else None
                where = f"{e.name}@{e.buses[0]}"
                yield Quantity(e.name, e.kind, name, str(k), finite, "pu", None, where, state)
    if inspection.protection is not None:
        yield from protection_rows(inspection.protection, state)
