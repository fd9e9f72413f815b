"""Fault levels of all buses, as a page, a tree and rows."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Sequence
from typing import Any

import numpy as np

from seqfault.errors import quoted
from seqfault.faults.network import Network
from seqfault.model.assumptions import Assumption
from seqfault.model.elements import Floats
from seqfault.report.contributions import contributions_table, contributions_tree
from seqfault.report.data import QuantityColumn, cartesian, header
from seqfault.report.numbers import kilovolt
from seqfault.report.tables import (
    AMPERE,
    CAUTION,
    MARKED,
    Block,
    Cell,
    Column,
    Group,
    Page,
    Row,
    Sentences,
    Table,
    Title,
    greatest,
    once,
)
from seqfault.studies.contributions import Contributions
from seqfault.studies.levels import LevelRange, Levels, level_range

Current = Callable[[Levels], Floats]
CURRENTS: tuple[tuple[str, tuple[str, ...], Current], ...] = (
    ("k3", ("three-", "phase", "k3"), lambda x: x.k3),
    ("k2", ("line-", "line", "k2"), lambda x: x.k2),
    ("k2e", ("line-line-", "ground", "k2E"), lambda x: x.k2e),
    ("k1", ("line-", "ground", "k1"), lambda x: x.k1),
    ("earth", ("k2E", "to earth", "3I0"), lambda x: x.k2e_earth),
    ("k1_over_k3", ("", "", "k1/k3"), lambda x: x.earth_share),
)
STATE = Column()
KINDS = {
    "k3": ("three-phase", "fault current"),
    "k2": ("line-line", "fault current"),
    "k2e": ("line-line-ground", "fault current"),
    "earth": ("line-line-ground", "current to earth"),
    "k1": ("line-ground", "fault current"),
    "k1_over_k3": ("line-ground", "share of three-phase"),
}


def levels_page(
    networks: Sequence[Network], states: Sequence[Levels], fed: Sequence[Contributions] = ()
) -> Page:
    """The page of one state, or of the greatest and least over several; ``fed`` adds who feeds them."""
    model = networks[0].model
    several = len(states) > 1
    conditions = f"bolted faults at every bus, before them {_prefault(networks)}"
    conditions += f", {len(states)} states" if several else f", state: {model.state}"
    if model.machine != "subtransient":
        conditions += f", {model.machine} reactances"
    title = Title("", model.title or "Fault levels", conditions)
    key = tuple(f"({k}) {each.state}" for k, each in enumerate(states, 1)) if several else ()
    assumed = tuple(map(str, _together(a for n in networks for a in n.model.assumptions)))
    return Page(
        (
            title,
            *(_ranges(states) if several else (_one(states[0]),)),
            *(() if several else (Sentences("", (MARKED,), quiet=True),)),
            *(contributions_table(n.model, each) for n, each in zip(networks, fed, strict=False)),
            Sentences("States", key),
            Sentences("Note", once(_without_earth_current(networks, states))),
            Sentences("Assumed", assumed),
            Sentences("", (CAUTION,), quiet=True),
        )
    )


def _without_earth_current(networks: Sequence[Network], states: Sequence[Levels]) -> Iterator[str]:
    """Why earth faults carry nothing, by state."""
    several = len(states) > 1
    for network, each in zip(networks, states, strict=True):
        none = [bus for k, bus in enumerate(each.buses) if each.live[k] and each.k1[k] == 0]
        if not none:
            continue
        shown = ", ".join(map(quoted, none[:6])) + (f" and {len(none) - 6} more" if len(none) > 6 else "")
        state = f"state {network.model.state}: " if several else ""
        yield (
            f"{state}no earth current at {shown}: nothing in the case joins them to earth, or only a star"
            " point that passes none; compare tells which"
        )


def _together(assumptions: Iterable[Assumption]) -> Iterator[Assumption]:
    """One entry a text, over all states."""
    names: dict[tuple[str, str], list[str]] = {}
    for a in assumptions:
        names.setdefault((a.record, a.text), []).extend(a.names)
    for (record, text), every in names.items():
        yield Assumption(record, once(every), text)


def _prefault(networks: Sequence[Network]) -> str:
    voltages = [abs(complex(n.case.prefault.voltage.value)) for n in networks if n.loading is None]
    loaded = "load flows"
    if not voltages:
        return loaded
    low, high = min(voltages), max(voltages)
    flat = f"{low:.2f} of nominal" if low == high else f"{low:.2f} to {high:.2f} of nominal"
    return flat if len(voltages) == len(networks) else f"{flat}, or {loaded}"


def _groups() -> tuple[Group, ...]:
    return tuple(Group(heading) for _, heading, _ in CURRENTS)


def _zones(nominal: dict[str, float]) -> Iterator[tuple[str, list[str]]]:
    for volt in sorted(set(nominal.values()), reverse=True):
        yield kilovolt(volt), [bus for bus, at in nominal.items() if at == volt]


def _text(name: str, value: float) -> Cell:
    if name == "k1_over_k3":
        return f"{value:.3f}" if math.isfinite(value) else "-"
    return value


def _one(levels: Levels) -> Table:
    at = {bus: k for k, bus in enumerate(levels.buses)}
    nominal = {bus: float(levels.nominal[k]) for bus, k in at.items()}
    columns = [(name, current(levels)) for name, _, current in CURRENTS]
    blocks: list[Block] = []
    for heading, buses in _zones(nominal):
        rows = []
        for bus in buses:
            k = at[bus]
            if not levels.live[k]:
                rows.append(Row(bus, (("dead",), *((None,),) * 5)))
                continue
            values = [(name, float(column[k])) for name, column in columns]
            mark = greatest([value for _, value in values[:4]])
            rows.append(Row(bus, tuple((_text(*value),) for value in values), mark))
        sentence = heading if blocks else f"{heading}: ampere"
        blocks.append(Block(sentence, (AMPERE,), tuple(rows)))
    return Table(_groups(), tuple(blocks))


def _ranges(states: Sequence[Levels]) -> tuple[Table, Table]:
    """The greatest currents and the least, each with the number of the state that gives it."""
    nominal = {bus: float(each.nominal[k]) for each in reversed(states) for k, bus in enumerate(each.buses)}
    buses = list(dict.fromkeys(bus for each in states for bus in each.buses))
    ranges = [(name, level_range(states, current, buses)) for name, _, current in CURRENTS]
    number = {each.state: k for k, each in enumerate(states, 1)}
    at = {bus: k for k, bus in enumerate(buses)}

    def table(word: str, ends: Callable[[LevelRange], tuple[Floats, tuple[str, ...]]]) -> Table:
        blocks = []
        for heading, inside in _zones({bus: nominal[bus] for bus in buses}):
            rows = []
            for bus in inside:
                cells: list[tuple[Cell, ...]] = []
                for name, each in ranges:
                    values, given_by = ends(each)
                    value, state = float(values[at[bus]]), given_by[at[bus]]
                    if not math.isfinite(value):
                        cells.append(("dead" if name == "k3" else "-", ""))
                    elif name == "k1_over_k3":
                        cells.append((_text(name, value), f"({number[state]})"))
                    else:
                        cells.append((value, f"({number[state]})"))
                rows.append(Row(bus, tuple(cells)))
            blocks.append(Block(heading, (AMPERE, STATE), tuple(rows)))
        return Table(_groups(), tuple(blocks), f"{word}: ampere, and the state that gives it")

    return (
        table("The greatest", lambda r: (r.greatest, r.greatest_state)),
        table("The least", lambda r: (r.least, r.least_state)),
    )


def levels_tree(
    networks: Sequence[Network], states: Sequence[Levels], fed: Sequence[Contributions] = ()
) -> dict[str, Any]:
    """Levels as plain values for JSON: ``buses`` of one state, or ``states`` and ``range``.

    With ``fed``, one a state, each bus lists its ``contributions``.
    """
    first = networks[0]
    tree = header(first)
    buses = [_buses(each) for each in states]
    for network, rows, each in zip(networks, buses, fed, strict=False):
        for b, row in enumerate(rows):
            row["contributions"] = contributions_tree(network.model, each, b)
    if len(states) == 1:
        tree["buses"] = buses[0]
    else:
        tree["scenario"] = "all"
        tree["states"] = [
            {"scenario": each.state, "buses": rows} for each, rows in zip(states, buses, strict=True)
        ]
        tree["range"] = _range_tree(states)
    tree["assumptions"] = list(
        once(text for n in networks for a in n.model.assumptions for text in a.sentences())
    )
    tree["warnings"] = list(once(text for n in networks for text in n.model.warnings))
    return tree


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _buses(levels: Levels) -> list[dict[str, Any]]:
    columns = [(name, current(levels)) for name, _, current in CURRENTS]
    out = []
    for k, bus in enumerate(levels.buses):
        row: dict[str, Any] = {
            "bus": bus,
            "nominal": float(levels.nominal[k]),
            "live": bool(levels.live[k]),
            "impedance": {f"z{s}": cartesian(levels.impedance[s, k]) for s in (1, 2, 0)},
        }
        out.append(row | {name: _finite(float(column[k])) for name, column in columns})
    return out


def _range_tree(states: Sequence[Levels]) -> list[dict[str, Any]]:
    buses = list(dict.fromkeys(bus for each in states for bus in each.buses))
    out: list[dict[str, Any]] = [{"bus": bus} for bus in buses]
    for name, _, current in CURRENTS:
        r = level_range(states, current, buses)
        for k, row in enumerate(out):
            row[name] = {
                "greatest": _finite(float(r.greatest[k])),
                "greatest_scenario": r.greatest_state[k] or None,
                "least": _finite(float(r.least[k])),
                "least_scenario": r.least_state[k] or None,
            }
    return out


def levels_rows(states: Sequence[Levels]) -> Iterator[QuantityColumn]:
    """Levels in long form, every state in turn, a column at a time."""
    for each in states:
        for name, _, current in CURRENTS:
            kind, quantity = KINDS[name]
            unit = "" if name == "k1_over_k3" else "A"
            values = list(map(_finite, np.asarray(current(each)).tolist()))
            yield QuantityColumn(each.buses, kind, quantity, values, unit, each.buses, each.state)
