"""Star points: which winding ends where, and what joins it to earth."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from seqfault.case.records import Neutral
from seqfault.equations.earthing import parallel, resistor_of_current
from seqfault.model.elements import ISOLATED, STAR, StarPoints


def impedance_of(neutral: Neutral) -> complex:
    """Ohm between a star point and earth, exactly 0 where the record says so."""
    if neutral.current is not None and neutral.resistance is None and neutral.reactance is None:
        assert neutral.voltage is not None
        series = complex(resistor_of_current(neutral.current.value.real, neutral.voltage.value.real))
    elif neutral.resistance is None and neutral.reactance is None:
        assert neutral.parallel_resistance is not None
        return complex(neutral.parallel_resistance.value)
    else:
        series = complex(
            neutral.resistance.value.real if neutral.resistance else 0.0,
            neutral.reactance.value.real if neutral.reactance else 0.0,
        )
    if neutral.parallel_resistance is not None:
        return complex(parallel(series, complex(neutral.parallel_resistance.value)))
    return series


class StarRegister:
    """Collects the star points of all windings, one entry for each name."""

    def __init__(self, neutrals: Mapping[str, Neutral], buses: int) -> None:
        self._neutrals = neutrals
        self._buses = buses
        self._at: dict[str, int] = {}
        self._rows: list[tuple[str, str, complex, float, int]] = []

    def join(self, winding: str, neutral: str, bus: int, nominal: float) -> tuple[int, int]:
        """Register the star point of ``winding``; returns its winding kind and its index.

        ``neutral`` is ``solid``, ``isolated`` or the name of a neutral in service; ``nominal`` (V) of
        the bus becomes the base voltage of a star point met for the first time.
        """
        name, kind, z = winding, neutral, complex(np.inf)
        if neutral == "solid":
            z = 0j
        elif neutral != "isolated":
            record = self._neutrals[neutral]
            name, kind = neutral, "neutral"
            z = complex(np.inf) if record.out else impedance_of(record)
        k = self._at.get(name)
        if k is None:
            k = self._at[name] = len(self._rows)
            self._rows.append((name, kind, z, nominal, bus))
        return (ISOLATED if kind == "isolated" else STAR), k

    def base(self, star: int) -> float:
        """Base voltage (V, line to line) of a star point."""
        return self._rows[star][3]

    def columns(self) -> StarPoints:
        """All star points; those behind an impedance become nodes behind the buses."""
        z = np.array([row[2] for row in self._rows], complex)
        node = np.full(len(self._rows), -1, np.int64)
        own = np.array([row[1] == "neutral" and row[2] != 0 for row in self._rows], bool)
        node[own] = self._buses + np.arange(own.sum())
        return StarPoints(
            names=tuple(row[0] for row in self._rows),
            kinds=tuple(row[1] for row in self._rows),
            impedance=z,
            node=node,
            base=np.array([row[3] for row in self._rows], float),
            bus=np.array([row[4] for row in self._rows], np.int64),
        )
