"""What was read of a case: zones, per-unit impedances, windings, star points, assumptions."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from seqfault.case.records import Case
from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.faults.network import Network
from seqfault.model.assumptions import Assumption
from seqfault.model.elements import DELTA, ISOLATED, Complex, Model, WindingSets
from seqfault.model.windings import zero_sequence_effect

Connection = Literal["star", "delta", "isolated star"]


@dataclass(frozen=True)
class Zone:
    """Buses of one nominal voltage (V), with the base impedance (ohm) and base current (A).

    ``charging`` (A) is what all capacitances of the zone would send into a bolted earth fault,
    were the network unearthed: 3 ω C0 U/√3.
    """

    nominal: float
    base_impedance: float
    base_current: float
    buses: tuple[str, ...]
    dead: tuple[str, ...]
    charging: float


@dataclass(frozen=True, eq=False)
class Element:
    """An element's impedances (3,) per unit on the common base, infinite where there is no path.

    ``kind`` is the record's; ``buses`` its terminals; ``count`` circuits or units in parallel,
    whose joint impedance it is; ``ratio`` a transformer's rated over its nominal voltage ratio.
    """

    name: str
    kind: str
    buses: tuple[str, ...]
    impedance: Complex
    count: int
    ratio: float


@dataclass(frozen=True)
class Winding:
    """What one winding does to zero sequence: path, through, circulates or open."""

    element: str
    side: str
    bus: str
    connection: Connection
    effect: str


@dataclass(frozen=True)
class StarPoint:
    """A star point, the ohms between it and earth (infinite isolated), and who shares it."""

    name: str
    kind: str
    impedance: complex
    bus: str
    windings: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Inspection:
    """All that ``inspect`` tells of one state."""

    title: str
    sha256: str
    state: str
    frequency: float
    base_power: float
    prefault: float
    zones: tuple[Zone, ...]
    elements: tuple[Element, ...]
    windings: tuple[Winding, ...]
    stars: tuple[StarPoint, ...]
    out: tuple[str, ...]
    scenarios: tuple[tuple[str, str], ...]
    assumptions: tuple[Assumption, ...]
    warnings: tuple[str, ...]


def inspect_network(network: Network) -> Inspection:
    """What ``network`` was made of."""
    case, model = network.case, network.model
    return Inspection(
        title=model.title,
        sha256=model.sha256,
        state=model.state,
        frequency=model.frequency,
        base_power=model.base_power,
        prefault=abs(complex(case.prefault.voltage.value)),
        zones=tuple(_zones(model)),
        elements=tuple(_elements(model)),
        windings=tuple(_windings(model)),
        stars=_stars(model),
        out=tuple(name for _, name, record in case.records() if record.out),
        scenarios=tuple(_scenarios(case)),
        assumptions=model.assumptions,
        warnings=model.warnings,
    )


def _zones(model: Model) -> Iterator[Zone]:
    charging = np.zeros(len(model.buses))
    current = base_current(model.nominal, model.base_power)
    start = model.lines.ends[0]  # both ends are of one voltage; an open end's capacitance stays
    np.add.at(charging, start, 6 * np.abs(model.lines.shunt[0]) * current[start])
    at = model.capacitances.bus
    np.add.at(charging, at, 3 * np.abs(model.capacitances.admittance[0]) * current[at])
    for nominal in sorted(set(model.nominal.tolist()), reverse=True):
        inside = np.flatnonzero(model.nominal == nominal).tolist()
        yield Zone(
            nominal,
            float(base_impedance(nominal, model.base_power)),
            float(base_current(nominal, model.base_power)),
            tuple(model.buses[k] for k in inside),
            tuple(model.buses[k] for k in inside if not model.live[k]),
            float(charging[inside].sum()),
        )


def _elements(model: Model) -> Iterator[Element]:
    lines, buses = model.lines, model.buses
    for k, name in enumerate(lines.names):
        ends = (buses[lines.ends[0, k]], buses[lines.ends[1, k]])
        yield Element(name, "line", ends, lines.series[:, k], int(lines.count[k]), 1.0)
    for sets in reversed(model.winding_sets):
        for k, name in enumerate(sets.names):
            at = tuple(buses[b] for b in sets.bus[k])
            ratio = float(sets.ratio[k, -1] / sets.ratio[k, 0])
            z = _inverse(sets.leakage[:, k, 0, 0])
            yield Element(name, sets.kind_of_record, at, z, int(sets.count[k]), ratio)
    sources = model.sources
    for k, name in enumerate(sources.names):
        z = _inverse(sources.admittance[:, k])
        yield Element(name, sources.kinds[k], (buses[sources.bus[k]],), z, 1, 1.0)


def _inverse(y: Complex) -> Complex:
    return np.asarray(np.divide(1, y, out=np.full(y.shape, np.inf, complex), where=y != 0))


def _windings(model: Model) -> Iterator[Winding]:
    names: dict[int, Connection] = {int(DELTA): "delta", int(ISOLATED): "isolated star"}
    for sets in reversed(model.winding_sets):
        for k, name in enumerate(sets.names):
            for w in range(sets.kind.shape[1]):
                yield Winding(
                    name,
                    _side(sets, w),
                    model.buses[sets.bus[k, w]],
                    names.get(int(sets.kind[k, w]), "star"),
                    zero_sequence_effect(sets, k, w),
                )


def _side(sets: WindingSets, w: int) -> str:
    return sets.sides[w] if len(sets.sides) > 1 else ""


def _stars(model: Model) -> tuple[StarPoint, ...]:
    stars = model.stars
    shared: dict[int, list[str]] = {}
    for sets in reversed(model.winding_sets):
        for k, name in enumerate(sets.names):
            for w, star in enumerate(sets.star[k].tolist()):
                if star >= 0:
                    shared.setdefault(star, []).append(f"{name} {_side(sets, w)}".rstrip())
    return tuple(
        StarPoint(
            name,
            stars.kinds[k],
            complex(stars.impedance[k]),
            model.buses[stars.bus[k]],
            tuple(shared.get(k, ())),
        )
        for k, name in enumerate(stars.names)
    )


def _scenarios(case: Case) -> Iterator[tuple[str, str]]:
    for name in case.scenarios:
        change = case.tree["scenarios"][name]
        note = change.get("note", "") if isinstance(change, Mapping) else ""
        yield name, note if isinstance(note, str) else ""
