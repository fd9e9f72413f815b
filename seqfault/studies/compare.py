"""Kinds of fault side by side at one bus."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.case.places import Place
from seqfault.errors import RequestError, quoted
from seqfault.faults.kinds import fault_kind
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Complex

ORDER = ("three-phase", "line-line", "line-line-ground", "line-ground")
"""Kinds in the order of IEC 60909-0; three-phase to ground has the currents of three-phase."""


class Extreme(msgspec.Struct, frozen=True):
    """A greatest or least value: of which kind of fault, and in which phase."""

    value: float
    kind: str
    phase: str


class Seen(msgspec.Struct, frozen=True, eq=False):
    """What one terminal carries, A from the bus into the element, at true angles.

    ``phases`` (3,) a b c and ``sequence`` (3,) components 0 1 2.
    """

    phases: Complex
    sequence: Complex


class Comparison(msgspec.Struct, frozen=True, eq=False):
    """Solutions of several kinds of fault at one place, in the order asked for.

    ``seen`` is what the terminal ``at`` carries in each, where one was asked for.
    """

    place: str
    solutions: tuple[FaultSolution, ...]
    at: str = ""
    seen: tuple[Seen, ...] = ()

    def _currents(self) -> list[tuple[float, FaultSolution, str]]:
        """The largest faulted-phase current of each kind, A."""
        out = []
        for solution in self.solutions:
            size = np.abs(solution.current)
            k = int(size.argmax())
            out.append((float(size[k]), solution, "abc"[k]))
        return out

    @property
    def reference(self) -> float | None:
        """The three-phase current (A) that shares refer to, None where it was not asked for."""
        for solution in self.solutions:
            if solution.fault.kind.name.startswith("three-phase"):
                return float(np.abs(solution.current).max())
        return None

    @property
    def greatest(self) -> Extreme:
        """The greatest phase current of all kinds."""
        return _extreme(max(self._currents(), key=lambda row: row[0]))

    @property
    def least(self) -> Extreme:
        """The least of the kinds' currents, 0 where an earth fault finds no way home."""
        return _extreme(min(self._currents(), key=lambda row: row[0]))

    @property
    def least_clear_of_earth(self) -> Extreme | None:
        """The least among kinds that do not touch earth."""
        rows = [row for row in self._currents() if not row[1].fault.kind.earth]
        return _extreme(min(rows, key=lambda row: row[0])) if rows else None

    @property
    def earth_fault_factor(self) -> Extreme | None:
        """The highest earth-fault factor at the place, its kind and phase (the first of two equal)."""
        best: Extreme | None = None
        for solution in self.solutions:
            factors = solution.earth_fault_factor
            if factors is None:
                continue
            k = solution.index[solution.faults[0].bus]
            factor = float(factors[k])
            if np.isfinite(factor) and (best is None or factor > best.value):
                size = np.abs(solution.at(solution.faults[0].bus))
                for phase in solution.fault.phases:
                    size["abc".index(phase)] = -1
                best = Extreme(factor, solution.fault.kind.name, "abc"[int(size.argmax())])
        return best


def _extreme(row: tuple[float, FaultSolution, str]) -> Extreme:
    return Extreme(row[0], row[1].fault.kind.name, row[2])


def compare(
    network: Network,
    place: str,
    kinds: tuple[str, ...] = ORDER,
    *,
    zf: complex = 0,
    zg: complex = 0,
    at: str | None = None,
) -> Comparison:
    """Solve ``kinds`` at ``place``, a bus, a terminal or a point along a line; ``zf`` and ``zg`` in ohm.

    ``zg`` enters the kinds that touch earth; ``at`` is a terminal to look from, ``ELEMENT@BUS``. Raises
    what ``Network.fault`` raises.
    """
    here = network.located([place])
    terminal = None if at is None else network.place(at)
    if terminal is not None and (not terminal.element or terminal.fraction is not None):
        raise RequestError(f"at {quoted(str(at))}: a terminal is wanted, ELEMENT@BUS")
    solutions = tuple(
        here.fault(place, kind, zf=zf, zg=zg if fault_kind(kind).earth else 0) for kind in kinds
    )
    if terminal is None:
        return Comparison(place, solutions)
    return Comparison(place, solutions, terminal.name, tuple(_seen(s, terminal) for s in solutions))


def _seen(solution: FaultSolution, terminal: Place) -> Seen:
    t = solution.terminals
    rows = zip(t.element, t.bus, t.side, strict=True)
    k = next(
        k
        for k, (element, bus, side) in enumerate(rows)
        if element == terminal.element and bus == terminal.bus and not side.startswith("from ")
    )
    return Seen(t.phases[:, k], t.sequence[:, k])
