"""Relays, current transformers and demands as parts of a page, a tree and rows."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import msgspec

from seqfault.report.data import Quantity
from seqfault.report.tables import TEXT, Block, Group, Part, Row, Sentences, Table
from seqfault.studies.current_transformers import CurrentTransformer
from seqfault.studies.protection import Protection
from seqfault.studies.relay_settings import Stage
from seqfault.studies.relays import Relay

OPEN = "to be set"


def protection_parts(protection: Protection) -> list[Part]:
    """What is said of ``protection`` on a page."""
    relays, transformers = protection.relays.values(), protection.transformers.values()
    parts: list[Part] = []
    if relays:
        parts.append(_relays(protection))
        parts.append(Sentences("What each relay does", tuple(_duty(protection, each) for each in relays)))
    if transformers:
        parts.append(_transformers(protection))
    parts.append(Sentences("Demanded of the settings", tuple(_demands(protection))))
    return parts


def _relays(protection: Protection) -> Table:
    rows = []
    for relay in protection.relays.values():
        cells = (
            relay.at,
            relay.device,
            _size(relay.pickup.primary, relay.unit, OPEN),
            _size(relay.pickup.secondary, relay.unit, "-"),
            _time(relay),
        )
        rows.append(Row(relay.name, tuple((cell,) for cell in cells)))
    headings = (("at",), ("device",), ("pickup", "primary"), ("", "secondary"), ("time",))
    groups = tuple(Group(heading, left=True) for heading in headings)
    return Table(groups, (Block("", (TEXT,), tuple(rows)),), heading="Relays (device: IEEE C37.2)")


def _size(value: float | None, unit: str, otherwise: str) -> str:
    return otherwise if value is None else f"{_setting(value)} {unit}"


def _setting(value: float) -> str:
    """Four figures, as many as a setting has, without an exponent or zeros at the end."""
    return f"{float(f'{value:.4g}'):.15g}"


def _time(relay: Relay) -> str:
    if relay.curve == "definite":
        text = OPEN if relay.delay is None else f"{relay.delay:g} s"
        return f"definite, {text}"
    text = f", {OPEN}" if relay.multiplier is None else f" × {relay.multiplier:g}"
    least = "" if relay.minimum_time is None else f", at least {relay.minimum_time:g} s"
    return f"{relay.curve}{text}{least}"


def _fast(relay: Relay) -> str:
    if relay.fast is None:
        return ""
    sizes = (_size(relay.fast.primary, relay.unit, ""), _size(relay.fast.secondary, relay.unit, ""))
    both = " primary, ".join(size for size in sizes if size)
    end = " secondary" if sizes[1] else " primary"
    return f"fast stage above {both}{end} after {relay.fast_delay:g} s"


def _duty(protection: Protection, relay: Relay) -> str:
    """One sentence: what it measures, protects, and whom it stands behind."""
    ratio = protection.transformers[relay.ct].ratio if relay.ct else relay.vt
    said = [f"measures {relay.measures}" + (f" behind {ratio}" if ratio else "")]
    if relay.direction:
        angle = relay.characteristic_angle_deg
        said.append(f"{relay.direction} at {angle:.4g}°, polarised by {relay.polarisation}")
    said.append(_fast(relay))
    units = {"pickup": f" {relay.unit}", "multiplier": "", "delay": " s"}
    steps = [f"{_setting(scale.step)}{units[of]} of {of}" for of, scale in relay.scales.items()]
    if steps:
        said.append(f"in steps of {', '.join(steps)}")
    if relay.protects:
        said.append(f"protects {', '.join(relay.protects)}")
    if relay.backs_up:
        said.append(f"backs up {', '.join(relay.backs_up)}")
    said.append(f"breaker {relay.breaker_time:g} s")
    if relay.out:
        said.append("out of service")
    elif relay.blind:
        said.append(f"sees nothing in this state: {relay.blind}")
    return f"{relay.name}: {'; '.join(text for text in said if text)}"


def _transformers(protection: Protection) -> Table:
    rows = []
    for ct in protection.transformers.values():
        knee = _size(ct.knee_point, "V", "-") + (" estimated" if ct.knee_estimated else "")
        cells = (ct.ratio, ct.connection, ct.ct_class or "not stated", _limit(ct), knee)
        rows.append(Row(ct.name, tuple((cell,) for cell in cells)))
    headings = (("ratio",), ("connection",), ("class",), ("accurate up to",), ("knee point",))
    groups = tuple(Group(heading, left=True) for heading in headings)
    return Table(groups, (Block("", (TEXT,), tuple(rows)),), heading="Current transformers")


def _limit(ct: CurrentTransformer) -> str:
    """``40 In, 8000 A``: with the burden that is connected."""
    if ct.limit_factor_connected is None or ct.limit is None:
        return "not known"
    return f"{ct.limit_factor_connected:.3g} In, {_setting(ct.limit)} A"


def _demands(protection: Protection) -> Iterator[str]:
    d = protection.demands
    ohms = ", ".join(f"{one:g}" for one in d.fault_resistances)
    yield f"to see {d.see:g} times the pickup through {ohms} ohm in the states {', '.join(d.least)}"
    yield f"to keep still up to the pickup over {d.keep_still:g}; tight below {100 * d.tight:g} % to spare"
    yield (
        f"margin behind a relay of time t: (2 × {100 * d.relay_error:g} % + {100 * d.ct_error:g} %) t"
        f" + breaker {d.breaker:g} s + overshoot {d.overshoot:g} s + safety {d.safety:g} s,"
        f" {d.margin(0.5):.3g} s behind 0.5 s"
    )


def protection_tree(protection: Protection | None) -> dict[str, Any]:
    """Relays, current transformers and demands as plain values, in SI units; null what is not known."""
    if protection is None:
        return {"relays": [], "current_transformers": [], "demands": None}
    return {
        "relays": [msgspec.to_builtins(relay) for relay in protection.relays.values()],
        "current_transformers": [
            {**msgspec.to_builtins(ct), "limit": ct.limit} for ct in protection.transformers.values()
        ],
        "demands": msgspec.to_builtins(protection.demands),
    }


def protection_rows(protection: Protection, state: str) -> Iterator[Quantity]:
    """The same in long form; a relay's rows belong where it stands."""
    for relay in protection.relays.values():
        for name, value, unit in _relay_values(relay):
            yield Quantity(relay.name, "relay", name, "", value, unit, None, relay.at, state)
    for ct in protection.transformers.values():
        values: tuple[tuple[str, float | str | None, str], ...] = (
            ("rated primary current", ct.primary, "A"),
            ("rated secondary current", ct.secondary, "A"),
            ("connection", ct.connection, ""),
            ("class", ct.ct_class, ""),
            ("accuracy limit factor", ct.limit_factor, ""),
            ("accuracy limit factor as connected", ct.limit_factor_connected, ""),
            ("accuracy limit", ct.limit, "A"),
            ("knee point", ct.knee_point, "V"),
        )
        for name, value, unit in values:
            yield Quantity(ct.name, "current transformer", name, "", value, unit, None, "", state)


def _relay_values(relay: Relay) -> Iterator[tuple[str, float | str | None, str]]:
    fast = relay.fast or Stage(None, None)
    yield "measures", relay.measures, ""
    yield "device number", relay.device, ""
    yield "pickup, primary", relay.pickup.primary, relay.unit
    yield "pickup, secondary", relay.pickup.secondary, relay.unit
    yield "curve", relay.curve, ""
    yield "multiplier", relay.multiplier, ""
    yield "delay", relay.delay, "s"
    yield "minimum time", relay.minimum_time, "s"
    yield "fast stage, primary", fast.primary, relay.unit
    yield "fast stage, secondary", fast.secondary, relay.unit
    yield "fast stage delay", relay.fast_delay, "s"
    yield "breaker time", relay.breaker_time, "s"
    yield "blind", relay.blind, ""
