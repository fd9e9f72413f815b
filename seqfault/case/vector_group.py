"""The vector group of a transformer, ``"Dyn11"``, by the letters of IEC 60076-1."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Literal

import msgspec

from seqfault.case.wording import quoted
from seqfault.errors import FieldError

Connection = Literal["star", "delta"]

_WINDING = r"(yn|y|d|zn|z|a|iii|i)"
_GROUP = re.compile(rf"{_WINDING}{_WINDING}([0-9]*)((?:{_WINDING}[0-9]*)*)", re.IGNORECASE)
_EXAMPLE = 'a group is wanted as in "Dyn11": high voltage in capitals, low voltage, clock number'
_CLOCKS = {
    True: "of two windings alike is even: 0, 2, 4, 6, 8 or 10",
    False: "of a star and a delta is odd: 1, 3, 5, 7, 9 or 11",
}


class VectorGroup(msgspec.Struct, frozen=True):
    """Two windings and how far the low voltage lags the high voltage, in clock hours of 30°.

    A star point counts when it is brought out, the letter N or n.
    """

    hv: Connection
    lv: Connection
    hv_star_point: bool
    lv_star_point: bool
    clock: int

    @property
    def has_delta(self) -> bool:
        """Whether one of the windings is a delta."""
        return "delta" in (self.hv, self.lv)


@lru_cache(maxsize=256)
def parse_vector_group(text: str) -> VectorGroup:
    """Return the windings and the clock of a two-winding group.

    Raises FieldError for one that does not read, cannot be, or is not modelled.
    """
    plain = "".join(char for char in text if char not in " -/,.()+")
    found = _GROUP.fullmatch(plain)
    if found is None:
        raise FieldError(f"{quoted(text, 80)}: {_EXAMPLE}")
    hv, lv, clock, more = found[1].upper(), found[2].lower(), found[3], found[4]
    if more:
        raise FieldError(f"{quoted(text, 80)}: three windings are not modelled by this version")
    for letter, kind in {"z": "a zigzag winding", "a": "an auto-transformer"}.items():
        if letter in (hv[0].lower(), lv[0]):
            raise FieldError(f"{quoted(text, 80)}: {kind} is not modelled by this version")
    if "i" in (hv[0].lower(), lv[0]):
        raise FieldError(f"{quoted(text, 80)}: a single-phase transformer is not modelled")
    if not clock:
        raise FieldError(
            f"{quoted(text, 80)}: the clock number is missing; "
            f"write {quoted(f'{hv}{lv}{0 if hv[0] == lv[0].upper() else 11}')}, for example"
        )
    if len(clock) > 2 or int(clock) > 11:
        raise FieldError(f"{quoted(text, 80)}: the clock number is 0 to 11")
    written = f"{hv}{lv}{int(clock)}"
    alike = hv[0] == lv[0].upper()
    if alike != (int(clock) % 2 == 0):
        raise FieldError(f"{quoted(text, 80)}: the clock number {_CLOCKS[alike]}")
    if text != written:
        raise FieldError(f"{quoted(text, 80)}: write {quoted(written)}")
    return VectorGroup(
        hv="delta" if hv == "D" else "star",
        lv="delta" if lv == "d" else "star",
        hv_star_point=hv == "YN",
        lv_star_point=lv == "yn",
        clock=int(clock),
    )
