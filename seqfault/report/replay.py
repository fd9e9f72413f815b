"""A fault in time as a page: what happens when, whether it is cleared, how near the other relays came."""

from __future__ import annotations

import math
from collections.abc import Iterator

from seqfault.case.wording import listed
from seqfault.equations.relay_curves import EFFECTIVE_RANGE
from seqfault.errors import quoted
from seqfault.faults.network import Network
from seqfault.report.fault import fault_title
from seqfault.report.operate import acting, closing, resting, sees, table, when
from seqfault.report.settings_words import size
from seqfault.report.tables import Page, Part, Sentences
from seqfault.studies.operate import said_of
from seqfault.studies.relay_readings import Reading
from seqfault.studies.replay import Event, Replay
from seqfault.studies.replay_said import feeding, overrun, replay_assumed, unsure


def replay_page(network: Network, found: Replay) -> Page:
    """The page of ``found``, asked of ``network``."""
    parts: list[Part] = [fault_title(network, found.first.solution), *_events(found)]
    parts.append(Sentences("", tuple(ending(found))))
    if found.cleared is None:
        parts.append(Sentences("Why does no relay end it?", tuple(_why(found))))
    parts += _ways(found)
    parts += acting(found.first, "Who acts on the fault as it stands at first?")
    parts += resting(found.first.resting, "Who does not, and why?")
    parts += closing(found.first, tuple(_said(found)), replay_assumed(found))
    return Page(tuple(parts))


def _said(found: Replay) -> Iterator[str]:
    yield from said_of(found.first)
    names = unsure(found)
    if names:
        yield (
            f"when {listed(map(quoted, names), 'and')} operated, less than {EFFECTIVE_RANGE[0]:g} times the"
            " pickup was seen: the times from there on are of the formula alone"
        )


def _events(found: Replay) -> Iterator[Part]:
    if found.dead:
        return
    left = size(found.events[0].left.phase if found.events else found.left.phase, "A")
    earth = size(found.events[0].left.earth if found.events else found.left.earth, "A")
    rows = [("0 s", ("the fault begins", left, earth))]
    for event in found.events:
        rows.append(
            (
                when(event.time),
                (told(event), size(event.left.phase, "A"), size(event.left.earth, "A")),
            )
        )
    columns = (("",), ("left in the", "fault, phase"), ("left to", "earth, 3I0"))
    yield table("What happens, and when?", columns, rows)


def told(event: Event) -> str:
    """``N-earth operates and trips N@main``."""
    match event.what:
        case "opens":
            late = ", though the fault is cleared" if event.late else ""
            return f"{event.breaker} opens, tripped by {event.relay}{late}"
        case "stays closed":
            return f"{event.relay} operates; {event.breaker} stays closed"
        case "opens no more":
            return f"{event.relay} operates; {event.breaker} is open already"
        case _:
            return f"{event.relay} operates" + (f", trips {event.breaker}" if event.breaker else "")


def ending(found: Replay) -> Iterator[str]:
    """How it ends."""
    if found.dead:
        yield "Nothing feeds the place in this state: no current flows, and there is nothing to clear."
        return
    if found.cleared is not None:
        opened = [b for b, time in found.opened.items() if time <= found.cleared]
        yield (
            f"Cleared {when(found.cleared)} after the fault began, with {listed(opened, 'and')} open:"
            " no infeed or generator feeds it any more."
        )
        if found.left.phase > 0:
            yield f"{size(found.left.phase, 'A')} still flow into it, from neither of them."
        late = [event.breaker for event in found.events if event.late]
        if late:
            yield f"More opens than had to: {listed(late, 'and')}, whose relays had operated by then."
    elif found.left.phase > 0:
        yield (
            f"NOT cleared: {size(found.left.phase, 'A')} still flow into the fault,"
            f" {size(found.left.earth, 'A')} of it to earth, and no relay is left to end it."
        )
    else:
        yield (
            "NOT cleared: the place is still live, and so little flows into the fault that no relay"
            " sees it."
        )
    for way in overrun(found):
        yield (
            f"{way.relay} lacked {1000 * way.lacking:.1f} ms when its current fell, at {when(way.time)}:"
            f" less than the overshoot of {found.first.protection.demands.overshoot:g} s, so it may trip"
            " too."
        )


def _why(found: Replay) -> Iterator[str]:
    names = feeding(found)
    if names:
        yield f"still feeding it: {listed(names, 'and')}"
    operated: dict[str, list[Event]] = {}
    for event in found.events:
        if event.what != "opens":
            operated.setdefault(event.relay, []).append(event)
    for each in found.last:
        yield f"{each.relay.name}: {_state(each, operated.get(each.relay.name, []))}"


def _state(reading: Reading, events: list[Event]) -> str:
    now = "" if math.isnan(reading.value) else f"sees {sees(reading)}, "
    if not events:
        return f"{now}{reading.why}" + (f"; {reading.because}" if reading.because else "")
    held = [event.breaker for event in events if event.what == "stays closed"]
    text = f"operated at {when(events[0].time)}"
    if not any(event.breaker for event in events):
        return f"{text}; it trips nothing"
    if held:
        return f"{text}; {listed(held, 'and')} stayed closed"
    breakers = [event.breaker for event in events if event.breaker]
    verb = "is" if len(breakers) == 1 else "are"
    return f"{text}; {listed(breakers, 'and')} {verb} open, and the fault is still fed past it"


def _ways(found: Replay) -> Iterator[Part]:
    """How far relays came that did not operate."""
    if not found.ways:
        return
    rows = [
        (
            way.relay,
            (f"{100 * way.share:.0f} %", when(way.time), when(way.lacking)),
        )
        for way in sorted(found.ways, key=lambda way: -way.share)
    ]
    columns = (("of its way", "at most"), ("at",), ("still", "to go"))
    yield table("How near did the others come?", columns, rows)
