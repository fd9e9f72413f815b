"""Star points: which winding ends where, and what joins it to earth."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from seqfault.model.elements import ISOLATED, STAR, StarPoints


class StarRegister:
    """Collects the star points of all windings, one entry for each name.

    ``impedances`` gives the ohms of every neutral by name, infinite where it is out of service.
    """

    def __init__(self, impedances: Mapping[str, complex]) -> None:
        self._impedances = impedances
        self._at: dict[str, int] = {}
        self._kinds: list[str] = []
        self._ohms: list[complex] = []
        self._bases: list[float] = []
        self._buses: list[int] = []
        self._nodes: list[bool] = []

    def join(
        self, winding: str, neutral: str, bus: int, nominal: float, *, shared: bool = False
    ) -> tuple[int, int]:
        """Register the star point of ``winding``; returns its winding kind and its index.

        ``neutral`` is ``solid``, ``isolated`` or the name of a neutral; ``nominal`` (V) of the bus
        becomes the base voltage of a star point met for the first time. A star point ``shared`` by
        the windings of an auto-transformer passes current between them even where it is isolated.
        """
        name, kind, z = winding, neutral, complex(np.inf)
        if neutral == "solid":
            z = 0j
        elif neutral != "isolated":
            name, kind, z = neutral, "neutral", self._impedances[neutral]
        k = self._at.get(name)
        if k is None:
            k = self._at[name] = len(self._kinds)
            self._kinds.append(kind)
            self._ohms.append(z)
            self._bases.append(nominal)
            self._buses.append(bus)
            self._nodes.append((kind == "neutral" and z != 0) or (kind == "isolated" and shared))
        return (ISOLATED if kind == "isolated" and not shared else STAR), k

    def base(self, star: int) -> float:
        """Base voltage (V, line to line) of a star point."""
        return self._bases[star]

    def columns(self, common: int) -> StarPoints:
        """All star points; those that are nodes are numbered from ``common`` on."""
        node = np.full(len(self._kinds), -1, np.int64)
        own = np.array(self._nodes, bool)
        node[own] = common + np.arange(own.sum())
        return StarPoints(
            names=tuple(self._at),
            kinds=tuple(self._kinds),
            impedance=np.array(self._ohms, complex),
            node=node,
            base=np.array(self._bases, float),
            bus=np.array(self._buses, np.int64),
        )
