"""What the current transformers of a case promise with the burden that is connected."""

from __future__ import annotations

import math

import msgspec

from seqfault.case.ct_class import parse_ct_class
from seqfault.case.protection import CurrentTransformer as Record
from seqfault.case.quantities import Quantity
from seqfault.equations.current_transformers import (
    KNEE_SHARE,
    burden_resistance,
    knee_point_voltage,
    limit_factor_of_knee,
    limit_factor_with,
)
from seqfault.model.assumptions import Ledger


class CurrentTransformer(msgspec.Struct, frozen=True):
    """A current transformer in SI units; None where the case does not tell.

    ``primary`` and ``secondary`` rated (A); ``ct_class`` as written; ``composite_error`` of class P, a
    fraction, at the accuracy limit; ``limit_factor`` on the plate and ``limit_factor_connected`` with
    what is connected, of class PX where its knee is reached; burdens and winding resistance in ohm;
    ``knee_point`` in V, ``knee_estimated`` where it follows from the class alone.
    """

    name: str
    ratio: str
    primary: float
    secondary: float
    connection: str
    out: bool
    ct_class: str
    composite_error: float | None
    limit_factor: float | None
    limit_factor_connected: float | None
    burden: float | None
    connected_burden: float | None
    winding_resistance: float | None
    knee_point: float | None
    knee_estimated: bool

    @property
    def limit(self) -> float | None:
        """Greatest primary current (A) that its class speaks of."""
        factor = self.limit_factor_connected
        return None if factor is None else factor * self.primary


def transformer_of(name: str, record: Record, ledger: Ledger) -> CurrentTransformer:
    """The current transformer ``record`` in SI units; what is assumed goes to ``ledger``."""
    kind = parse_ct_class(record.class_) if record.class_ is not None else None
    secondary = record.ratio.secondary
    burden, connected = (_ohms(each, secondary) for each in (record.burden, record.connected_burden))
    winding = None if record.winding_resistance is None else _real(record.winding_resistance)
    knee = None if record.knee_point is None else _real(record.knee_point)
    plate = kind.limit_factor if kind is not None else None
    actual, estimated = plate, False
    if connected is None and kind is not None and (plate is not None or burden is not None):
        ledger.note("current transformer", name, "connected_burden not stated, taken as the rated burden")
        connected = burden
    if plate is not None and burden is not None and winding is not None and connected is not None:
        actual = limit_factor_with(plate, winding, burden, connected)
        if knee is None and winding + burden > 0:
            knee, estimated = knee_point_voltage(plate, secondary, winding, burden), True
            text = f"knee_point not stated, taken as {KNEE_SHARE:g} of the limiting e.m.f. of its class"
            ledger.note("current transformer", name, f"{text} (common practice)")
    elif kind is not None and kind.kind == "PX" and knee is not None and winding is not None:
        actual = None if connected is None else limit_factor_of_knee(knee, secondary, winding, connected)
    if actual is not None and not math.isfinite(actual):
        actual = None  # neither winding nor burden has any ohms, which tells nothing
    return CurrentTransformer(
        name=name,
        ratio=record.ratio.text,
        primary=record.ratio.primary,
        secondary=secondary,
        connection=record.connection,
        out=record.out,
        ct_class=record.class_ or "",
        composite_error=kind.composite_error if kind is not None else None,
        limit_factor=plate,
        limit_factor_connected=actual,
        burden=burden,
        connected_burden=connected,
        winding_resistance=winding,
        knee_point=knee,
        knee_estimated=estimated,
    )


def _real(quantity: Quantity) -> float:
    return float(quantity.value.real)


def _ohms(burden: Quantity | None, secondary: float) -> float | None:
    if burden is None:
        return None
    value = _real(burden)
    return burden_resistance(value, secondary) if burden.dimension == "power" else value
