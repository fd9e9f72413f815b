"""Pickups and scales of a relay on the primary and the secondary side of its transformer."""

from __future__ import annotations

import math
from collections.abc import Iterator

import msgspec

from seqfault.case.protection import Relay as Record
from seqfault.case.quantities import Quantity
from seqfault.case.records import Case
from seqfault.case.relay_sites import Places
from seqfault.equations.setting_scales import setting_at_least, setting_at_most
from seqfault.model.assumptions import Ledger
from seqfault.studies.current_transformers import CurrentTransformer


class Stage(msgspec.Struct, frozen=True):
    """A pickup: ``primary`` and ``secondary`` in A, of neutral-voltage V of V0; None where not known."""

    primary: float | None
    secondary: float | None


class Scale(msgspec.Struct, frozen=True):
    """Settings ``least`` + n ``step`` up to ``greatest`` (None without limit), in the unit of the setting.

    Pickups are primary. A scale that states no least setting begins at one step, of a delay at 0.
    """

    step: float
    least: float
    greatest: float | None

    def at_least(self, value: float) -> float:
        """The smallest setting that is not below ``value``; NaN where there is none."""
        return setting_at_least(value, self.step, self.least, self._end)

    def at_most(self, value: float) -> float:
        """The largest setting that is not above ``value``; NaN where there is none."""
        return setting_at_most(value, self.step, self.least, self._end)

    @property
    def _end(self) -> float:
        return math.inf if self.greatest is None else self.greatest


def stage_of(
    pickup: Quantity | None, record: Record, case: Case, places: Places, ct: CurrentTransformer | None
) -> Stage:
    """A pickup on both sides of its transformer."""
    if pickup is None:
        return Stage(None, None)
    value = float(pickup.value.real)
    if record.measures == "neutral-voltage":
        return _displacement(pickup, record, case, places)
    if ct is None:
        return Stage(value, None)
    primary = value * ct.primary if pickup.dimension == "rated current" else value
    return Stage(primary, primary * ct.secondary / ct.primary)


def _displacement(pickup: Quantity, record: Record, case: Case, places: Places) -> Stage:
    """A pickup of V0: 100 % is the phase voltage, which an open delta shows as its whole secondary."""
    at_star = "@" not in record.at
    users = places.stars.get(record.at, ())
    bus = users[0].bus if users else record.at.partition("@")[2]
    primary: float | None = float(pickup.value.real)
    if pickup.dimension == "ratio":
        nominal = case.buses[bus].voltage.value.real if bus in case.buses else None
        primary = None if nominal is None or primary is None else primary * nominal / math.sqrt(3)
    if record.vt is None or primary is None:
        return Stage(primary, None)
    full = record.vt.primary if at_star else record.vt.primary / math.sqrt(3)
    return Stage(primary, primary / full * record.vt.secondary)


def scales_of(
    name: str, record: Record, case: Case, places: Places, ct: CurrentTransformer | None, ledger: Ledger
) -> Iterator[tuple[str, Scale]]:
    """The scales that are stated, by the setting they are of; what they leave out is noted."""
    for field in ("pickup", "multiplier", "delay"):
        scale = getattr(record.steps, field, None)
        if scale is None:
            continue

        def number(value: Quantity | float | None, field: str = field) -> float | None:
            if field == "pickup" and isinstance(value, Quantity):
                return stage_of(value, record, case, places, ct).primary
            return float(value.value.real) if isinstance(value, Quantity) else value

        step = number(getattr(scale, "step", scale))
        least, greatest = (number(getattr(scale, end, None)) for end in ("least", "greatest"))
        if step is None:
            continue
        if least is None:
            first = "0 s" if field == "delay" else "one step"
            ledger.note("relay", name, f"least setting of its {field} not stated, taken as {first}")
            least = 0.0 if field == "delay" else step
        if greatest is None:
            ledger.note(
                "relay", name, f"greatest setting of its {field} not stated, taken as without limit"
            )
        yield field, Scale(step, least, greatest)
