"""The setting study as a tree for JSON and long rows for CSV; SI units throughout."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import msgspec

from seqfault.report.data import FORMAT, Quantity
from seqfault.report.settings_words import plain
from seqfault.studies.settings import Settings, asked, method
from seqfault.studies.settings_states import States
from seqfault.studies.settings_verdicts import Situation


def settings_tree(study: States, found: Settings) -> dict[str, Any]:
    """``found`` as plain values. What is infinite or not known is null; a reach that is null says in
    ``seen`` whether every resistance or none is seen."""
    tree: dict[str, Any] = msgspec.to_builtins(found)
    for row, each in zip(tree["sees"], found.sees, strict=True):
        for one, reach in zip(row["reach"], each.reach, strict=True):
            whole = reach.resistance == reach.resistance
            one["seen"] = "any" if reach.resistance == float("inf") else "up to" if whole else "none"
    return {
        "format": FORMAT,
        "case": {"title": study.case.title, "sha256": study.case.sha256},
        **tree,
        "assumptions": list(study.assumptions),
        "asked": list(asked(study)),
        "method": list(method(study, found)),
        "warnings": list(study.warnings),
    }


def settings_rows(found: Settings) -> Iterator[Quantity]:
    """``found`` in long form: the relay is the place, ``where`` the place of the fault."""
    for s in found.sees:
        yield from _rows(
            s.relay,
            s.duty,
            s.limit,
            ("verdict", s.verdict, ""),
            ("least seen", s.current, s.unit),
            ("pickup", s.pickup, s.unit),
            ("least seen over pickup", s.ratio, ""),
            ("wanted", s.demand, ""),
            ("greatest pickup that sees", s.greatest_pickup, s.unit),
        )
        for r in s.reach:
            far, where = plain(r.resistance), str(r.spot)
            name = "greatest fault resistance"
            yield Quantity(s.relay, s.duty, name, "", far, "ohm", None, where, r.limit.state)
        for c in s.covers:
            yield Quantity(s.relay, s.duty, "share of winding", "", c.share, "", None, c.winding, c.state)
        yield from _reasons(s.relay, s.duty, (*s.reasons, *s.doubts))
    for k in found.still:
        yield from _rows(
            k.relay,
            "keeps still",
            k.limit,
            ("verdict", k.verdict, ""),
            ("most seen", k.current, k.unit),
            ("residual of it", k.residual, k.unit),
            ("error of current transformers of it", k.error, k.unit),
            ("pickup", k.pickup, k.unit),
            ("pickup over most seen", k.ratio, ""),
            ("wanted", k.demand, ""),
            ("least pickup that keeps still", k.least_pickup, k.unit),
            ("held back by direction", k.held_back, k.unit),
        )
        yield from _reasons(k.relay, "keeps still", (*k.reasons, *k.doubts))
    for g in found.grades:
        kind = f"behind {g.first}"
        yield from _rows(
            g.backup,
            kind,
            g.limit,
            ("verdict", g.verdict, ""),
            ("least margin", g.margin, "s"),
            ("wanted", g.required, "s"),
            ("time of the first", g.time, "s"),
            ("time of the backup", g.backup_time, "s"),
            ("seen by the first", g.current, g.units[0]),
            ("seen by the backup", g.backup_current, g.units[1]),
        )
        yield from _reasons(g.backup, kind, (*g.reasons, *g.doubts))
    for w in found.withstand:
        kind = f"before {w.neutral} is spent"
        yield from _rows(
            w.relay,
            kind,
            w.limit,
            ("verdict", w.verdict, ""),
            ("current of the neutral", w.current, "A"),
            ("time to clear", w.time, "s"),
            ("withstands", w.allowed, "s"),
            ("left on unseen", w.stays, "A"),
        )
        yield from _reasons(w.relay, kind, (*w.reasons, *w.doubts))
    for m in found.screens:
        kind = f"before the screen of {m.line} is spent"
        yield from _rows(
            m.relay,
            kind,
            m.limit,
            ("verdict", m.verdict, ""),
            ("current of the screen", m.current, "A"),
            ("time to clear", m.time, "s"),
            ("withstands", m.allowed, "s"),
        )
        yield from _reasons(m.relay, kind, (*m.reasons, *m.doubts))
    for b in found.blind_places:
        where = f"{b.place}, {b.opened} open" if b.opened else b.place
        yield Quantity("no relay", b.kind, "blind", "", b.reason, "", None, where, b.state)
        yield Quantity(
            "no relay", b.kind, "fault resistance", "", b.resistance, "ohm", None, where, b.state
        )
    for blind in found.blind_relays:
        for place in blind.places:
            yield Quantity(blind.relay, "blind", "blind", "", blind.reason, "", None, place, blind.state)
    yield Quantity("all", "", "verdict", "", found.verdict, "", None, "", "all")


def _rows(
    relay: str, kind: str, limit: Situation | None, *values: tuple[str, float | str | None, str]
) -> Iterator[Quantity]:
    where = "" if limit is None else limit.place
    if limit is not None and limit.opened:
        where += f", {limit.opened} open"
    state = "" if limit is None else limit.state
    for name, value, unit in values:
        yield Quantity(relay, kind, name, "", plain(value), unit, None, where, state)
    if limit is not None:
        yield Quantity(relay, kind, "deciding case", "", str(limit), "", None, where, state)


def _reasons(relay: str, kind: str, reasons: tuple[str, ...]) -> Iterator[Quantity]:
    for reason in reasons:
        yield Quantity(relay, kind, "reason", "", reason, "", None, "", "")
