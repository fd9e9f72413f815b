"""Rules for the setting of a relay: pickup, curve and time, and its fast stage."""

from __future__ import annotations

from seqfault.case.protection import CurrentTransformer, Relay
from seqfault.case.quantities import Quantity
from seqfault.case.relay_sites import StarUser
from seqfault.case.subject import Subject, real, said

_MULTIPLIERS = (0.01, 30.0)  # time multipliers of IEC relays and time dials of IEEE ones, common practice
_DISPLACEMENTS = (0.01, 1.0)
_LONGEST = 60.0  # s


def check_pickup(
    subject: Subject, relay: Relay, ct: CurrentTransformer | None, users: tuple[StarUser, ...] | None
) -> None:
    """Tell what is wrong or doubtful about the pickup of the main stage."""
    if not measurable(subject, "pickup", relay.pickup, relay):
        return
    pickup = relay.pickup
    if pickup is None or pickup.dimension != "ratio":
        return
    if users is not None and len({_nominal(subject, user.bus) for user in users}) > 1:
        text = f"{said(pickup)}: of which voltage? its star point has several; write volts"
        subject.error("pickup", text)
    share = real(pickup) or 0.0
    text = f"{said(pickup)} is outside the usual 1 to 100 % of the phase voltage"
    subject.usual("pickup", share, _DISPLACEMENTS, text, 1)


def _nominal(subject: Subject, bus: str) -> float | None:
    found = subject.site.case.buses.get(bus)
    return real(found.voltage) if found is not None else None


def measurable(subject: Subject, field: str, pickup: Quantity | None, relay: Relay) -> bool:
    """Tell whether a pickup is of a kind that the relay measures, and above zero."""
    if pickup is None:
        return True
    volts = relay.measures == "neutral-voltage"
    if volts and pickup.dimension not in ("voltage", "ratio"):
        problem = (
            'neutral-voltage is set in volts or per cent of the phase voltage, as in "700 V" or "10 %"'
        )
    elif not volts and pickup.dimension not in ("current", "rated current"):
        problem = f"{relay.measures} is set in primary amperes or in the rated current of the ct, as in "
        problem += '"20 A" or "0.1 In"'
    elif pickup.dimension == "rated current" and relay.ct is None:
        subject.error("ct", f"this is missing; {field} = {said(pickup)} refers to its rated current")
        return False
    else:
        return subject.positive({field: pickup})
    subject.error(field, f"{said(pickup)}: {problem}")
    return False


def check_time(subject: Subject, relay: Relay) -> None:
    """Tell what is wrong or doubtful about multiplier, delay and minimum time."""
    subject.positive({"delay": relay.delay, "minimum_time": relay.minimum_time}, zero=True)
    if relay.curve == "definite":
        for field in ("multiplier", "minimum_time"):
            if getattr(relay, field) is not None:
                subject.error(field, 'it goes with an inverse curve; curve = "definite" takes delay')
    elif relay.delay is not None:
        subject.error(
            "delay",
            'it goes with curve = "definite"; an inverse curve takes multiplier and minimum_time, '
            "and its fast stage is instant = { pickup, delay }",
        )
    for field in ("delay", "minimum_time"):
        seconds = real(getattr(relay, field))
        if seconds is not None and seconds > _LONGEST:
            subject.warn(field, f"{said(getattr(relay, field))} is above the usual {_LONGEST:g} s")
    multiplier = relay.multiplier
    if multiplier is None:
        return
    if multiplier <= 0:
        subject.error("multiplier", f"{multiplier:g}: this must be more than zero")
        return
    low, high = _MULTIPLIERS
    text = f"{multiplier:g} is outside the usual {low:g} to {high:g}"
    subject.usual("multiplier", multiplier, _MULTIPLIERS, text, 1)


def check_instant(subject: Subject, relay: Relay, ct: CurrentTransformer | None) -> None:
    """Tell what is wrong about the fast stage."""
    instant = relay.instant
    if instant is None:
        return
    subject.positive({"instant.delay": instant.delay}, zero=True)
    if not measurable(subject, "instant.pickup", instant.pickup, relay) or relay.pickup is None:
        return
    both = in_one_unit(relay.pickup, instant.pickup, ct)
    if both is not None and both[1] <= both[0]:
        subject.error(
            "instant.pickup", f"{said(instant.pickup)}: this must be above the pickup, {said(relay.pickup)}"
        )


def in_one_unit(
    one: Quantity, other: Quantity, ct: CurrentTransformer | None
) -> tuple[float, float] | None:
    """Return two pickups in one unit; None where they cannot be had in one."""
    if one.dimension == other.dimension:
        return float(one.value.real), float(other.value.real)
    a, b = (primary_amperes(quantity, ct) for quantity in (one, other))
    return None if a is None or b is None else (a, b)


def primary_amperes(pickup: Quantity, ct: CurrentTransformer | None) -> float | None:
    """Return a pickup in A primary; None where it is no current, or refers to a ct that is not known."""
    value = float(pickup.value.real)
    if pickup.dimension == "rated current":
        return value * ct.ratio.primary if ct is not None else None
    return value if pickup.dimension == "current" else None
