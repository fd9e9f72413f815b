"""A line scanned from end to end: what a fault at each point draws, and what both its ends see."""

from __future__ import annotations

import difflib
from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.case.findings import one_of
from seqfault.case.records import Line
from seqfault.case.wording import listed
from seqfault.errors import RequestError, quoted
from seqfault.faults.kinds import fault_at, fault_kind
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution
from seqfault.model.elements import Complex, Floats
from seqfault.studies.compare import ORDER


class Scan(msgspec.Struct, frozen=True, eq=False):
    """One kind of fault at every point (p) of a line.

    ``current`` (3, p) and ``residual`` (p,) A into the fault; ``seen`` (2, 3, p) phase currents A from
    the bus into the line at its ``from`` and its ``to`` end, of the faulted circuit; ``left`` (3, 3, p)
    phases a b c to earth at the ``from`` bus, at the fault and at the ``to`` bus, V.
    """

    kind: str
    current: Complex
    residual: Complex
    seen: Complex
    left: Complex
    solutions: tuple[FaultSolution, ...]

    @property
    def seen_residual(self) -> Complex:
        """3I0 (2, p) A at both ends, from the bus into the line."""
        return np.asarray(self.seen.sum(axis=1))


class Along(msgspec.Struct, frozen=True, eq=False):
    """The scans of a ``line`` between ``ends``, at ``fraction`` (p,) from its ``from`` end.

    ``length`` m or None; ``opened`` the bus at which its breaker is open, or empty.
    """

    line: str
    ends: tuple[str, str]
    nominal: float
    length: float | None
    fraction: Floats
    opened: str
    scans: tuple[Scan, ...]


def along(
    network: Network,
    line: str,
    kinds: Sequence[str] = ORDER,
    *,
    points: int = 11,
    opened: str = "",
    zf: complex = 0,
    zg: complex = 0,
) -> Along:
    """Scan ``line`` at ``points`` places, both ends among them, for each of ``kinds``.

    ``opened`` names the bus at which the line's breaker is open; ``zf`` and ``zg`` in ohm, ``zg`` for the
    kinds that touch earth. Raises ``RequestError`` for a line that is none or is open there already.
    """
    record = _line(network, line)
    ends = (record.from_, record.to)
    if points < 2:
        raise RequestError(f"points: read {points}; 2 or more are wanted, both ends among them")
    if opened and opened not in ends:
        raise RequestError(
            f"bus {quoted(opened)} is no end of line {quoted(line)}; write {quoted(ends[0])} or"
            f" {quoted(ends[1])}"
        )
    if opened in record.open:
        opened = ""  # it is so already
    fraction = np.linspace(0, 1, points)
    breaks = [f"{line}@{opened}"] if opened else []
    also = [fault_at(place, "open-three") for place in breaks]
    found: dict[str, list[FaultSolution]] = {kind: [] for kind in kinds}
    for x in fraction.tolist():
        place = f"{line}@{100 * x:.10g}%"
        here = network.located([place, *(f"{line}@{end}" for end in ends)], breaks)
        for kind in kinds:
            earth = zg if fault_kind(kind).earth else 0
            found[kind].append(here.solve([fault_at(place, kind, zf=zf, zg=earth), *also]))
    scans = tuple(_scan(kind, line, ends, tuple(rows)) for kind, rows in found.items())
    length = None if record.length is None else float(record.length.value.real)
    nominal = scans[0].solutions[0].nominal
    return Along(line, ends, nominal, length, fraction, opened, scans)


def _line(network: Network, line: str) -> Line:
    record = network.case.lines.get(line)
    if record is None:
        others = {name: table for table, name, _ in network.case.records()}
        if line in others:
            raise RequestError(f"line {quoted(line)}: this is {one_of(others[line])}, not a line")
        near = difflib.get_close_matches(line, network.case.lines, n=1, cutoff=0.5)
        known = (
            f"did you mean {quoted(near[0])}?" if near else f"there are {listed(network.case.lines, 'and')}"
        )
        raise RequestError(f"line {quoted(line)}: no line has this name; {known}")
    network.place(f"{line}@50%")
    return record


def _scan(kind: str, line: str, ends: tuple[str, str], rows: tuple[FaultSolution, ...]) -> Scan:
    seen = np.zeros((2, 3, len(rows)), complex)
    left = np.zeros((3, 3, len(rows)), complex)
    for k, s in enumerate(rows):
        t = s.terminals
        for end, bus in enumerate(ends):
            at = [
                j
                for j in range(len(t.element))
                if t.element[j] == line and t.bus[j] == bus and not t.side[j].startswith("from ")
            ]
            if at:
                seen[end, :, k] = t.phases[:, at[0]]
        for row, bus in enumerate((ends[0], s.faults[0].bus, ends[1])):
            left[row, :, k] = s.at(bus)
    return Scan(
        kind,
        np.stack([s.current for s in rows], axis=1),
        np.array([s.residual for s in rows]),
        seen,
        left,
        rows,
    )
