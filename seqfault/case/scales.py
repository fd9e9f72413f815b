"""Rules for the scales a relay can be set on, and for the settings that should stand on them."""

from __future__ import annotations

from seqfault.case.pickups import measurable, primary_amperes
from seqfault.case.protection import (
    CurrentTransformer,
    DelayScale,
    MultiplierScale,
    PickupScale,
    Relay,
)
from seqfault.case.quantities import Quantity
from seqfault.case.subject import Subject, said

Setting = Quantity | float | None
Scale = PickupScale | MultiplierScale | DelayScale


def check_steps(subject: Subject, relay: Relay, ct: CurrentTransformer | None) -> None:
    """Tell what is wrong about the scales, and which settings are not on them."""
    steps, instant = relay.steps, relay.instant
    if steps is None:
        return
    fast = (None, None) if instant is None else (instant.pickup, instant.delay)
    if relay.curve == "definite" and steps.multiplier is not None:
        subject.error("steps.multiplier", 'curve = "definite" has no multiplier; write steps.delay')
    scales: tuple[tuple[str, Scale | Setting, dict[str, Setting]], ...] = (
        ("pickup", steps.pickup, {"pickup": relay.pickup, "instant.pickup": fast[0]}),
        ("multiplier", steps.multiplier, {"multiplier": relay.multiplier}),
        ("delay", steps.delay, {"delay": relay.delay, "instant.delay": fast[1]}),
    )
    for name, scale, settings in scales:
        parts = _parts(f"steps.{name}", scale)
        if scale is not None and _sound(subject, relay, parts, ct):
            for field, setting in settings.items():
                _on_scale(subject, field, setting, list(parts.values()), ct)


def _parts(field: str, scale: Scale | Setting) -> dict[str, Setting]:
    """Return step, least and greatest by the field where they stand."""
    if isinstance(scale, (PickupScale, MultiplierScale, DelayScale)):
        parts = {"step": scale.step, "least": scale.least, "greatest": scale.greatest}
        return {f"{field}.{part}": value for part, value in parts.items()}
    return {field: scale, f"{field}.least": None, f"{field}.greatest": None}


def _sound(
    subject: Subject, relay: Relay, parts: dict[str, Setting], ct: CurrentTransformer | None
) -> bool:
    """Tell whether a scale can be: a step above zero, the least setting below the greatest."""
    sound = True
    for k, (field, value) in enumerate(parts.items()):
        if isinstance(value, Quantity):
            if value.dimension == "time":
                sound &= subject.positive({field: value}, zero=k > 0)
            else:
                sound &= measurable(subject, field, value, relay)
        elif value is not None and (value < 0 or (k == 0 and value == 0)):
            subject.error(
                field, f"{value:g}: this {'cannot be negative' if k else 'must be more than zero'}"
            )
            sound = False
    (_, least), (field, greatest) = list(parts.items())[1:]
    low, high = _number(least, least, ct), _number(greatest, least, ct)
    if sound and low is not None and high is not None and high <= low:
        subject.error(field, f"{_shown(greatest)}: this must be above the least, {_shown(least)}")
        return False
    return sound


def _on_scale(
    subject: Subject, field: str, setting: Setting, scale: list[Setting], ct: CurrentTransformer | None
) -> None:
    """Complain of a setting outside its scale, doubt one between its steps."""
    step, least, greatest = scale
    value, low, high = (_number(one, setting, ct) for one in (setting, least, greatest))
    size = _number(step, setting, ct)
    if value is None or size is None:
        return
    slack = 1e-6 * size
    if low is not None and value < low - slack:
        subject.error(field, f"{_shown(setting)}: the relay's least setting is {_shown(least)}")
    elif high is not None and value > high + slack:
        subject.error(field, f"{_shown(setting)}: the relay's greatest setting is {_shown(greatest)}")
    else:
        count = (value - (low or 0.0)) / size
        if abs(count - round(count)) > 1e-6 * max(1.0, count):
            text = f"{_shown(setting)} is not on the relay's scale, whose step is {_shown(step)}"
            subject.warn(field, text if low is None else f"{text}, from {_shown(least)}")


def _number(value: Setting, beside: Setting, ct: CurrentTransformer | None) -> float | None:
    """Return a setting as a number that can be compared with that of ``beside``, or None."""
    if not isinstance(value, Quantity) or not isinstance(beside, Quantity):
        return value if not isinstance(value, Quantity) else None
    amperes = primary_amperes(value, ct)
    if amperes is not None and primary_amperes(beside, ct) is not None:
        return amperes
    return float(value.value.real) if value.dimension == beside.dimension else None


def _shown(value: Setting) -> str:
    return said(value) if isinstance(value, Quantity) else f"{value:g}"
