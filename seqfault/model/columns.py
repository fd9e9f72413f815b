"""Fields of many records as arrays, a hundred thousand of them without a loop in Python over each."""

from __future__ import annotations

from collections.abc import Sequence
from operator import attrgetter
from typing import Any

import numpy as np

from seqfault.case.quantities import Quantity
from seqfault.model.elements import Bools, Complex, Ints

_value, _dimension = attrgetter("value"), attrgetter("dimension")


def field(records: Sequence[Any], name: str) -> list[Any]:
    """The field ``name`` of every record."""
    return list(map(attrgetter(name), records))


def stated(quantities: Sequence[Quantity | None]) -> tuple[Ints, list[Quantity]]:
    """Places of the ``quantities`` that are stated, and these."""
    if None not in quantities:
        return np.arange(len(quantities)), list(quantities)  # type: ignore[arg-type]  # none is None
    there = [k for k, q in enumerate(quantities) if q is not None]
    return np.array(there, np.int64), [q for q in quantities if q is not None]


def values(quantities: Sequence[Quantity | None], missing: complex = 0) -> tuple[Complex, Bools]:
    """Values (m,) in SI units, ``missing`` where nothing is stated, and which are per length."""
    m = len(quantities)
    out, along = np.full(m, missing, complex), np.zeros(m, bool)
    at, there = stated(quantities)
    if there:
        out[at] = list(map(_value, there))
        dimensions = list(map(_dimension, there))
        per_length = {name: name.endswith("/length") for name in set(dimensions)}
        if all(per_length.values()):
            along[at] = True
        elif any(per_length.values()):
            along[at] = list(map(per_length.__getitem__, dimensions))
    return out, along
