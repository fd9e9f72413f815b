"""Where a fault stands and what it is, as tests draw it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Spot:
    """Where a fault stands: a bus, a terminal (``element`` at ``bus``), or a fraction of a line."""

    bus: str = ""
    element: str = ""
    fraction: float | None = None

    def text(self) -> str:
        if not self.element:
            return self.bus
        return (
            f"{self.element}@{self.bus}" if self.fraction is None else f"{self.element}@{self.fraction!r}pu"
        )


@dataclass(frozen=True)
class Trouble:
    """One of several faults at once: a ``kind`` of the package at a spot."""

    spot: Spot
    kind: str
    phases: str
    zf: complex = 0j
    zg: complex = 0j
    fallen: int | None = None  # the side of a break that lies on earth

    @property
    def opens(self) -> bool:
        return self.kind.startswith("open")


@dataclass
class Poles:
    """A joint of single poles: those in ``closed`` are."""

    bus_i: str
    bus_j: str
    closed: str

    def put(self, name: str, referee: Any) -> None:
        referee.poles(name, self.bus_i, self.bus_j, self.closed)
