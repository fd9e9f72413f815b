"""Fields of many records as arrays, a hundred thousand of them without a loop in Python over each."""

from __future__ import annotations

from collections.abc import Sequence
from operator import attrgetter
from types import NoneType
from typing import Any

import numpy as np

from seqfault.case.quantities import Quantity
from seqfault.model.elements import Bools, Complex

_value, _dimension = attrgetter("value"), attrgetter("dimension")


def field(records: Sequence[Any], name: str) -> list[Any]:
    """The field ``name`` of every record."""
    return list(map(attrgetter(name), records))


def values(quantities: Sequence[Quantity | None]) -> tuple[Complex, Bools, Bools]:
    """Values (m,) in SI units, 0 where nothing is stated; which are per length; which are stated."""
    m, kinds = len(quantities), set(map(type, quantities))
    if kinds <= {NoneType}:
        return np.zeros(m, complex), np.zeros(m, bool), np.zeros(m, bool)
    if NoneType in kinds:
        value = [0 if q is None else q.value for q in quantities]
        dimension = ["" if q is None else q.dimension for q in quantities]
        stated = np.array([q is not None for q in quantities], bool)
    else:
        value, dimension = list(map(_value, quantities)), list(map(_dimension, quantities))
        stated = np.ones(m, bool)
    per_length = {name: name.endswith("/length") for name in set(dimension)}
    along = stated  # most often all or none of those stated are
    if not all(per_length[name] for name in per_length if name):
        along = np.array(list(map(per_length.__getitem__, dimension)), bool)
    return np.array(value, complex), along, stated
