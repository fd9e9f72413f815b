"""Elements of the network as columns.

All impedances and admittances are per unit on the common base power and the nominal voltage of the bus
they sit at. Arrays with a sequence axis have it first, in the order 0, 1, 2. ``m`` is the number of
records, ``w`` the number of windings of one core.
"""

from __future__ import annotations

import msgspec
import numpy as np
import numpy.typing as npt

from seqfault.model.assumptions import Assumption

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Bools = npt.NDArray[np.bool_]

STAR, DELTA, ISOLATED, ZIGZAG = 0, 1, 2, 3
"""Kinds of winding: star with its star point joined to something, delta, star joined to nothing, zigzag
(its zero sequence stands in a set of its own)."""


class CoupledLines(msgspec.Struct, frozen=True, eq=False):
    """Lines coupled in zero sequence: ``line`` (g,) positions, ``admittance`` (g, g) series block."""

    line: Ints
    admittance: Complex


class Lines(msgspec.Struct, frozen=True, eq=False):
    """Lines, cables and series reactors, π sections; ``count`` circuits are their parallel sum.

    ``ends`` (2, m) bus indices; ``nodes`` (2, m) network nodes, an open end's its own, −1 where a line
    out of service is ``earthed`` (m,); ``closed`` (2, m); ``series`` (3, m) impedance; ``shunt`` (3, m)
    admittance at each end; ``voltage`` (m,) nominal, V; ``coupled`` the groups whose
    zero-sequence series block replaces ``series``.
    """

    names: tuple[str, ...]
    kinds: tuple[str, ...]
    ends: Ints
    nodes: Ints
    closed: Bools
    earthed: Bools
    series: Complex
    shunt: Complex
    count: Ints
    voltage: Floats
    coupled: tuple[CoupledLines, ...]

    def series_currents(self, sequence: int, drop: Complex) -> Complex:
        """Currents (m,) from → to that the voltages ``drop`` (m,) along the lines drive."""
        current: Complex = drop / self.series[sequence]
        if sequence == 0:
            for group in self.coupled:
                current[group.line] = group.admittance @ drop[group.line]
        return current


class Shunts(msgspec.Struct, frozen=True, eq=False):
    """What joins a bus straight to earth: infeeds, induction motors, loads, capacitances.

    ``bus`` and ``node`` (m,); ``admittance`` (3, m), zero where a sequence has no path.
    ``kinds`` says which table a record is of.
    """

    names: tuple[str, ...]
    kinds: tuple[str, ...]
    bus: Ints
    node: Ints
    admittance: Complex


class WindingSets(msgspec.Struct, frozen=True, eq=False):
    """Windings on common cores: transformers (w = 2) and machines behind a star point (w = 1).

    ``leakage`` (3, m, w, w) short-circuit admittance matrix; ``bus``, ``node``, ``kind``, ``star``
    (m, w), the last an index of ``StarPoints`` or −1 on a delta; ``ratio`` (m, w) bus nominal over rated
    voltage,
    ``star_ratio`` (m, w) the star point's base over rated voltage; ``sign`` (m, w) zero-sequence
    polarity; ``sense`` (m, w) sense of a delta; ``rated`` (m, w) rated voltage, V; ``magnetised`` (m,)
    whether the zero-sequence matrix holds a magnetising branch; ``autos`` names auto-transformers.
    """

    kind_of_record: str
    names: tuple[str, ...]
    sides: tuple[str, ...]
    leakage: Complex
    bus: Ints
    node: Ints
    kind: Ints
    star: Ints
    ratio: Floats
    star_ratio: Floats
    sign: Floats
    sense: Floats
    rated: Floats
    count: Ints
    magnetised: Bools
    autos: frozenset[str] = frozenset()


class StarPoints(msgspec.Struct, frozen=True, eq=False):
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


class Converters(msgspec.Struct, frozen=True, eq=False):
    """Inverter-fed infeeds: ``limit`` (m,) current on the base power at nominal voltage, ``angle`` (m,)
    rad behind the positive-sequence voltage, ``threshold`` (m,) per unit of nominal voltage.
    """

    names: tuple[str, ...]
    bus: Ints
    node: Ints
    limit: Floats
    angle: Floats
    threshold: Floats


class Operating(msgspec.Struct, frozen=True, eq=False):
    """The loaded state, beside ``Model.sources`` (m) and the generators (g), per unit.

    ``held`` (m,) voltage that infeeds hold, nan for others; ``drawn`` (m,) power that motors and loads
    draw; ``earthed`` (m,) loads whose star point is earthed; ``fed`` (g,) active power of generators, nan
    where not stated; ``holds`` (g,) the voltage they hold; ``rating`` (g,) VA.
    """

    held: Floats
    drawn: Complex
    earthed: Bools
    fed: Floats
    holds: Floats
    rating: Floats


class ClosedTies(msgspec.Struct, frozen=True):
    """Bus couplers that are in and closed: names, and the bus indices ``ends`` (2, m) they join.

    ``side`` gives, for a tie whose current is unique, the buses on its ``from`` side (the current is
    what they draw); None where ties close a loop.
    """

    names: tuple[str, ...]
    ends: Ints
    side: tuple[Ints | None, ...]


class Model(msgspec.Struct, frozen=True, eq=False):
    """One installation in one state, in per unit, with what was assumed on the way.

    ``nominal`` (n,) V; ``clock`` (n,) displacement in twelfths of a turn behind its part's first bus;
    ``node`` (n,) network node of each bus, of ``common`` nodes that all sequences share (buses, then
    open ends); ``live`` (n,) whether a source is connected; ``part`` (n,) label of the part that lines
    and transformers join; ``wired`` (common,) label of the network that lines, reactors, ties and auto
    windings join, ``galvanic`` (common,) the same with shared star points; ``before`` (n,) per-unit
    voltage before the fault, in the frame of the bus.
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
    node: Ints
    common: int
    clock: Ints
    live: Bools
    part: Ints
    wired: Ints
    galvanic: Ints
    before: Complex
    lines: Lines
    sources: Shunts
    capacitances: Shunts
    ties: ClosedTies
    converters: Converters
    winding_sets: tuple[WindingSets, ...]
    stars: StarPoints
    assumptions: tuple[Assumption, ...]
    warnings: tuple[str, ...]
    operating: Operating | None = None

    @property
    def nodes(self) -> int:
        """Number of zero-sequence nodes: the common ones, then star points that are nodes."""
        return self.common + int(np.count_nonzero(self.stars.node >= 0))
