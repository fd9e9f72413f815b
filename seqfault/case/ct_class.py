"""The accuracy class of a protection current transformer, ``"5P20"`` or ``"PX"``, after IEC 61869-2."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import NoReturn

import msgspec

from seqfault.errors import FieldError, quoted

_P = re.compile(r"(5|10)P(R?)([0-9]+(?:\.[0-9]+)?)")
_EXAMPLE = 'a protection class is wanted, as in "5P20", "10P10" or "PX"'
# Current error at rated current, by the class (IEC 61869-2:2012, from memory).
_AT_RATED = {"5": 0.01, "10": 0.03}


class CtClass(msgspec.Struct, frozen=True):
    """``kind`` P or PX; of P the composite error at the accuracy limit and the current error at rated
    current, both fractions, and the accuracy limit factor; ``gapped`` of PR and PXR.
    """

    kind: str
    gapped: bool = False
    composite_error: float | None = None
    rated_error: float | None = None
    limit_factor: float | None = None


@lru_cache(maxsize=256)
def parse_ct_class(text: str) -> CtClass:
    """Return the class ``text`` states. Raises FieldError where it is none that is known."""
    plain = "".join(text.split())
    upper = plain.upper()
    if upper in ("PX", "PXR"):
        if plain != upper:
            _refuse(text, f"write {quoted(upper)}")
        return CtClass("PX", upper == "PXR")
    found = _P.fullmatch(upper)
    if found is not None:
        if plain != upper:
            _refuse(text, f"write {quoted(upper)}")
        factor = float(found[3])
        if not 1 < factor <= 1000:
            _refuse(text, "the accuracy limit factor, its last number, is above 1 and up to 1000")
        return CtClass("P", bool(found[2]), float(found[1]) / 100, _AT_RATED[found[1]], factor)
    if inside := _P.search(upper):
        _refuse(text, f"the class alone stands here; write {quoted(inside[0])}, and the VA as burden")
    if upper in ("5P", "10P", "5PR", "10PR"):
        _refuse(text, f"the accuracy limit factor is missing; write it as in {quoted(upper + '20')}")
    if upper in ("X", "PS"):
        _refuse(text, 'write "PX", with knee_point and winding_resistance')
    if re.fullmatch(r"[CKT][0-9]+", upper):
        _refuse(text, 'classes of IEEE C57.13 are not read; write "PX" with the knee_point of its curve')
    if re.fullmatch(r"0\.[0-9]+S?|[135]", upper):
        _refuse(text, f"this is a class for measuring; {_EXAMPLE}")
    if upper in ("TPX", "TPY", "TPZ"):
        _refuse(text, f"classes for transients are not read; {_EXAMPLE}")
    _refuse(text, _EXAMPLE)


def _refuse(text: str, problem: str) -> NoReturn:
    raise FieldError(f"{quoted(text, 80)}: {problem}")
