"""What was read of a case: zones, per-unit impedances, windings, star points, assumptions."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from seqfault.case.records import Case
from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.equations.transformers import star_branches
from seqfault.faults.network import Network
from seqfault.model.assumptions import Assumption
from seqfault.model.elements import DELTA, ISOLATED, STAR, ZIGZAG, Complex, Model, WindingSets
from seqfault.model.windings import zero_sequence_effect
from seqfault.studies.protection import Protection, protection

Connection = Literal["star", "delta", "isolated star", "zigzag", "auto"]


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
    """What one winding does to zero sequence: path, through, circulates or open.

    ``others`` names the sides it hands zero sequence on to.
    """

    element: str
    side: str
    bus: str
    connection: Connection
    effect: str
    others: tuple[str, ...] = ()


@dataclass(frozen=True)
class StarPoint:
    """A star point, the ohms between it and earth (infinite isolated), and who shares it.

    ``voltage`` (V) is the phase voltage that stands on it in a bolted earth fault of an otherwise
    unearthed network.
    """

    name: str
    kind: str
    impedance: complex
    bus: str
    windings: tuple[str, ...]
    voltage: float


@dataclass(frozen=True)
class Device:
    """A record that is no impedance of the sequence networks: ``text`` says what it is."""

    name: str
    kind: str
    text: str


@dataclass(frozen=True)
class Coupling:
    """Mutual zero-sequence impedance of two lines, per unit on the common base."""

    lines: tuple[str, str]
    impedance: complex


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
    couplings: tuple[Coupling, ...]
    devices: tuple[Device, ...]
    out: tuple[str, ...]
    scenarios: tuple[tuple[str, str], ...]
    protection: Protection | None
    assumptions: tuple[Assumption, ...]
    warnings: tuple[str, ...]


def inspect_network(network: Network) -> Inspection:
    """What ``network`` was made of."""
    case, model = network.case, network.model
    guard = protection(case)
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
        couplings=tuple(_couplings(model)),
        devices=tuple(_devices(case, model)),
        out=tuple(name for _, name, record in case.records() if record.out),
        scenarios=tuple(_scenarios(case)),
        protection=guard,
        assumptions=model.assumptions + (guard.assumptions if guard else ()),
        warnings=model.warnings + (guard.warnings if guard else ()),
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
        if lines.earthed[k]:
            continue
        ends = (buses[lines.ends[0, k]], buses[lines.ends[1, k]])
        yield Element(name, lines.kinds[k], ends, lines.series[:, k], int(lines.count[k]), 1.0)
    zigzag = {
        name: complex(1 / sets.leakage[0, k, 0, 0])
        for sets in model.winding_sets
        if _apart(sets)
        for k, name in enumerate(sets.names)
    }
    for sets in reversed(model.winding_sets):
        for k, name in enumerate(sets.names):
            if _apart(sets):
                continue
            at = tuple(buses[b] for b in sets.bus[k])
            if len(at) == 3:
                yield from _three_windings(sets, k, at)
                continue
            ratio = float(sets.ratio[k, -1] / sets.ratio[k, 0])
            z = _inverse(sets.leakage[:, k, 0, 0])
            z[0] = zigzag.get(name, z[0])
            yield Element(name, sets.kind_of_record, at, z, int(sets.count[k]), ratio)
    sources = model.sources
    for k, name in enumerate(sources.names):
        if sources.kinds[k] == "load":
            continue
        z = _inverse(sources.admittance[:, k])
        yield Element(name, sources.kinds[k], (buses[sources.bus[k]],), z, 1, 1.0)


def _apart(sets: WindingSets) -> bool:
    """Whether ``sets`` is the zero sequence of zigzag windings that stand in another set."""
    return sets.kind_of_record == "transformer" and len(sets.sides) == 1


def _three_windings(sets: WindingSets, k: int, at: tuple[str, ...]) -> Iterator[Element]:
    """The pairs of windings as short-circuit tests give them, then the branches of their star."""
    name, count = sets.names[k], int(sets.count[k])
    pairs = np.full((3, 3), np.inf, complex)
    stars = np.full((3, 3), np.inf, complex)
    for s in range(3):
        if s == 0 and (sets.magnetised[k] or (sets.kind[k] == ZIGZAG).any()):
            continue
        z = np.linalg.inv(sets.leakage[s, k, 1:, 1:])
        pairs[s] = z[0, 0], z[1, 1], z[0, 0] + z[1, 1] - 2 * z[0, 1]
        stars[s] = star_branches(*(complex(each) for each in pairs[s]))
    for p, (a, b) in enumerate(((0, 1), (0, 2), (1, 2))):
        ratio = float(sets.ratio[k, b] / sets.ratio[k, a])
        label = f"{name} {sets.sides[a]}-{sets.sides[b]}"
        yield Element(label, "transformer", (at[a], at[b]), pairs[:, p], count, ratio)
    for w, side in enumerate(sets.sides):
        yield Element(f"{name} {side} of star", "transformer", (at[w],), stars[:, w], count, 1.0)


def _couplings(model: Model) -> Iterator[Coupling]:
    for group in model.lines.coupled:
        z = np.linalg.inv(group.admittance)
        names = [model.lines.names[k] for k in group.line.tolist()]
        for a in range(len(names)):
            for b in range(a + 1, len(names)):
                if abs(z[a, b]) > 1e-12 * abs(z).max():
                    yield Coupling((names[a], names[b]), complex(z[a, b]))


def _devices(case: Case, model: Model) -> Iterator[Device]:
    for name, tie in case.ties.items():
        state = "out" if tie.out else "closed: one node" if tie.closed else "open"
        yield Device(name, "tie", f"{tie.from_} to {tie.to}, {state}")
    for name, bank in case.capacitors.items():
        size = bank.power or bank.capacitance
        if not bank.out and size is not None:
            yield Device(name, "capacitor", f"at {bank.bus}, {size.text}, {bank.connection}")
    for name, load in case.loads.items():
        if load.out or load.bus not in model.index:
            continue
        factor = "" if load.power_factor is None else f" at power factor {_number(load.power_factor):g}"
        how = load.connection or "star, assumed"
        acts = "" if model.operating is not None else "; left out of the flat state"
        yield Device(name, "load", f"at {load.bus}, {load.power.text}{factor}, {how}{acts}")
    if model.operating is not None:
        for name, v, nominal in zip(
            model.buses, model.before.tolist(), model.nominal.tolist(), strict=True
        ):
            volts = f"{abs(v) * nominal / 1000:.4g} kV, {abs(v):.4f} of nominal"
            turn = f", {np.degrees(np.angle(v)):.1f} degrees in its own clock" if v else ""
            yield Device(name, "voltage", f"{volts}{turn}")
    converters = model.converters
    for k, name in enumerate(converters.names):
        bus = int(converters.bus[k])
        ampere = float(converters.limit[k] * base_current(model.nominal[bus], model.base_power))
        yield Device(
            name,
            "converter",
            f"at {model.buses[bus]}, feeds {ampere:.3g} A, {np.degrees(converters.angle[k]):.0f} degrees"
            f" behind its voltage, below {converters.threshold[k]:.2f} of nominal",
        )
    for k in np.flatnonzero(model.lines.earthed).tolist():
        yield Device(model.lines.names[k], "line", "out of service, earthed at both ends")


def _number(value: Any) -> float:
    return float(getattr(value, "value", value))


def _inverse(y: Complex) -> Complex:
    return np.asarray(np.divide(1, y, out=np.full(y.shape, np.inf, complex), where=y != 0))


def _windings(model: Model) -> Iterator[Winding]:
    names: dict[int, Connection] = {
        int(DELTA): "delta",
        int(ISOLATED): "isolated star",
        int(ZIGZAG): "zigzag",
    }
    zigzags = {
        (name, sets.sides[0]): zero_sequence_effect(sets, k, 0)
        for sets in model.winding_sets
        if _apart(sets)
        for k, name in enumerate(sets.names)
    }
    for sets in reversed(model.winding_sets):
        if _apart(sets):
            continue
        for k, name in enumerate(sets.names):
            for w in range(sets.kind.shape[1]):
                effect = zero_sequence_effect(sets, k, w)
                connection = names.get(int(sets.kind[k, w]), "star")
                if effect == "apart":
                    effect = zigzags[name, sets.sides[w]]
                elif _auto(sets, k, w):
                    connection = "auto"
                carrying = (sets.kind[k] == STAR) & (np.arange(sets.kind.shape[1]) != w)
                others = [sets.sides[v] for v in np.flatnonzero(carrying).tolist()]
                yield Winding(
                    name,
                    _side(sets, w),
                    model.buses[sets.bus[k, w]],
                    connection,
                    effect,
                    tuple(others) if connection in ("star", "auto") else (),
                )


def _auto(sets: WindingSets, k: int, w: int) -> bool:
    """Whether a winding shares its own unit's star point, as those of an auto-transformer do."""
    star = int(sets.star[k, w])
    joint = len(sets.sides) > 1 and w < 2 and star >= 0 and int(sets.star[k, 1 - w]) == star
    return joint and sets.names[k] in sets.autos


def _side(sets: WindingSets, w: int) -> str:
    return sets.sides[w]


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
            float(stars.base[k] / np.sqrt(3)),
        )
        for k, name in enumerate(stars.names)
    )


def _scenarios(case: Case) -> Iterator[tuple[str, str]]:
    for name in case.scenarios:
        change = case.tree["scenarios"][name]
        note = change.get("note", "") if isinstance(change, Mapping) else ""
        yield name, note if isinstance(note, str) else ""
