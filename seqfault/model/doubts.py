"""Warnings of the trade: data that are possible, yet more often a slip, each with its numbers."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import msgspec
import numpy as np

from seqfault.case.records import Case
from seqfault.equations.per_unit import base_current
from seqfault.errors import quoted
from seqfault.model.coils import ARC_SUPPRESSION, earth_susceptance
from seqfault.model.elements import DELTA, STAR, Bools, Model, WindingSets

RULE = "common practice"


def doubts(model: Model, case: Case) -> tuple[str, ...]:
    """What a colleague would ask about ``model``, built from ``case``."""
    earthed = _earthing(model)
    charging = earth_susceptance(model, model.galvanic)
    return (
        *_small_resistors(model, case, charging),
        *_parallel_neutrals(model, case, earthed),
        *_idle_star_points(model, earthed),
        *_unearthed(model, earthed, charging),
        *_strong_earth_faults(model),
        *_assumed_zero_sequence(model),
        *_missing_capacitance(model, case, earthed),
    )


def _round(value: float) -> str:
    """Three significant digits without an exponent."""
    return f"{float(f'{value:.3g}'):g}"


def _network_of(model: Model, star: int) -> int:
    return int(model.galvanic[model.node[model.stars.bus[star]]])


def _carrying(sets: WindingSets) -> Bools:
    """Whether an earthed winding of each unit (m, 1) really is a way to earth for zero sequence."""
    others = ((sets.kind == STAR) | (sets.kind == DELTA)).sum(axis=1) - 1
    single = sets.kind.shape[1] == 1
    return np.asarray((single | (others > 0) | sets.magnetised)[:, None])


class _Earthing(msgspec.Struct, frozen=True):
    """Networks joined to earth by label: ``solid`` ones, infeeds count as such; and of every one the ways
    that have an ``impedance``: name and ohm.
    """

    solid: set[int]
    impedance: dict[int, list[tuple[str, complex]] | None]


def _earthing(model: Model) -> _Earthing:
    """Ways to earth of each metallically joined network."""
    impeded: dict[int, list[tuple[str, complex]] | None] = {}
    solid: set[int] = set()
    stars = model.stars
    used = np.zeros(len(stars.names), bool)
    for sets in model.winding_sets:
        used[sets.star[(sets.kind == STAR) & (sets.star >= 0) & _carrying(sets)]] = True
    at = np.flatnonzero(used & np.isfinite(stars.impedance))
    labels = model.galvanic[model.node[stars.bus[at]]].tolist()
    for k, z, label in zip(at.tolist(), stars.impedance[at].tolist(), labels, strict=True):
        ways = impeded.setdefault(label)
        if z == 0:
            solid.add(label)
        elif ways is None:
            impeded[label] = [(stars.names[k], z)]
        else:
            ways.append((stars.names[k], z))
    sources = model.sources
    fed = model.galvanic[sources.node[sources.admittance[0] != 0]].tolist()
    solid.update(fed)
    for label in fed:
        impeded.setdefault(label)
    return _Earthing(solid, impeded)


def idle_star_points(model: Model) -> dict[int, list[str]]:
    """Star points by network that are joined to earth and carry nothing all the same.

    Their unit has no other winding for zero sequence and no magnetising branch stated.
    """
    out: dict[int, list[str]] = {}
    stars = model.stars
    for sets in model.winding_sets:
        idle = np.nonzero((sets.kind == STAR) & (sets.star >= 0) & ~_carrying(sets))
        labels = model.galvanic[sets.node[idle]].tolist()
        for star, label in zip(sets.star[idle].tolist(), labels, strict=True):
            if np.isfinite(stars.impedance[star]):
                out.setdefault(label, []).append(stars.names[star])
    return out


def _idle_star_points(model: Model, earthed: _Earthing) -> Iterator[str]:
    live = set(model.galvanic[model.node][model.live].tolist())
    for label, names in idle_star_points(model).items():
        if label in earthed.impedance or label not in live:
            continue
        shown = ", ".join(quoted(name) for name in dict.fromkeys(names))
        buses = [model.buses[k] for k in np.flatnonzero(model.galvanic[model.node] == label)]
        yield (
            f"star point {shown}: it is earthed, but no other winding of its unit lets zero sequence"
            f" through and no magnetising branch is stated, so earth faults at {quoted(buses[0])} carry"
            " nothing in this model; a real core may let a large current through, a three-limb one above"
            " all: state z0_magnetising or zero_tests"
        )


def _phase_voltages(model: Model) -> list[float]:
    """Largest nominal voltage to earth of each metallically joined network, V."""
    out = np.zeros(int(model.galvanic.max(initial=-1)) + 1)
    np.maximum.at(out, model.galvanic[model.node], model.nominal)
    return list((out / np.sqrt(3)).tolist())


def _small_resistors(model: Model, case: Case, charging: Mapping[int, float]) -> Iterator[str]:
    stars = model.stars
    size = stars.impedance
    resistive = np.isfinite(size) & (size.real > np.abs(size.imag))
    for k in np.flatnonzero(resistive).tolist():
        name, z = stars.names[k], complex(size[k])
        if stars.kinds[k] != "neutral":
            continue
        if case.neutrals[name].kind == ARC_SUPPRESSION:
            continue
        v = float(stars.base[k] / np.sqrt(3))
        through, capacitive = v / abs(z), 3 * charging[_network_of(model, k)] * v
        if through < 0.999 * capacitive:
            yield (
                f"neutral {quoted(name)}: it lets {_round(through)} A through, less than the"
                f" {_round(capacitive)} A that the network's capacitance draws in an earth fault; arcing"
                f" faults may swing the voltage up: choose at least {_round(capacitive)} A ({RULE})"
            )


def _parallel_neutrals(model: Model, case: Case, earthed: _Earthing) -> Iterator[str]:
    voltage = _phase_voltages(model)
    for label, ways in earthed.impedance.items():
        impeded = [(n, z) for n, z in ways or () if case.neutrals[n].kind != ARC_SUPPRESSION]
        if len(impeded) < 2:
            continue
        v = voltage[label]
        names = ", ".join(quoted(name) for name, _ in impeded)
        total = abs(sum(v / z for _, z in impeded))
        alone = ", ".join(f"{_round(v / abs(z))} A" for _, z in impeded)
        yield (
            f"neutrals {names} earth the same network in this state: {alone} each alone,"
            f" {_round(total)} A together"
        )


def _unearthed(
    model: Model,
    earthed: _Earthing,
    charging: Mapping[int, float],
) -> Iterator[str]:
    """A live network of deltas only; bare transformer terminals and infeeds stated open are meant."""
    sources, label_of = model.sources, model.galvanic
    motors = np.array([kind == "motor" for kind in sources.kinds], bool)
    wired = set(label_of[model.lines.nodes[model.lines.nodes >= 0]].tolist())
    wired |= set(label_of[sources.node[motors]].tolist())
    wired -= set(label_of[sources.node[~motors]].tolist())
    idle = idle_star_points(model)
    for label in dict.fromkeys(label_of[model.node][model.live].tolist()):
        if label in earthed.impedance or charging.get(label, 0.0) > 0 or label not in wired:
            continue
        if label in idle:
            continue  # told with its star point
        names = [model.buses[k] for k in np.flatnonzero(model.galvanic[model.node] == label)]
        shown = ", ".join(quoted(name) for name in names[:6])
        more = f" and {len(names) - 6} more" if len(names) > 6 else ""
        yield (
            f"bus {shown}{more}: nothing joins this network to earth, and no capacitance is stated;"
            " earth faults there carry nothing, and the voltage to earth is undefined otherwise"
        )


def unearthed_buses(model: Model) -> tuple[str, ...]:
    """Live buses whose network no star point, earthing transformer or infeed joins to earth."""
    earthed = _earthing(model).impedance
    label = model.galvanic[model.node]
    return tuple(
        name for k, name in enumerate(model.buses) if model.live[k] and int(label[k]) not in earthed
    )


def lost_earth(model: Model, bare: tuple[str, ...], base: Model) -> tuple[str, ...]:
    """Networks of the ``bare`` buses that are earthed in the ``base`` case and not in this state."""
    earthed = _earthing(base).impedance
    charging = earth_susceptance(model, model.galvanic)
    lost: dict[int, list[str]] = {}
    for name in bare:
        k = base.index.get(name)
        if k is not None and base.live[k] and int(base.galvanic[base.node[k]]) in earthed:
            label = int(model.galvanic[model.node[model.index[name]]])
            lost.setdefault(label, []).append(name)
    out, voltage = [], _phase_voltages(model)
    for label, names in lost.items():
        if charging[label] <= 0:  # bare terminals; wired networks have a warning of their own
            continue
        shown = ", ".join(quoted(name) for name in names[:6])
        more = f" and {len(names) - 6} more" if len(names) > 6 else ""
        ampere = 3 * charging[label] * voltage[label]
        out.append(
            f"bus {shown}{more}: this state takes away what earths the network in the base case; only its"
            f" capacitance is left ({_round(ampere)} A in an earth fault)"
        )
    return tuple(out)


def _strong_earth_faults(model: Model) -> Iterator[str]:
    machines = next(s for s in model.winding_sets if s.kind_of_record == "generator")
    for k, name in enumerate(machines.names):
        star = int(machines.star[k, 0])
        if machines.kind[k, 0] != STAR or model.stars.impedance[star] != 0:
            continue
        y0, y1, y2 = machines.leakage[:, k, 0, 0]
        ampere = base_current(model.nominal[machines.bus[k, 0]], model.base_power)
        three, one = abs(y1) * ampere, abs(3 / (1 / y0 + 1 / y1 + 1 / y2)) * ampere
        if one > 1.001 * three:
            yield (
                f"generator {quoted(name)}: solidly earthed, its earth fault of {_round(one)} A exceeds its"
                f" three-phase fault of {_round(three)} A, which is what its windings are braced for"
                f" ({RULE}); a reactor or resistor in the neutral cures it"
            )


def _assumed_zero_sequence(model: Model) -> Iterator[str]:
    for entry in model.assumptions:
        if entry.record != "transformer" or not entry.text.startswith("z0 not stated"):
            continue
        names = _matters(model).intersection(entry.names)
        kept = [quoted(name) for name in entry.names if name in names]
        if kept:
            shown = ", ".join(kept[:6]) + (f" and {len(kept) - 6} more" if len(kept) > 6 else "")
            yield (
                f"transformer {shown}: earth-fault currents rest on an assumed zero-sequence"
                " impedance (z0_over_z1 = 1); ask the maker for the test report"
            )


def _matters(model: Model) -> set[str]:
    """Transformers whose zero-sequence impedance carries current."""
    out: set[str] = set()
    for sets in model.winding_sets:
        if sets.kind_of_record == "transformer" and len(sets.sides) > 1:
            stars = (sets.kind == STAR).sum(axis=1)
            carries = (stars > 1) | ((stars == 1) & (sets.kind == DELTA).any(axis=1))
            out.update(sets.names[unit] for unit in np.flatnonzero(carries).tolist())
    return out


def _missing_capacitance(model: Model, case: Case, earthed: _Earthing) -> Iterator[str]:
    lines = model.lines
    bare: dict[int, list[str]] = {}
    at = np.flatnonzero(~lines.earthed & (lines.shunt[0] == 0))
    for k, label in zip(at.tolist(), model.galvanic[lines.nodes[0, at]].tolist(), strict=True):
        if label not in earthed.solid and lines.names[k] in case.lines:
            bare.setdefault(label, []).append(lines.names[k])
    voltage = _phase_voltages(model)
    for label, names in bare.items():
        v = voltage[label] * np.sqrt(3) / 1000
        shown = ", ".join(quoted(name) for name in names[:6])
        more = f" and {len(names) - 6} more" if len(names) > 6 else ""
        yield (
            f"line {shown}{more}: no c0 stated, and this {v:.3g} kV network is not solidly earthed:"
            " the charging current, and what healthy feeders show their relays, is too small"
        )
