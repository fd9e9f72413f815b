"""A proposal of settings as a page, a tree and rows: what, what binds it, and the study that proves it."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import msgspec

from seqfault.report.data import Quantity
from seqfault.report.numbers import figures
from seqfault.report.settings import settings_page
from seqfault.report.settings_data import settings_rows, settings_tree
from seqfault.report.settings_sheet import sheet_parts, sheet_rows, sheet_values
from seqfault.report.settings_words import plain, setting
from seqfault.report.tables import (
    CAUTION,
    TEXT,
    Block,
    Fact,
    Facts,
    Group,
    Page,
    Part,
    Row,
    Sentences,
    Table,
    Title,
    once,
)
from seqfault.studies.settings_proposal import Proposal, Proposed
from seqfault.studies.settings_sheet import setting_sheet
from seqfault.studies.settings_states import States

HOW = (
    "least sum of operate times, each at the least current that a relay must see, and then the highest"
    " pickups; stages and directions as they stand"
)


def proposal_page(study: States, proposal: Proposal) -> Page:
    """The page of ``proposal`` for the case of ``study``."""
    title = Title(study.case.title, "Proposed settings", HOW)
    assumed = Sentences("Assumed of the proposal", proposal.assumed)
    if proposal.study is None or proposal.proof is None:
        against = Sentences("No settings meet every condition. These contradict", proposal.contradictions)
        return Page((title, against, assumed, Sentences("", (CAUTION,), quiet=True)))
    parts: list[Part] = [title, _changes(proposal)]
    parts.append(Sentences("What binds the pickup, what the time", tuple(_binding(proposal))))
    if proposal.contradictions:
        parts.append(Sentences("Not met all the same", proposal.contradictions))
    parts += sheet_parts(setting_sheet(proposal.study))
    parts.append(Facts(tuple(_facts(proposal))))
    parts.append(assumed)
    proof = settings_page(proposal.study, proposal.proof).parts
    heading = Title("", "The study with these settings", f"verdict: {proposal.proof.verdict}")
    return Page((*parts, heading, *proof[1:]))


def _time(row: Proposed, time: float | None) -> str:
    if time is None:
        return "to be set"
    return f"{time:g} s" if row.curve == "definite" else f"× {time:g}"


def _changes(proposal: Proposal) -> Table:
    rows = []
    for row in proposal.rows:
        cells = (
            setting(row.was.pickup, row.unit),
            setting(row.setting.pickup, row.unit),
            _time(row, row.was.time),
            _time(row, row.setting.time),
            "definite time" if row.curve == "definite" else row.curve,
        )
        rows.append(Row(row.relay, tuple((cell,) for cell in cells)))
    columns = (("pickup", "was"), ("", "proposed"), ("time", "was"), ("", "proposed"), ("curve",))
    groups = tuple(Group(column, left=True) for column in columns)
    return Table(groups, (Block("", (TEXT,), tuple(rows)),), heading="What to set")


def _binding(proposal: Proposal) -> Iterator[str]:
    for row in proposal.rows:
        yield f"{row.relay}, pickup: {row.pickup_binds}"
        yield f"{row.relay}, time: {row.time_binds}"


def _facts(proposal: Proposal) -> Iterator[Fact]:
    was = "" if math.isnan(proposal.was) else f"as it stands {_seconds(proposal.was)}"
    yield Fact("Sum of times", _seconds(proposal.total), was)
    tried = "every pickup of the scales" if proposal.whole else "the pickups of one relay after the other"
    yield Fact("Tried", tried, "" if proposal.whole else "a smaller sum is possible, though not likely")
    assert proposal.proof is not None
    yield Fact("Verdict", proposal.proof.verdict, "of the study below, made with these settings")


def _seconds(value: float) -> str:
    return "unlimited" if math.isinf(value) else f"{figures(value)} s"


def proposal_tree(study: States, proposal: Proposal) -> dict[str, Any]:
    """``proposal`` as plain values; ``study`` in it is the proof."""
    shown = proposal.study or study
    tree: dict[str, Any] = {
        "format": 1,
        "case": {"title": study.case.title, "sha256": study.case.sha256},
        "proposed": [msgspec.to_builtins(row) for row in proposal.rows],
        "contradictions": list(proposal.contradictions),
        "sum_of_times": proposal.total,
        "sum_of_times_as_it_stands": proposal.was,
        "every_pickup_tried": proposal.whole,
        "sheet": sheet_values(setting_sheet(shown)) if proposal.study is not None else [],
        "study": None,
        "assumptions": list(once((*study.assumptions, *proposal.assumed))),
        "warnings": list(study.warnings),
    }
    if proposal.study is not None and proposal.proof is not None:
        whole = settings_tree(proposal.study, proposal.proof)
        tree["study"] = {k: v for k, v in whole.items() if k not in ("format", "case", "warnings")}
    return tree


def proposal_rows(proposal: Proposal) -> Iterator[Quantity]:
    """``proposal`` in long form, the study that proves it after it."""
    for text in proposal.contradictions:
        yield Quantity("all", "proposal", "contradiction", "", text, "", None, "", "all")
    for row in proposal.rows:
        definite = row.curve == "definite"
        what, unit = ("delay", "s") if definite else ("multiplier", "")
        values: tuple[tuple[str, float | str | None, str], ...] = (
            ("pickup", row.setting.pickup, row.unit),
            ("pickup before", row.was.pickup, row.unit),
            (what, row.setting.time, unit),
            (f"{what} before", row.was.time, unit),
            ("least pickup", row.least, row.unit),
            ("greatest pickup", row.greatest, row.unit),
            ("pickup is bound by", row.pickup_binds, ""),
            ("time is bound by", row.time_binds, ""),
        )
        for name, value, of in values:
            yield Quantity(row.relay, "proposal", name, "", plain(value), of, None, "", "all")
    yield Quantity("all", "proposal", "sum of times", "", plain(proposal.total), "s", None, "", "all")
    if proposal.study is not None and proposal.proof is not None:
        yield from sheet_rows(setting_sheet(proposal.study))
        yield from settings_rows(proposal.proof)
