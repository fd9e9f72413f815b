"""Published figures as data: what is printed, what this program gets, and how close it must be."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

FROM_MEMORY = "from memory"
PRINTED = "as printed in the source"
FORMULA = "formula of the source, evaluated"


@dataclass(frozen=True)
class Figure:
    """``published`` in ``unit``; ``got`` computes ours; ``tolerance`` relative, of a zero absolute."""

    quantity: str
    published: float
    unit: str
    got: Callable[[], float]
    tolerance: float = 1e-3

    def error(self) -> float:
        scale = abs(self.published) if self.published else 1.0
        return abs(self.got() - self.published) / scale


@dataclass(frozen=True)
class Example:
    """A worked example or table, its source, where its values come from, and what it exercises."""

    title: str
    source: str
    origin: str
    exercises: str
    figures: tuple[Figure, ...]


def degrees(value: complex) -> float:
    """Angle in 0 to 360 degrees."""
    return float(np.degrees(np.angle(value)) % 360)
