"""What every record of the case file may carry, and the kinds of value that several tables share."""

from __future__ import annotations

from typing import Annotated

import msgspec

from seqfault.case.quantities import Dimensions, Quantity

Voltage = Annotated[Quantity, Dimensions("voltage")]
Power = Annotated[Quantity, Dimensions("power")]
Current = Annotated[Quantity, Dimensions("current")]
Ratio = Annotated[Quantity, Dimensions("ratio")]
Resistance = Annotated[Quantity, Dimensions("impedance")]
Angle = Annotated[Quantity, Dimensions("angle")]
Duration = Annotated[Quantity, Dimensions("time")]


class Record(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True, gc=False):
    """What every record may carry.

    Records hold no cycles: the garbage collector need not walk through hundreds of thousands of them.
    """

    note: str = ""
    out: bool = False  # normally out of service
