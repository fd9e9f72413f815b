"""The setting study as a page: four questions, each with the case that decides."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterator, Sequence

from seqfault.report.numbers import counted, figures
from seqfault.report.settings_words import no_less, no_more, ohms_up_to, over, seconds, size
from seqfault.report.tables import (
    CAUTION,
    TEXT,
    Block,
    Cell,
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
from seqfault.studies.settings import Settings, asked, method
from seqfault.studies.settings_blind import BlindPlace
from seqfault.studies.settings_places import Spot
from seqfault.studies.settings_states import States
from seqfault.studies.settings_verdicts import WORST

MANY = 60
"""Places on a page; with more, the least of each bus, line and winding is shown."""


def settings_page(study: States, found: Settings) -> Page:
    """The page of ``found``, judged on ``study``."""
    parts: list[Part] = [_title(study, found), Sentences("What is asked", asked(study))]
    parts += _sees(found)
    parts += _reach(found)
    parts += _still(found)
    parts += _grades(found)
    parts += _withstand(found)
    parts += _screens(found)
    parts += _blind(found)
    parts += _doubts(found)
    parts += [
        Facts(tuple(_facts(found))),
        Sentences("Assumed", once((*study.assumptions, *method(study, found)))),
        Sentences("", (CAUTION,), quiet=True),
    ]
    return Page(tuple(parts))


def _title(study: States, found: Settings) -> Title:
    states = counted(len(found.states), "state")
    hot = any(state.hot for state in study.states)
    how = f"{states}, {counted(found.places, 'place')}" + (", resistors cold and hot" if hot else "")
    relays = counted(sum(not relay.out for relay in study.relays.values()), "relay")
    return Title(study.case.title, f"Earth-fault settings  {relays}", f"{how}: {found.verdict}")


Rows = Sequence[tuple[str, Sequence[Cell]]]


def _table(heading: str, columns: Sequence[tuple[str, ...]], rows: Rows) -> Table:
    groups = tuple(Group(column, left=True) for column in columns)
    made = tuple(Row(label, tuple((cell,) for cell in cells)) for label, cells in rows)
    return Table(groups, (Block("", (TEXT,), made),), heading=heading)


def _why(label: str, limit: object, reasons: tuple[str, ...]) -> str:
    where = f"{limit}" if limit is not None else ""
    return f"{label}: " + "; ".join(text for text in (where, *reasons) if text)


def _sees(found: Settings) -> Iterator[Part]:
    if not found.sees:
        return
    rows = [
        (
            each.relay,
            (
                each.duty,
                size(each.current, each.unit),
                size(each.pickup, each.unit),
                over(each.ratio, each.demand),
                each.verdict,
            ),
        )
        for each in found.sees
    ]
    columns = (("what it",), ("least", "seen"), ("pickup",), ("times,", "wanted"), ("verdict",))
    yield _table("Does it see what it must?", columns, rows)
    said = []
    for each in found.sees:
        mend: tuple[str, ...] = ()
        if each.verdict == "fail" and each.greatest_pickup > 0:
            mend = (f"it would see with a pickup of {no_more(each.greatest_pickup, each.unit)} or less",)
        said.append(_why(f"{each.relay}, {each.duty}", each.limit, (*each.reasons, *mend)))
    said += [
        f"{each.relay} covers {100 * cover.share:.1f} % of the winding {cover.winding}, counted from its"
        f" terminals (state {cover.state}, resistors {cover.resistors})"
        for each in found.sees
        for cover in each.covers
    ]
    yield Sentences("The least is seen in", tuple(said))


def _reach(found: Settings) -> Iterator[Part]:
    """The greatest resistance seen: places as rows, relays across."""
    seen: dict[str, dict[Spot, float]] = {}
    for each in found.sees:
        for reach in each.reach:
            seen.setdefault(each.relay, {})[reach.spot] = reach.resistance
    if not seen:
        return
    places = list(dict.fromkeys(spot for own in seen.values() for spot in own))
    labels: dict[str, list[Spot]] = {}
    for spot in places:
        labels.setdefault(str(spot) if len(places) <= MANY else spot.owner, []).append(spot)
    rows = []
    for label, spots in labels.items():
        cells: list[Cell] = []
        for own in seen.values():
            values = [own[spot] for spot in spots if spot in own]
            cells.append(ohms_up_to(min(values, key=_rank)) if values else "")
        rows.append((label, cells))
    which = "at each place" if len(places) <= MANY else "at the worst place of each"
    heading = f"Through what resistance is a fault still seen? ohm, {which}, whatever the kind, state, heat"
    yield _table(heading, [(name,) for name in seen], rows)


def _rank(ohms: float) -> float:
    return -1.0 if math.isnan(ohms) else ohms


def _still(found: Settings) -> Iterator[Part]:
    if not found.still:
        return
    rows = [
        (
            each.relay,
            (
                size(each.current, each.unit),
                size(each.error, each.unit) if each.error else "",
                size(each.pickup, each.unit),
                over(each.ratio, each.demand),
                each.verdict,
            ),
        )
        for each in found.still
    ]
    columns = (("most", "seen"), ("of it CT", "error"), ("pickup",), ("over that,", "wanted"), ("verdict",))
    yield _table("Does it keep still for what is not its own?", columns, rows)
    said = []
    for each in found.still:
        text = _why(each.relay, each.limit if each.current else "nothing reaches it", each.reasons)
        if each.verdict == "fail" and 0 < each.least_pickup < math.inf:
            text += (
                f"; it would keep still with a pickup of {no_less(each.least_pickup, each.unit)} or more"
            )
        if each.held_back:
            text += f"; its direction alone holds it back from {size(each.held_back, each.unit)}"
        said.append(text)
    yield Sentences("The most is seen in", tuple(said))


def _grades(found: Settings) -> Iterator[Part]:
    if not found.grades:
        return
    rows = [
        (
            f"{each.backup} behind {each.first}",
            (
                seconds(each.time),
                seconds(each.backup_time),
                seconds(each.margin),
                seconds(each.required) if each.required < math.inf else "-",
                each.verdict,
            ),
        )
        for each in found.grades
    ]
    columns = (("first",), ("backup",), ("margin",), ("wanted",), ("verdict",))
    yield _table("Does it wait for those it backs up?", columns, rows)
    said = []
    for each in found.grades:
        seen = ""
        if each.limit is not None:
            seen = (
                f", {each.first} sees {size(each.current, each.units[0])},"
                f" {each.backup} {size(each.backup_current, each.units[1])}"
            )
        limit = None if each.limit is None else f"{each.limit}{seen}"
        short = each.required - each.margin
        early = (f"the backup acts {no_less(short, 's')} too early",) if 0 < short < math.inf else ()
        said.append(_why(f"{each.backup} behind {each.first}", limit, (*each.reasons, *early)))
    yield Sentences("The least margin is left in", tuple(said))


def _withstand(found: Settings) -> Iterator[Part]:
    if not found.withstand:
        return
    rows = [
        (
            f"{each.neutral} by {each.relay}",
            (
                size(each.current, "A"),
                seconds(each.time),
                seconds(each.allowed),
                size(each.stays, "A"),
                each.verdict,
            ),
        )
        for each in found.withstand
    ]
    columns = (("carries",), ("for",), ("withstands",), ("left on", "unseen"), ("verdict",))
    yield _table("Does the neutral last until the backup has cleared?", columns, rows)
    said = tuple(_why(f"{w.neutral} by {w.relay}", w.limit, w.reasons) for w in found.withstand)
    yield Sentences("The hardest case is", said)


def _screens(found: Settings) -> Iterator[Part]:
    if not found.screens:
        return
    rows = [
        (
            f"{each.line} by {each.relay}",
            (size(each.current, "A"), seconds(each.time), seconds(each.allowed), each.verdict),
        )
        for each in found.screens
    ]
    columns = (("carries",), ("for",), ("withstands",), ("verdict",))
    yield _table("Do the screens of the cables last as long?", columns, rows)
    said = tuple(_why(f"{w.line} by {w.relay}", w.limit, w.reasons) for w in found.screens)
    yield Sentences("The hardest case is", said)


def _blind(found: Settings) -> Iterator[Part]:
    """Places no relay sees, those with one reason together."""
    said = []
    together: dict[tuple[str, float, bool], list[BlindPlace]] = {}
    for place in found.blind_places:
        together.setdefault((place.reason, place.resistance, place.guarded), []).append(place)
    for (reason, ohm, guarded), places in together.items():
        names = once(f"{p.place} with {p.opened} open" if p.opened else p.place for p in places)
        more = f" and {len(names) - 6} more" if len(names) > 6 else ""
        how = f" through {figures(ohm)} ohm" if ohm else ""
        states = ", ".join(once(p.state for p in places))
        own = "" if guarded else " (not counted in the verdict)"
        said.append(f"{', '.join(names[:6])}{more}{how}, state {states}: {reason}{own}")
    apart: dict[tuple[tuple[str, ...], str], list[str]] = {}
    for relay in found.blind_relays:
        apart.setdefault((relay.places, relay.reason), []).append(relay.relay)
    for (buses, reason), relays in apart.items():
        every = {each.relay for each in found.still} <= set(relays)
        where = "any relay" if every else ", ".join(once(relays))
        said.append(f"nothing of {', '.join(buses)} shows at {where}: {reason}")
    yield Sentences("What does no relay see?", tuple(said) or ("every place studied is seen by a relay",))


def _doubts(found: Settings) -> Iterator[Part]:
    """What several verdicts rest on, said once."""
    users: dict[str, list[str]] = {}
    rests = [(each.relay, each.doubts) for each in found.sees]
    rests += [(each.relay, each.doubts) for each in found.still]
    for relay, doubts in rests:
        for doubt in doubts:
            users.setdefault(doubt, []).append(relay)
    said = tuple(f"{reason} ({', '.join(once(names))})" for reason, names in users.items())
    yield Sentences("Not proven, since it rests on", said)


def _facts(found: Settings) -> Iterator[Fact]:
    groups = (
        ("See", found.sees),
        ("Keep still", found.still),
        ("Grade", found.grades),
        ("Neutral lasts", found.withstand),
        ("Screens last", found.screens),
    )
    for label, each in groups:
        counts = Counter(item.verdict for item in each)
        if counts:
            told = [f"{counts[verdict]} {verdict}" for verdict in reversed(WORST) if counts[verdict]]
            yield Fact(label, f"{sum(counts.values())}", ", ".join(told))
    counted_blind = sum(place.guarded for place in found.blind_places)
    if counted_blind:
        yield Fact("Blind", f"{counted_blind}", "faults no relay sees, in networks that have relays")
    yield Fact("Verdict", found.verdict, "the worst of all")
