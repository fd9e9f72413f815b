"""The vector group of a transformer, ``"Dyn11"`` or ``"YNyn0d11"``, by the letters of IEC 60076-1."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Literal, NoReturn

import msgspec

from seqfault.errors import FieldError, quoted

Connection = Literal["star", "delta", "zigzag", "auto"]

_WINDING = r"(yn|y|d|zn|z|a|iii|i)"
_OTHER = rf"{_WINDING}([0-9]*)"
_GROUP = re.compile(rf"{_WINDING}{_OTHER}(?:{_OTHER})?((?:{_OTHER})*)", re.IGNORECASE)
_EXAMPLE = 'a group is wanted as in "Dyn11": high voltage in capitals, low voltage, clock number'
_KINDS: dict[str, Connection] = {"y": "star", "d": "delta", "z": "zigzag", "a": "auto"}
_CLOCKS = {True: "even: 0, 2, 4, 6, 8 or 10", False: "odd: 1, 3, 5, 7, 9 or 11"}


class VectorGroup(msgspec.Struct, frozen=True):
    """Two or three windings and how far lv and tv lag hv, in clock hours of 30°.

    A star point counts when it is brought out, the letter N or n. ``tv`` is None and ``tv_clock`` 0
    for two windings. An auto-transformer is a star at ``hv`` and ``"auto"`` at ``lv``; its common star
    point is that of ``hv``.
    """

    hv: Connection
    lv: Connection
    tv: Connection | None
    hv_star_point: bool
    lv_star_point: bool
    tv_star_point: bool
    clock: int
    tv_clock: int

    @property
    def has_delta(self) -> bool:
        """Whether one of the windings is a delta."""
        return "delta" in (self.hv, self.lv, self.tv)


@lru_cache(maxsize=256)
def parse_vector_group(text: str) -> VectorGroup:
    """Return the windings and the clocks of a group of two or three windings.

    Raises FieldError for one that does not read, cannot be, or is not modelled.
    """
    plain = "".join(char for char in text if char not in " -/,.()+")
    found = _GROUP.fullmatch(plain)
    if found is None:
        _refuse(text, _EXAMPLE)
    hv, lv, clock, tv, tv_clock, more = found[1].upper(), *(part or "" for part in found.groups()[1:6])
    if more:
        _refuse(text, "more than three windings are not modelled")
    letters = hv[0].lower(), lv[0].lower(), tv[:1].lower()
    if "i" in letters:
        _refuse(text, "a single-phase transformer is not modelled")
    if "a" in letters and (letters[0] != "y" or letters[1] != "a" or letters[2] == "a"):
        _refuse(text, 'an auto-transformer is a star, then a, then any third winding: "YNa0", "YNa0d11"')
    kinds = [_KINDS[letter] for letter in letters if letter]
    written = hv
    for winding, hours, kind in zip((lv, tv), (clock, tv_clock), kinds[1:], strict=False):
        if not hours:
            likely = 0 if _like(kinds[0], kind) else 11
            rest = tv + (tv_clock or f"{0 if _like(kinds[0], kinds[-1]) else 11}") if tv else ""
            whole = f"{written}{winding.lower()}{likely}" + (rest.lower() if winding is lv else "")
            _refuse(text, f"the clock number is missing; write {quoted(whole)}, for example")
        if len(hours) > 2 or int(hours) > 11:
            _refuse(text, "the clock number is 0 to 11")
        _check_clock(text, kinds[0], kind, int(hours))
        written += f"{winding.lower()}{int(hours)}"
    if text != written:
        _refuse(text, f"write {quoted(written)}")
    return VectorGroup(
        hv=kinds[0],
        lv=kinds[1],
        tv=kinds[2] if tv else None,
        hv_star_point=hv.endswith("N"),
        lv_star_point=lv.endswith("n"),
        tv_star_point=tv.endswith("n"),
        clock=int(clock),
        tv_clock=int(tv_clock or 0),
    )


def _like(one: Connection, other: Connection) -> bool:
    """Tell whether two windings lie an even number of hours apart: a zigzag turns as a delta does."""
    return (one in ("star", "auto")) == (other in ("star", "auto"))


def _check_clock(text: str, hv: Connection, other: Connection, clock: int) -> None:
    if other == "auto" and clock != 0:
        _refuse(text, "the clock number of an auto-transformer is 0")
    alike = _like(hv, other)
    if alike == (clock % 2 == 0):
        return
    first, second = sorted((hv, other), key=("star", "delta", "zigzag").index)
    pair = "two windings alike" if hv == other else f"a {first} and a {second}"
    _refuse(text, f"the clock number of {pair} is {_CLOCKS[alike]}")


def _refuse(text: str, problem: str) -> NoReturn:
    raise FieldError(f"{quoted(text, 80)}: {problem}")
