"""What relays do about a fault, as a page: who acts, in which order, and why the others do not."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from seqfault.case.wording import listed
from seqfault.faults.network import Network
from seqfault.report.fault import fault_title
from seqfault.report.numbers import figures
from seqfault.report.settings_words import seconds, size
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
    once,
)
from seqfault.studies.fault_left import left_of, standing
from seqfault.studies.operate import Operation, assumed_of, said_of
from seqfault.studies.relay_readings import SYMBOLS, Reading


def operate_page(network: Network, found: Operation) -> Page:
    """The page of ``found``, asked of ``network``."""
    parts: list[Part] = [fault_title(network, found.solution)]
    parts += acting(found, "Which relays act, in what order, and when?")
    parts.append(Sentences("", tuple(order(found))))
    parts += resting(found.resting, "Which do not act, and why?")
    parts += closing(found, tuple(said_of(found)), ())
    return Page(tuple(parts))


def closing(found: Operation, said: Sequence[str], more: Sequence[str]) -> Iterator[Part]:
    """The fault's own figures, notes, ``more`` behind the assumptions, and the caution."""
    yield Facts(tuple(_facts(found)))
    yield Sentences("Note", once((*said, *found.solution.notes)))
    yield Sentences("Assumed", once((*assumed_of(found), *more)))
    yield Sentences("", (CAUTION,), quiet=True)


def table(
    heading: str, columns: Sequence[tuple[str, ...]], rows: Sequence[tuple[str, Sequence[Cell]]]
) -> Table:
    """A table of texts: a label and a cell a column."""
    groups = tuple(Group(column, left=True) for column in columns)
    made = tuple(Row(label, tuple((cell,) for cell in cells)) for label, cells in rows)
    return Table(groups, (Block("", (TEXT,), made),), heading=heading)


def called(reading: Reading) -> str:
    """A relay and its device number, ``N-earth  51G``."""
    return f"{reading.relay.name}  {reading.relay.device}"


def sees(reading: Reading) -> str:
    """What it measures, primary, ``312 A 3I0``."""
    if math.isnan(reading.value):
        return "-"
    return f"{size(reading.value, reading.relay.unit)} {SYMBOLS[reading.relay.measures]}"


def times(reading: Reading) -> str:
    """How many times its pickup."""
    return "-" if math.isnan(reading.multiple) else figures(reading.multiple, 3, 3)


def acting(found: Operation, heading: str) -> Iterator[Part]:
    """The relays that act, in order; nothing where none does."""
    if not found.acting:
        return
    rows = [
        (
            called(each),
            (
                sees(each),
                "-" if each.secondary is None else size(each.secondary, each.relay.unit),
                times(each),
                when(each.time) + (" fast" if each.fast < each.main else ""),
                when(each.cleared),
                ", ".join(found.trips.of[each.relay.name]) or "nothing",
            ),
        )
        for each in found.acting
    ]
    columns = (
        ("sees", "primary"),
        ("", "secondary"),
        ("times", "pickup"),
        ("relay", "acts in"),
        ("breaker", "open in"),
        ("", "trips"),
    )
    yield table(heading, columns, rows)


def order(found: Operation) -> Iterator[str]:
    """What to take away from the order of tripping."""
    if not standing(found.solution, ()):
        yield "Nothing feeds the place in this state: no current flows, and there is nothing to clear."
        return
    if not found.acting:
        yield "No relay acts on this fault: it stands until somebody finds it."
        return
    first, *others = found.acting
    breakers = found.trips.of[first.relay.name]
    opens = (
        f"; {listed(breakers, 'and')} would be open {when(first.cleared)} after the fault began"
        if breakers
        else ""
    )
    yield f"{first.relay.name} acts first, in {when(first.time)}{opens}."
    if not others:
        yield f"No other relay acts: nothing backs up {first.relay.name} for this fault."
        return
    early = [each for each in others if each.time <= first.cleared]
    if early:
        names = listed([each.relay.name for each in early], "and")
        yield (
            f"{names} {'act' if len(early) > 1 else 'acts'} before that breaker is open, if what each sees"
            " stays as it is."
        )
    later = next((each for each in others if each not in early), None)
    if later is not None:
        yield (
            f"{later.relay.name} comes next, {when(later.time - first.cleared)} after the first breaker;"
            " it acts only where the fault still stands, with what it sees then (--replay)."
        )


def resting(readings: Sequence[Reading], heading: str) -> Iterator[Part]:
    """Relays that do not act, and why."""
    if not readings:
        return
    rows = [
        (
            called(each),
            (sees(each), size(each.relay.pickup.primary, each.relay.unit), times(each), each.why),
        )
        for each in readings
    ]
    yield table(heading, (("sees",), ("pickup",), ("times", "that"), ("why",)), rows)
    yield Sentences("", tuple(because(readings)))


def because(readings: Sequence[Reading]) -> Iterator[str]:
    """What there is to say on why relays rest, those with one reason together."""
    together: dict[str, list[str]] = {}
    for each in readings:
        if each.because:
            together.setdefault(each.because, []).append(each.relay.name)
    for reason, names in together.items():
        yield f"{listed(names, 'and')}: {reason}."


def when(time: float) -> str:
    """``0.393 s``, ``12.3 s``, ``328 s``."""
    return seconds(time) if not 10 <= time < math.inf else f"{figures(time)} s"


def _facts(found: Operation) -> Iterator[Fact]:
    left = left_of(found.solution, ())
    yield Fact("Fault current", size(left.phase, "A"), "the greatest phase current")
    if any(state.fault.earth for state in found.solution.faults):
        yield Fact("To earth", size(left.earth, "A"), "3I0 into the fault")
