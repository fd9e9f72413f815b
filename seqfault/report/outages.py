"""Fault levels with elements out, as a page, a tree and rows."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

from seqfault.faults.network import Network
from seqfault.model.elements import Floats, Ints
from seqfault.report.data import Quantity, header
from seqfault.report.numbers import kilovolt
from seqfault.report.tables import (
    AMPERE,
    CAUTION,
    Block,
    Cell,
    Column,
    Group,
    Page,
    Row,
    Sentences,
    Table,
    Title,
)
from seqfault.studies.outages import CURRENTS, Outage, OutageSurvey

HEADINGS = {
    "k3": ("three-", "phase", "k3"),
    "k2": ("line-", "line", "k2"),
    "k2e": ("line-line-", "ground", "k2E"),
    "k1": ("line-", "ground", "k1"),
    "k2e_earth": ("k2E", "to earth", "3I0"),
}
KINDS = {
    "k3": ("three-phase", "fault current"),
    "k2": ("line-line", "fault current"),
    "k2e": ("line-line-ground", "fault current"),
    "k1": ("line-ground", "fault current"),
    "k2e_earth": ("line-line-ground", "current to earth"),
}
WHOLE = "nothing out"
FEW = 20
"""Outages told by name where there are more."""


def outages_page(network: Network, survey: OutageSurvey) -> Page:
    """The page of ``survey``, made on ``network``."""
    model = network.model
    voltage = abs(complex(network.case.prefault.voltage.value))
    conditions = (
        f"bolted faults at {len(survey.buses)} buses, before them {voltage:.2f} of nominal,"
        f" {len(survey.outages)} outages on top of state: {survey.state}"
    )
    if model.machine != "subtransient":
        conditions += f", {model.machine} reactances"
    greatest, least = survey.extreme(least=False), survey.extreme(least=True)
    named = sorted({int(k) for _, at in (greatest, least) for k in at.ravel().tolist() if k >= 0})
    key = tuple(f"({k}) {outage_name(survey, k)}" for k in named)
    return Page(
        (
            Title("", model.title or "Fault levels with elements out", conditions),
            _table(survey, "The greatest: ampere, and the outage that gives it", *greatest),
            _table(survey, "The least: ampere, and the outage that gives it", *least),
            Sentences("Out", key),
            Sentences("How", tuple(_account(survey))),
            Sentences("Assumed", tuple(map(str, model.assumptions))),
            Sentences("", (CAUTION,), quiet=True),
        )
    )


def outage_name(survey: OutageSurvey, number: int) -> str:
    """The elements of outage ``number``, counted from 1; 0 is the network as it stands."""
    return " and ".join(survey.outages[number - 1]) if number else WHOLE


def _table(survey: OutageSurvey, heading: str, value: Floats, at: Ints) -> Table:
    blocks = []
    nominal = survey.nominal.tolist()
    for volt in sorted(set(nominal), reverse=True):
        rows = []
        for k, bus in enumerate(survey.buses):
            if nominal[k] != volt:
                continue
            cells: list[tuple[Cell, ...]] = []
            for c, name in enumerate(CURRENTS):
                if at[c, k] < 0:
                    cells.append(("dead" if name == "k3" else "-", ""))
                else:
                    cells.append((float(value[c, k]), f"({at[c, k]})"))
            rows.append(Row(bus, tuple(cells)))
        blocks.append(Block(kilovolt(volt), (AMPERE, Column()), tuple(rows)))
    return Table(tuple(Group(HEADINGS[name]) for name in CURRENTS), tuple(blocks), heading)


def _account(survey: OutageSurvey) -> Iterator[str]:
    """How the outages were solved, what they cut off, and which have no answer."""
    updated = len(survey.outages) - len(survey.rebuilt)
    yield (
        f"{updated} outages by updates of one factorisation, {len(survey.rebuilt)} by building the network"
        " without the element"
    )
    for reason in dict.fromkeys(why for _, why in survey.rebuilt):
        yield f"built anew, {reason}: {_listed([o for o, why in survey.rebuilt if why == reason])}"
    cut = survey.dead[1:] & ~survey.dead[0]
    for k, bus in enumerate(survey.buses):
        if survey.dead[0, k]:
            yield f"{bus} is dead with nothing out"
        elif cut[:, k].any():
            which = [survey.outages[j] for j in cut[:, k].nonzero()[0].tolist()]
            yield f"{bus} is dead, and not counted, without {_listed(which)}"
    for outage, why in survey.failed:
        yield f"no answer without {' and '.join(outage)}, not counted: {' '.join(why.split())}"


def _listed(outages: list[Outage]) -> str:
    names = ["+".join(outage) for outage in outages]
    more = f" and {len(names) - FEW} more" if len(names) > FEW else ""
    return ", ".join(names[:FEW]) + more


def outages_tree(network: Network, survey: OutageSurvey) -> dict[str, Any]:
    """The survey as plain values for JSON: every bus, its extremes, and every outage's currents."""
    ends = {"greatest": survey.extreme(least=False), "least": survey.extreme(least=True)}
    buses = []
    for k, bus in enumerate(survey.buses):
        row: dict[str, Any] = {"bus": bus, "nominal": float(survey.nominal[k])}
        for c, name in enumerate(CURRENTS):
            row[name] = {}
            for word, (value, at) in ends.items():
                number = int(at[c, k])
                row[name][word] = _finite(float(value[c, k]))
                row[name][f"{word}_without"] = None if number < 0 else _elements(survey, number)
        buses.append(row)
    rebuilt, failed = dict(survey.rebuilt), dict(survey.failed)
    outages = [
        {
            "without": _elements(survey, j),
            "rebuilt": rebuilt.get(survey.outages[j - 1]) if j else None,
            "no_answer": failed.get(survey.outages[j - 1]) if j else None,
            **{
                name: dict(zip(survey.buses, map(_finite, survey.current[j, c].tolist()), strict=True))
                for c, name in enumerate(CURRENTS)
            },
        }
        for j in range(len(survey.outages) + 1)
    ]
    return {
        **header(network),
        "range": buses,
        "outages": outages,
        "updated": len(survey.outages) - len(survey.rebuilt),
        "rebuilt": len(survey.rebuilt),
        "assumptions": [text for a in network.model.assumptions for text in a.sentences()],
        "warnings": list(dict.fromkeys((*network.model.warnings, *survey.warnings))),
    }


def _elements(survey: OutageSurvey, number: int) -> list[str]:
    return list(survey.outages[number - 1]) if number else []


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def outages_rows(survey: OutageSurvey) -> Iterator[Quantity]:
    """The survey in long form, the network as it stands first, then every outage."""
    for j in range(len(survey.outages) + 1):
        state = f"{survey.state}, without {outage_name(survey, j)}" if j else survey.state
        for c, name in enumerate(CURRENTS):
            kind, quantity = KINDS[name]
            for bus, value in zip(survey.buses, survey.current[j, c].tolist(), strict=True):
                yield Quantity(bus, kind, quantity, "", _finite(value), "A", None, bus, state)
