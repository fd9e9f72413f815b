"""Elements of the network as columns.

All impedances and admittances are per unit on the common base power and the nominal voltage of the bus
they sit at. Arrays with a sequence axis have it first, in the order 0, 1, 2. ``m`` is the number of
records, ``w`` the number of windings of one core.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from seqfault.model.assumptions import Assumption

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Bools = npt.NDArray[np.bool_]

STAR, DELTA, ISOLATED = 0, 1, 2
"""Kinds of winding: star with its star point joined to something, delta, star joined to nothing."""


@dataclass(frozen=True, eq=False)
class Lines:
    """Overhead lines and cables, π sections; a record of ``count`` circuits is their parallel sum.

    ``ends`` (2, m) bus indices, ``closed`` (2, m); ``series`` (3, m) impedance; ``shunt`` (3, m)
    admittance at each end.
    """

    names: tuple[str, ...]
    ends: Ints
    closed: Bools
    series: Complex
    shunt: Complex
    count: Ints


@dataclass(frozen=True, eq=False)
class Shunts:
    """What joins a bus straight to earth: infeeds, induction motors, capacitances.

    ``admittance`` (3, m), zero where a sequence has no path. ``kinds`` says which table a record is of.
    """

    names: tuple[str, ...]
    kinds: tuple[str, ...]
    bus: Ints
    admittance: Complex


@dataclass(frozen=True, eq=False)
class WindingSets:
    """Windings on common cores: transformers (w = 2) and machines behind a star point (w = 1).

    ``leakage`` (3, m, w, w) short-circuit admittance matrix; ``bus``, ``kind``, ``star`` (m, w), the
    last an index of ``StarPoints`` or −1 on a delta; ``ratio`` (m, w) bus nominal over rated voltage,
    ``star_ratio`` (m, w) the star point's base over rated voltage; ``sign`` (m, w) zero-sequence
    polarity; ``sense`` (m, w) sense of a delta; ``rated`` (m, w) rated voltage, V.
    """

    kind_of_record: str
    names: tuple[str, ...]
    sides: tuple[str, ...]
    leakage: Complex
    bus: Ints
    kind: Ints
    star: Ints
    ratio: Floats
    star_ratio: Floats
    sign: Floats
    sense: Floats
    rated: Floats
    count: Ints


@dataclass(frozen=True, eq=False)
class StarPoints:
    """Every star point by name, neutrals shared by several windings once.

    ``kinds`` holds ``solid``, ``isolated`` or ``neutral``; ``impedance`` (k,) ohm to earth (0 solid,
    infinite isolated); ``node`` (k,) position among the nodes of the zero-sequence network behind the
    buses, −1 where the star point is earth itself or carries no current; ``base`` (k,) base voltage, V.
    """

    names: tuple[str, ...]
    kinds: tuple[str, ...]
    impedance: Complex
    node: Ints
    base: Floats
    bus: Ints


@dataclass(frozen=True, eq=False)
class Model:
    """One installation in one state, in per unit, with what was assumed on the way.

    ``nominal`` (n,) V; ``clock`` (n,) displacement in twelfths of a turn behind its part's first bus;
    ``live`` (n,) whether a source is connected; ``galvanic`` (n,) label of the metallically joined
    network; ``before`` (n,) per-unit voltage before the fault, in the frame of the bus.
    """

    title: str
    state: str
    machine: str
    sha256: str
    frequency: float
    base_power: float
    buses: tuple[str, ...]
    index: dict[str, int]
    nominal: Floats
    clock: Ints
    live: Bools
    galvanic: Ints
    before: Complex
    lines: Lines
    sources: Shunts
    capacitances: Shunts
    winding_sets: tuple[WindingSets, ...]
    stars: StarPoints
    assumptions: tuple[Assumption, ...]
    warnings: tuple[str, ...]

    @property
    def nodes(self) -> int:
        """Number of zero-sequence nodes: buses, then star points with an impedance to earth."""
        return len(self.buses) + int(np.count_nonzero(self.stars.node >= 0))
