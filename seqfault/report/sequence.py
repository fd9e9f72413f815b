"""The three sequence networks seen from a bus, as a page and a tree: what a checker redoes by hand."""

from __future__ import annotations

import cmath
from collections.abc import Iterator
from typing import Any

from seqfault.report.data import FORMAT, Quantity, cartesian
from seqfault.report.numbers import kilovolt
from seqfault.report.tables import (
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
from seqfault.studies.sequence_links import REFERENCE
from seqfault.studies.sequence_view import Branch, Node, Opening, SequenceView

TITLES = {0: "Zero sequence", 1: "Positive sequence", 2: "Negative sequence"}
PARTS = {
    "whole": "",
    "magnetising": "magnetising branch",
    "3Zn": "3 Zn",
    "capacitance": "capacitance",
    "mutual": "mutual",
    "coupled": "less mutual",
    "mesh": "one branch of its mesh",
    "ratio": "what unequal ratios leave",
}
REASONS = {
    "delta": "delta: zero sequence circulates inside",
    "isolated": "its star point is joined to nothing",
    "unbalanced": "earthed, but no other winding balances it",
    "neutral out": "its neutral is out of service",
    "source": "stated open in zero sequence",
    "motor": "its star point is unearthed",
    "capacitor": "its star point is unearthed",
    "converter": "a limited current, not an impedance",
}


def sequence_page(views: tuple[SequenceView, ...], title: str) -> Page:
    """The page of the three networks seen from one place."""
    first = views[0]
    parts: list[Part] = [
        Title(
            title or "Case without a title",
            f"{first.place}  {kilovolt(first.nominal)}",
            f"the sequence networks a fault here sees, per unit on {first.base_power / 1e6:g} MVA and"
            f" ohm at {kilovolt(first.nominal)}, state: {first.state}",
        )
    ]
    for view in views:
        parts.append(_network(view))
        if view.openings:
            parts.append(Sentences("  open here", tuple(_opening(view, o) for o in view.openings)))
    return Page(tuple(parts))


def _network(view: SequenceView) -> Table:
    rows = [_row(view, *step) for step in _walk(view)]
    rows.append(_thevenin(view))
    groups = (
        Group(("per unit", "R + jX"), left=True),
        Group(("ohm", "R + jX"), left=True),
    )
    heading = f"{TITLES[view.sequence]}: every branch between {view.place} and the reference"
    return Table(groups, (Block("", (TEXT,), tuple(rows)),), heading=heading)


def _walk(view: SequenceView) -> Iterator[tuple[int, Branch, int, bool, bool]]:
    """Branches outwards from the place: depth, branch, node it leads to, met before, ends there."""
    beside: dict[int, list[int]] = {}
    for k, branch in enumerate(view.branches):
        beside.setdefault(branch.start, []).append(k)
        if branch.end != REFERENCE:
            beside.setdefault(branch.end, []).append(k)
    done: set[int] = set()
    met = {0}
    stack = [(0, 0, -1)]
    while stack:
        depth, node, entry = stack.pop()
        if entry >= 0:
            if entry in done:
                continue
            done.add(entry)
            again = node in met
            ends = node != REFERENCE and len(beside[node]) == 1
            yield depth, view.branches[entry], node, again, ends
            if again or node == REFERENCE:
                continue
            met.add(node)
            depth += 1
        for k in reversed(beside.get(node, [])):
            if k not in done:
                branch = view.branches[k]
                stack.append((depth, branch.end if branch.start == node else branch.start, k))


def _row(view: SequenceView, depth: int, branch: Branch, to: int, met: bool, ends: bool) -> Row:
    where = "the reference" if to == REFERENCE else _node(view.nodes[to])
    note = " (met above)" if met else " (ends there)" if ends else ""
    label = f"{'  ' * depth}{_element(branch)} to {where}{note}"
    return Row(label, ((_complex(branch.z),), (_complex(branch.z * view.base),)))


def _thevenin(view: SequenceView) -> Row:
    z = view.thevenin
    if not cmath.isfinite(z):
        return Row("no path to the reference", (("infinite",), ("infinite",)))
    return Row("together, as solved", ((_complex(z),), (_complex(z * view.base),)))


def _complex(z: complex) -> Cell:
    """Resistance and reactance to four figures."""
    size = abs(z)
    if size == 0:
        return "0"
    real, imaginary = (0.0 if abs(x) < 5e-7 * size else x for x in (z.real, z.imag))
    return f"{real:.4g} {'-' if imaginary < 0 else '+'} j{abs(imaginary):.4g}"


def _element(branch: Branch) -> str:
    if branch.part == "capacitance" and len(branch.elements) > 1:
        return f"capacitance of {len(branch.elements)} elements"
    shown = ", ".join(branch.elements[:3])
    more = f" and {len(branch.elements) - 3} more" if len(branch.elements) > 3 else ""
    part = PARTS.get(branch.part, branch.part)
    return f"{shown}{more} {part}".rstrip()


def _node(node: Node) -> str:
    names = " = ".join(node.names)
    return names if node.kind == "bus" else f"{node.kind} {names}"


def _opening(view: SequenceView, opening: Opening) -> str:
    name = f"{opening.element} {opening.side}".rstrip()
    return f"{name} at {_node(view.nodes[opening.node])}: {REASONS[opening.reason]}"


def sequence_tree(views: tuple[SequenceView, ...], title: str, sha256: str) -> dict[str, Any]:
    """The networks as plain values for JSON; node 0 is the place, −1 the reference."""
    return {
        "format": FORMAT,
        "case": {"title": title, "sha256": sha256},
        "scenario": views[0].state,
        "place": views[0].place,
        "base_power": views[0].base_power,
        "networks": [
            {
                "sequence": view.sequence,
                "thevenin": cartesian(view.thevenin),
                "base": view.base,
                "nodes": [{"kind": n.kind, "names": list(n.names)} for n in view.nodes],
                "branches": [
                    {
                        "from": b.start,
                        "to": b.end,
                        "per_unit": cartesian(b.z),
                        "elements": list(b.elements),
                        "part": b.part,
                    }
                    for b in view.branches
                ],
                "open": [
                    {"node": o.node, "element": o.element, "side": o.side, "reason": o.reason}
                    for o in view.openings
                ],
            }
            for view in views
        ],
    }


def sequence_rows(views: tuple[SequenceView, ...]) -> Iterator[Quantity]:
    """Branches in long form; ``kind`` is the part, ``where`` the nodes it joins."""
    for view in views:
        for b in view.branches:
            to = "reference" if b.end == REFERENCE else _node(view.nodes[b.end])
            where = f"{_node(view.nodes[b.start])} to {to}"
            for name, value in (("resistance", b.z.real), ("reactance", b.z.imag)):
                yield Quantity(
                    ", ".join(b.elements), b.part, name, str(view.sequence), value, "pu", None,
                    where, view.state,
                )  # fmt: skip
