"""Kinds of fault: the loops each puts on the phases of its place, or through a broken conductor."""

from __future__ import annotations

import difflib

import msgspec
import numpy as np

from seqfault.equations.symmetrical import Complex
from seqfault.errors import RequestError, quoted


class Kind(msgspec.Struct, frozen=True):
    """A kind of fault; ``symbol`` is the subscript of IEC 60909-0, ``phases`` what it takes unasked.

    ``series`` kinds open the phases they name.
    """

    name: str
    symbol: str
    phases: str
    earth: bool
    series: bool = False


KINDS: dict[str, Kind] = {
    kind.name: kind
    for kind in (
        Kind("three-phase", "k3", "abc", False),
        Kind("three-phase-ground", "k3E", "abc", True),
        Kind("line-line", "k2", "bc", False),
        Kind("line-line-ground", "k2E", "bc", True),
        Kind("line-ground", "k1", "a", True),
        Kind("open-one", "", "a", False, series=True),
        Kind("open-two", "", "bc", False, series=True),
        Kind("open-three", "", "abc", False, series=True),
    )
}
SAME = {
    "line-earth": "line-ground",
    "line-line-earth": "line-line-ground",
    "three-phase-earth": "three-phase-ground",
}


class Fault(msgspec.Struct, frozen=True):
    """A fault asked for: ``zf`` and ``zg`` in ohm.

    ``zf`` lies in each faulted phase up to the common point (line-line: once, between the phases),
    ``zg`` from the common point to earth (line-ground: in series with ``zf``). An open conductor whose
    end has ``fallen`` lies on earth through them on that side: the name of a bus or element, ``source``
    or ``load``; empty where it hangs clear.
    """

    place: str
    kind: Kind
    phases: str
    zf: complex = 0j
    zg: complex = 0j
    fallen: str = ""

    @property
    def earth(self) -> bool:
        """Whether it touches earth."""
        return self.kind.earth or bool(self.fallen)


def fault_kind(name: str) -> Kind:
    """The kind called ``name``. Raises ``RequestError`` with the nearest name."""
    found = KINDS.get(SAME.get(name, name))
    if found is None:
        symbols = {kind.symbol.lower(): kind.name for kind in KINDS.values() if kind.symbol}
        if name.lower() in symbols:
            raise RequestError(f"kind {quoted(name)}: write {symbols[name.lower()]}")
        near = difflib.get_close_matches(name, [*KINDS, *SAME], n=1)
        hint = f"; did you mean {near[0]}?" if near else ""
        raise RequestError(f"kind {quoted(name)}: the kinds are {', '.join(KINDS)}{hint}")
    return found


def fault_at(
    place: str,
    kind: str = "line-ground",
    phases: str | None = None,
    zf: complex = 0,
    zg: complex = 0,
    fallen: str = "",
) -> Fault:
    """A checked ``Fault``. Raises ``RequestError`` for phases or impedances the kind cannot have."""
    found = fault_kind(kind)
    chosen = "".join(sorted(phases)) if phases is not None else found.phases
    size = len(found.phases)
    if len(set(chosen)) != len(chosen) or not set(chosen) <= set("abc") or len(chosen) != size:
        options = {1: "a, b or c", 2: "ab, bc or ac", 3: "abc"}[size]
        raise RequestError(
            f"phases {quoted(str(phases))}: a {found.name} fault takes {options}, written without a comma"
        )
    if fallen and not found.series:
        raise RequestError(
            f"fallen: a {found.name} fault breaks no conductor; ask for open-one, open-two or open-three"
        )
    if found.series and not fallen and (zf != 0 or zg != 0):
        raise RequestError(
            f"zf, zg: an {found.name} conductor touches nothing; say on which side it has fallen to earth"
        )
    if zg != 0 and not isinstance(zg, str) and not (found.earth or fallen):
        raise RequestError(
            f"zg: a {found.name} fault does not touch earth; give its impedance as zf,"
            " or ask for a kind to ground"
        )
    for label, value in (("zf", zf), ("zg", zg)):
        if isinstance(value, str):
            raise RequestError(f"{label}: read {quoted(value)}; a number of ohm is wanted, as in 0.5")
        if not np.isfinite(value):
            raise RequestError(f"{label}: read {value}; it must be a finite number of ohm")
        if complex(value).real < 0:
            raise RequestError(
                f"{label}: its resistance is {complex(value).real:g} ohm; it cannot be negative"
            )
    return Fault(place, found, chosen, complex(zf), complex(zg), fallen)


def branches(fault: Fault) -> tuple[Complex, Complex]:
    """Incidence (3, b) of the fault's loops on phases a, b, c, and their impedances (b, b) in ohm.

    Loops run from each faulted phase to the next, and for faults to earth from the last phase to
    earth. A loop between phases sees exactly nothing of zero sequence, whose impedance may be larger
    than the others by more digits than a number holds.
    """
    at = ["abc".index(phase) for phase in fault.phases]
    zf, zg = fault.zf, fault.zg
    size = len(at)
    if fault.kind.name == "line-line":
        to_loops, z = np.array([[1], [-1]], complex), np.array([[zf, 0], [0, 0]])
    else:
        width = size if fault.earth else size - 1
        to_loops = (np.eye(size) - np.eye(size, k=-1))[:, :width].astype(complex)
        z = zf * np.eye(size) + (zg if fault.earth else 0) * np.ones((size, size))
    incidence = np.zeros((3, to_loops.shape[1]), complex)
    incidence[at] = to_loops
    return incidence, to_loops.T @ z @ to_loops


def sound_poles(fault: Fault) -> Complex:
    """Incidence (3, b) of the loops through the poles that an open conductor leaves closed.

    The first of two runs out through one pole and back through the other: it sees nothing of zero
    sequence.
    """
    left = ["abc".index(phase) for phase in "abc" if phase not in fault.phases]
    loops = np.zeros((3, len(left)), complex)
    if len(left) == 2:
        loops[left] = [[1, 1], [-1, 1]]
    elif left:
        loops[left[0], 0] = 1
    return loops
