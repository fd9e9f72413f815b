"""The tables of protection: relays, current transformers, and what is demanded of the settings."""

from __future__ import annotations

from typing import Annotated, Literal

import msgspec

from seqfault.case.quantities import Dimensions, Quantity, Refers
from seqfault.case.ratios import Rated, RatedRatio
from seqfault.case.record import Angle, Duration, Ratio, Record, Resistance, Voltage

Pickup = Annotated[Quantity, Dimensions("current", "rated current", "voltage", "ratio")]
Burden = Annotated[Quantity, Dimensions("power", "impedance")]
CurrentRatio = Annotated[RatedRatio, Rated("current")]
VoltageRatio = Annotated[RatedRatio, Rated("voltage")]
CtName = Annotated[str, Refers("current_transformers")]
RelayName = Annotated[str, Refers("relays")]

Measures = Literal["residual", "core-balance", "neutral", "phase", "negative-sequence", "neutral-voltage"]
CtConnection = Literal["residual", "core-balance", "neutral"]
CurveName = Literal[
    "IEC standard inverse",
    "IEC very inverse",
    "IEC extremely inverse",
    "IEC long-time inverse",
    "IEEE moderately inverse",
    "IEEE very inverse",
    "IEEE extremely inverse",
    "definite",
]


class _Part(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A table inside a record."""


class Instant(_Part, frozen=True, kw_only=True):
    """A second stage, of a time of its own."""

    pickup: Pickup
    delay: Duration | None = None


class PickupScale(_Part, frozen=True, kw_only=True):
    """The pickups that a relay can be set to."""

    step: Pickup
    least: Pickup | None = None
    greatest: Pickup | None = None


class MultiplierScale(_Part, frozen=True, kw_only=True):
    """The multipliers that a relay can be set to."""

    step: float
    least: float | None = None
    greatest: float | None = None


class DelayScale(_Part, frozen=True, kw_only=True):
    """The delays that a relay can be set to."""

    step: Duration
    least: Duration | None = None
    greatest: Duration | None = None


class Steps(_Part, frozen=True, kw_only=True):
    """A relay's own scales: a step alone, or with the least and greatest setting."""

    pickup: Pickup | PickupScale | None = None
    multiplier: float | MultiplierScale | None = None
    delay: Duration | DelayScale | None = None


class Relay(Record, frozen=True, kw_only=True):
    """A relay: what it measures and where, its setting, what it protects and whom it backs up.

    ``pickup`` and the time (``multiplier``, or the ``delay`` of a definite one) may be left open: they
    are then to be found.
    """

    at: str
    measures: Measures
    ct: CtName | None = None
    vt: VoltageRatio | None = None
    direction: Literal["forward", "reverse"] | None = None
    characteristic_angle: Angle | None = None
    polarisation: str | None = None
    pickup: Pickup | None = None
    curve: CurveName
    multiplier: float | None = None
    delay: Duration | None = None
    minimum_time: Duration | None = None
    instant: Instant | None = None
    steps: Steps | None = None
    protects: tuple[str, ...] = ()
    backs_up: tuple[RelayName, ...] = ()
    breaker_time: Duration | None = None


class CurrentTransformer(Record, frozen=True, kw_only=True, rename={"class_": "class"}):
    """A kind of current transformer; any number of relays may name it."""

    ratio: CurrentRatio
    connection: CtConnection
    class_: str | None = None
    burden: Burden | None = None
    connected_burden: Burden | None = None
    winding_resistance: Resistance | None = None
    knee_point: Voltage | None = None


class MarginTerms(_Part, frozen=True, kw_only=True):
    """What the margin in time between two relays is made of; None: as is usual, an assumption."""

    relay_error: Ratio | None = None
    ct_error: Ratio | None = None
    breaker: Duration | None = None
    overshoot: Duration | None = None
    safety: Duration | None = None


class Demands(_Part, frozen=True, kw_only=True):
    """What is asked of the settings of the whole installation; None: as is usual, an assumption."""

    fault_resistances: tuple[Resistance, ...] = ()
    see: float | None = None
    keep_still: float | None = None
    least: tuple[str, ...] = ()
    tight: Ratio | None = None
    margin: MarginTerms | None = None
