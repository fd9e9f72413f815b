"""The relays of a case in SI units: where they stand, primary and secondary settings, what blinds them."""

from __future__ import annotations

import math

import msgspec
import numpy as np
import numpy.typing as npt

from seqfault.case.protection import Relay as Record
from seqfault.case.quantities import Quantity
from seqfault.case.records import Case, Line, Tie
from seqfault.case.relay_sites import Places, terminals
from seqfault.equations.device_numbers import device_number
from seqfault.equations.relay_curves import Reals, operate_time
from seqfault.errors import quoted
from seqfault.model.assumptions import Ledger
from seqfault.studies.current_transformers import CurrentTransformer
from seqfault.studies.demands import Demanded
from seqfault.studies.relay_settings import Scale, Stage, scales_of, stage_of

_POLARISED_BY = {"negative-sequence": "negative-sequence-voltage", "phase": "phase-voltage"}


class Relay(msgspec.Struct, frozen=True):
    """A relay in SI units; None where a setting is open, or there is none.

    ``element`` and ``bus`` of its terminal, or ``star`` the name of its star point; ``device`` its
    numbers in IEEE C37.2; ``unit`` of its pickups, A or V; ``multiplier`` a number, ``delay`` the time (s)
    of a definite one, ``minimum_time``, ``fast_delay`` and ``breaker_time`` in s, the last the one of the
    demands where not stated; ``scales`` those stated of ``pickup``, ``multiplier`` and ``delay``. ``blind``
    says why it sees nothing in this state, and is empty where it does.
    """

    name: str
    at: str
    element: str
    bus: str
    star: str
    measures: str
    device: str
    ct: str
    vt: str
    direction: str
    characteristic_angle_deg: float | None
    polarisation: str
    unit: str
    pickup: Stage
    curve: str
    multiplier: float | None
    delay: float | None
    minimum_time: float | None
    fast: Stage | None
    fast_delay: float | None
    protects: tuple[str, ...]
    backs_up: tuple[str, ...]
    breaker_time: float
    scales: dict[str, Scale]
    out: bool
    blind: str

    @property
    def complete(self) -> bool:
        """Whether no setting of its main stage is open."""
        time = self.delay if self.curve == "definite" else self.multiplier
        return self.pickup.primary is not None and time is not None


def relay_of(
    name: str,
    record: Record,
    case: Case,
    places: Places,
    transformers: dict[str, CurrentTransformer],
    demands: Demanded,
    ledger: Ledger,
) -> Relay:
    """The relay ``record`` of ``case`` in SI units; what is assumed goes to ``ledger``."""
    element, mark, bus = record.at.partition("@")
    ct = transformers.get(record.ct or "")
    instant = record.instant
    fast_delay = None
    if instant is not None:
        fast_delay = _seconds(instant.delay)
        if fast_delay is None:
            fast_delay = 0.0
            ledger.note("relay", name, "instant.delay not stated, taken as 0 s")
    breaker_time = _seconds(record.breaker_time)
    if breaker_time is None:
        breaker_time = demands.breaker
        text = f"breaker_time not stated, taken as that of the margin, {demands.breaker:g} s"
        ledger.note("relay", name, text)
    delay = _seconds(record.delay)
    angle = record.characteristic_angle
    return Relay(
        name=name,
        at=record.at,
        element=element if mark else "",
        bus=bus,
        star="" if mark else record.at,
        measures=record.measures,
        device=device_number(
            record.measures,
            delayed=record.curve != "definite" or delay != 0,
            instant=instant is not None,
            directional=record.direction is not None,
        ),
        ct=record.ct or "",
        vt=record.vt.text if record.vt is not None else "",
        direction=record.direction or "",
        characteristic_angle_deg=None if angle is None else math.degrees(angle.value.real),
        polarisation=_polarisation(name, record, ledger),
        unit="V" if record.measures == "neutral-voltage" else "A",
        pickup=stage_of(record.pickup, record, case, places, ct),
        curve=record.curve,
        multiplier=record.multiplier,
        delay=delay,
        minimum_time=_seconds(record.minimum_time),
        fast=None if instant is None else stage_of(instant.pickup, record, case, places, ct),
        fast_delay=fast_delay,
        protects=record.protects,
        backs_up=record.backs_up,
        breaker_time=breaker_time,
        scales=dict(scales_of(name, record, case, places, ct, ledger)),
        out=record.out,
        blind="" if record.out else _blind(record, case, places, ct),
    )


def operate_times(relay: Relay, measured: npt.ArrayLike) -> Reals:
    """Operate time (s) of each value (A or V, primary) that ``relay`` measures; infinite where it rests.

    A direction is not looked at. Raises ValueError where a setting of the main stage is open.
    """
    time = relay.delay if relay.curve == "definite" else relay.multiplier
    pickup = relay.pickup.primary
    if pickup is None or time is None:
        raise ValueError(f"a setting of relay {quoted(relay.name)} is open")
    fast = math.inf if relay.fast is None or relay.fast.primary is None else relay.fast.primary
    return operate_time(
        relay.curve,
        np.asarray(measured, float) / pickup,
        time,
        least=relay.minimum_time or 0.0,
        instant=fast / pickup,
        instant_delay=relay.fast_delay or 0.0,
    )


def _seconds(quantity: Quantity | None) -> float | None:
    return None if quantity is None else float(quantity.value.real)


def _polarisation(name: str, record: Record, ledger: Ledger) -> str:
    if record.direction is None or record.polarisation is not None:
        return record.polarisation or ""
    by = _POLARISED_BY.get(record.measures, "residual-voltage")
    ledger.note("relay", name, f"polarisation not stated, taken as {by}")
    return by


def _blind(record: Record, case: Case, places: Places, ct: CurrentTransformer | None) -> str:
    """Why a relay in service sees nothing in this state, or nothing to say."""
    if ct is not None and ct.out:
        return f"its current transformer {quoted(ct.name)} is out"
    name, mark, bus = record.at.partition("@")
    if mark:
        return _blind_at_element(case, places, name, bus)
    users = [user for user in places.stars.get(name, ()) if not _out(case, places, user.element)]
    if not users:
        return f"no winding in service ends in {quoted(name)}"
    neutral = case.neutrals.get(name)
    cut = neutral is not None and neutral.out
    if record.measures == "neutral" and (cut or users[0].neutral == "isolated"):
        return f"nothing joins {quoted(name)} to earth, so no current flows there"
    return ""


def _blind_at_element(case: Case, places: Places, name: str, bus: str) -> str:
    element = places.elements[name][1]
    if _out(case, places, name):
        return f"{quoted(name)} is out"
    if isinstance(element, Line) and bus in element.open:
        return f"{quoted(name)} is switched off at {quoted(bus)}"
    if isinstance(element, Tie) and not element.closed:
        return f"{quoted(name)} is open"
    return ""


def _out(case: Case, places: Places, name: str) -> bool:
    """Whether an element is out, or out with one of its buses."""
    element = places.elements[name][1]
    return element.out or any(case.buses[bus].out for bus in terminals(element))
