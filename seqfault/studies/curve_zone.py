"""Which relays can be drawn on one axis of current, and what their amperes are there.

Amperes of relays at other voltages are referred by the ratio of nominal voltages where that tells the
truth: negative-sequence currents through any transformer, phase currents for a fault that is balanced.
Earth currents do not pass a delta, and phase currents of an unbalanced fault change their pattern in it.
"""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING

import msgspec

from seqfault.case.quantities import Dimensions, read_quantity
from seqfault.case.records import Case
from seqfault.case.relay_sites import Places
from seqfault.errors import QuantityError, RequestError, quoted
from seqfault.studies.relay_readings import Reading
from seqfault.studies.relays import Relay

if TYPE_CHECKING:
    from seqfault.studies.settings_sheet import SheetRow


class Mark(msgspec.Struct, frozen=True):
    """What a relay sees: ``current`` A at the voltage of the chart, ``time`` s, infinite where it rests."""

    current: float
    time: float
    text: str


class Drawn(msgspec.Struct, frozen=True):
    """A relay on the chart: its own amperes times ``scale`` are those of the chart."""

    relay: Relay
    scale: float
    marks: tuple[Mark, ...]


class Curves(msgspec.Struct, frozen=True):
    """Relays on one axis at ``voltage`` (V), and sentences on those that are ``left_out``."""

    voltage: float
    drawn: tuple[Drawn, ...]
    left_out: tuple[str, ...]


def curves_of_fault(
    case: Case, readings: Sequence[Reading], nominal: float, balanced: bool, voltage: float | None
) -> Curves:
    """The relays of a fault at a place of ``nominal`` V; ``voltage`` another to draw them at.

    Raises ``RequestError`` where no relay can be drawn there.
    """
    marks = {
        each.relay.name: (Mark(each.value, each.time, each.why),) if each.value > 0 else ()
        for each in readings
    }
    relays = [each.relay for each in readings]
    return _curves(case, relays, marks, nominal if voltage is None else voltage, balanced)


def curves_of_sheet(case: Case, rows: Sequence[SheetRow], voltage: float | None) -> Curves:
    """The relays of a setting sheet, with the least current they must see and the greatest.

    At ``voltage``, or that at which most of them stand. Raises ``RequestError`` where none can be drawn.
    """
    marks = {
        row.relay.name: tuple(
            Mark(timed.current, timed.time, f"{word}, state {timed.state}")
            for word, timed in (("least", row.least), ("greatest", row.greatest))
            if timed.current > 0
        )
        for row in rows
    }
    relays = [row.relay for row in rows]
    homes = _homes(case, relays)
    if voltage is None:
        counts = Counter(homes[relay.name] for relay in relays if relay.unit == "A" and relay.complete)
        voltage = counts.most_common(1)[0][0] if counts else math.nan
    return _curves(case, relays, marks, voltage, balanced=False)


def _curves(
    case: Case,
    relays: Iterable[Relay],
    marks: Mapping[str, tuple[Mark, ...]],
    voltage: float,
    balanced: bool,
) -> Curves:
    relays = list(relays)
    homes = _homes(case, relays)
    drawn: list[Drawn] = []
    left: dict[str, list[str]] = {}
    for relay in relays:
        home = homes[relay.name]
        why = _left_out(relay, home, voltage, balanced)
        if why:
            left.setdefault(why, []).append(relay.name)
            continue
        scale = 1.0 if _same(home, voltage) else home / voltage
        own = tuple(
            msgspec.structs.replace(mark, current=mark.current * scale) for mark in marks[relay.name]
        )
        drawn.append(Drawn(relay, scale, own))
    said = tuple(f"{', '.join(names)}: {why}" for why, names in left.items())
    if not drawn:
        where = "" if math.isnan(voltage) else f" at {voltage / 1000:g} kV"
        raise RequestError(f"--plot: no relay can be drawn{where}: {'; '.join(said)}")
    return Curves(voltage, tuple(drawn), said)


def _left_out(relay: Relay, home: float, voltage: float, balanced: bool) -> str:
    if relay.out:
        return "out of service"
    if relay.unit != "A":
        return "measures a voltage"
    if not relay.complete:
        return "a setting is still open"
    if _same(home, voltage) or relay.measures == "negative-sequence":
        return ""
    if relay.measures == "phase":
        return (
            ""
            if balanced
            else f"phase currents at {home / 1000:g} kV, which no ratio refers in every fault"
        )
    return f"earth currents at {home / 1000:g} kV, which no ratio refers to another voltage"


def _homes(case: Case, relays: Iterable[Relay]) -> dict[str, float]:
    """Nominal voltage (V) at which each relay stands, NaN where nothing tells."""
    stars = Places(case).stars
    out = {}
    for relay in relays:
        users = stars.get(relay.star, ())
        bus = relay.bus or (users[0].bus if users else "")
        out[relay.name] = float(case.buses[bus].voltage.value.real) if bus in case.buses else math.nan
    return out


def _same(one: float, other: float) -> bool:
    return math.isclose(one, other, rel_tol=1e-6)


def voltage_of(case: Case, text: str | None) -> float | None:
    """The voltage (V) that ``--plot-at`` names. Raises ``RequestError`` where no bus has it."""
    if text is None:
        return None
    there = sorted({float(bus.voltage.value.real) for bus in case.buses.values()}, reverse=True)
    try:
        value = float(read_quantity(text, Dimensions("voltage")).value.real)
    except QuantityError as error:
        raise RequestError(f"--plot-at {error}") from None
    if not any(_same(value, each) for each in there):
        levels = ", ".join(f"{each / 1000:g} kV" for each in there)
        raise RequestError(f"--plot-at {quoted(text)}: no bus has this voltage; there are {levels}")
    return value
