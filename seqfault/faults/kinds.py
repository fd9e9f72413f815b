"""Kinds of fault: the branches each puts on the phases of its place."""

from __future__ import annotations

import difflib

import msgspec
import numpy as np

from seqfault.equations.symmetrical import Complex
from seqfault.errors import RequestError, quoted


class Kind(msgspec.Struct, frozen=True):
    """A kind of fault; ``symbol`` is the subscript of IEC 60909-0, ``phases`` what it takes unasked."""

    name: str
    symbol: str
    phases: str
    earth: bool


KINDS: dict[str, Kind] = {
    kind.name: kind
    for kind in (
        Kind("three-phase", "k3", "abc", False),
        Kind("three-phase-ground", "k3E", "abc", True),
        Kind("line-line", "k2", "bc", False),
        Kind("line-line-ground", "k2E", "bc", True),
        Kind("line-ground", "k1", "a", True),
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
    ``zg`` from the common point to earth (line-ground: in series with ``zf``).
    """

    place: str
    kind: Kind
    phases: str
    zf: complex = 0j
    zg: complex = 0j


def fault_kind(name: str) -> Kind:
    """The kind called ``name``. Raises ``RequestError`` with the nearest name."""
    found = KINDS.get(SAME.get(name, name))
    if found is None:
        near = difflib.get_close_matches(name, [*KINDS, *SAME], n=1)
        hint = f"; did you mean {near[0]}?" if near else ""
        raise RequestError(f"kind {quoted(name)}: the kinds are {', '.join(KINDS)}{hint}")
    return found


def fault_at(place: str, kind: str, phases: str | None = None, zf: complex = 0, zg: complex = 0) -> Fault:
    """A checked ``Fault``. Raises ``RequestError`` for phases or impedances the kind cannot have."""
    found = fault_kind(kind)
    chosen = "".join(sorted(phases)) if phases is not None else found.phases
    size = len(found.phases)
    if len(set(chosen)) != len(chosen) or not set(chosen) <= set("abc") or len(chosen) != size:
        options = {1: "a, b or c", 2: "ab, bc or ac", 3: "abc"}[size]
        raise RequestError(
            f"phases {quoted(str(phases))}: a {found.name} fault takes {options}, written without a comma"
        )
    if zg != 0 and not found.earth:
        raise RequestError(
            f"zg: a {found.name} fault does not touch earth; give its impedance as zf,"
            " or ask for a kind to ground"
        )
    for label, value in (("zf", zf), ("zg", zg)):
        if not np.isfinite(value):
            raise RequestError(f"{label}: read {value}; it must be a finite number of ohm")
        if complex(value).real < 0:
            raise RequestError(
                f"{label}: its resistance is {complex(value).real:g} ohm; it cannot be negative"
            )
    return Fault(place, found, chosen, complex(zf), complex(zg))


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
        width = size if fault.kind.earth else size - 1
        to_loops = (np.eye(size) - np.eye(size, k=-1))[:, :width].astype(complex)
        z = zf * np.eye(size) + (zg if fault.kind.earth else 0) * np.ones((size, size))
    incidence = np.zeros((3, to_loops.shape[1]), complex)
    incidence[at] = to_loops
    return incidence, to_loops.T @ z @ to_loops
