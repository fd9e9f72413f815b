"""A neutral as plain values: the tree for JSON, the long rows for CSV. A, V, ohm, W, J."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from seqfault.faults.neutral_faults import EarthFaults
from seqfault.faults.neutral_ports import KINDS
from seqfault.report.data import Quantity, cartesian, header, polar
from seqfault.report.neutral import NeutralAnswer, assumptions, notes
from seqfault.report.tables import once
from seqfault.studies.neutral import Standing
from seqfault.studies.neutral_relays import seen_by
from seqfault.studies.neutral_sweep import Sweep
from seqfault.studies.neutral_target import Target
from seqfault.studies.winding_cover import WindingCover


def neutral_tree(answer: NeutralAnswer) -> dict[str, Any]:
    """``answer`` as plain values; impedances ``[R, X]``, null open, phasors ``[magnitude, degrees]``."""
    report = answer.report
    neutral, duty = report.neutral, report.duty
    tree = header(report.standing[0].state.network)
    if len(report.standing) > 1:
        tree["scenario"] = "all"
    tree |= {
        "neutral": neutral.name,
        "place": neutral.place,
        "nominal": neutral.nominal,
        "device": neutral.device,
        "duration": duty.duration,
        "temperature_rise": duty.rise,
        "temperature_coefficient": duty.coefficient,
        "continuous": duty.continuous,
        "states": [
            _standing(s, duty.duration)
            | {
                "failures": [
                    {"what": f.what, "name": f.name or None, **_column(f.faults, 0, duty.duration)}
                    for f in failures
                ]
            }
            for s, failures in zip(report.standing, report.failures, strict=True)
        ],
    }
    if answer.target is not None:
        tree["target"] = _target(answer)
    if answer.sweep is not None:
        tree["sweep"] = _sweep(answer, answer.sweep)
    if answer.cover is not None:
        tree["winding"] = _cover(answer.cover)
    warnings = once(w for s in report.standing for w in s.state.network.model.warnings)
    return tree | {
        "notes": list(notes(answer)),
        "assumptions": list(assumptions(answer)),
        "warnings": list(warnings),
    }


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _column(faults: EarthFaults, n: int, duration: float) -> dict[str, Any]:
    """One of the ohms: both kinds of fault."""
    out: dict[str, Any] = {"ohms": cartesian(faults.ohms[n])}
    for k, kind in enumerate(KINDS):
        power = float(faults.power[k, n])
        phases = [polar(v) for v in faults.sound[k, : 2 - k, n]]
        out[kind] = {
            "residual": polar(faults.earth[k, n]),
            "greatest_phase": float(faults.phase[k, n]),
            "neutral_current": polar(faults.neutral[k, n]),
            "neutral_voltage": polar(faults.star[k, n]),
            "sound_phases": dict(zip(("bc", "a")[k], phases, strict=True)),
            "earth_fault_factor": float(faults.factor[k, n]),
            "power": power,
            "energy": power * duration,
        }
    return out


def _standing(s: Standing, duration: float) -> dict[str, Any]:
    g = s.grounding
    return {
        "scenario": s.state.name,
        "cold": _column(s.faults, 0, duration),
        "hot": _column(s.faults, 1, duration),
        "let_through": {
            name: {"current": s.let_through[k], "power": s.heat[k], "energy": s.heat[k] * duration}
            for k, name in enumerate(("cold", "hot"))
        },
        "home": [{"path": p.path, "current": polar(p.current)} for p in s.solutions[0].home],
        "charging": {
            "total": s.charging.total,
            "let_through_over_it": _finite(s.resistive_share),
            "shares": [
                {"name": c.name, "kind": c.kind, "count": c.count, "current": c.current}
                for c in s.charging.shares
            ],
            "not_stated": list(s.charging.silent),
        },
        "class_of_grounding": {
            "z0": cartesian(g.z0),
            "z1": cartesian(g.z1),
            "x0_over_x1": _finite(g.x0_over_x1),
            "r0_over_x1": _finite(g.r0_over_x1),
            "r0_over_x0": _finite(g.r0_over_x0),
            "by_ratios": g.by_ratios,
            "effective_by_ratios": g.within_ratios,
            "earth_fault_factor": g.factor,
            "kind": g.kind,
            "phase": g.phase,
            "coefficient": g.coefficient,
            "effective": g.effective,
        },
        "earthing_transformers": [
            {
                "name": d.name,
                "record": d.record,
                "kind": d.kind,
                "neutral_current": d.neutral,
                "phase_current": d.phase,
                "short_time_rating": d.needed,
                "hundred_percent_ohms": _finite(d.hundred_percent),
                "z0": cartesian(d.z0),
                "z0_percent": _finite(d.z0_percent),
                "rating": d.rating,
                "duration": d.duration,
            }
            for d in s.duties
        ],
    }


def _sweep(answer: NeutralAnswer, swept: Sweep) -> list[dict[str, Any]]:
    out = []
    names = [state.name for state in answer.report.neutral.states]
    columns = {
        "to_earth": swept.earth,
        "neutral_current": swept.neutral,
        "neutral_voltage": swept.star,
        "earth_fault_factor": swept.sound,
        "power": swept.power,
    }
    seen = seen_by(answer.report.neutral, swept.ohms)
    for n in range(len(swept.ohms)):
        row: dict[str, Any] = {"ohms": cartesian(swept.ohms[n])}
        for key, by in columns.items():
            row[key] = {
                "value": float(by.value[n]),
                "kind": KINDS[int(by.kind[n])],
                "scenario": names[int(by.state[n])],
            }
        row["energy"] = float(swept.energy[n])
        row["relays"] = {
            one.view.name: {
                "least_current": float(one.current[n]),
                "pickup": one.view.pickup,
                "multiple": float(one.multiple[n]),
                "scenario": one.state[n],
            }
            for one in seen
        }
        row["states"] = [
            {"scenario": name, **_column(faults, n, swept.duration)}
            for name, faults in zip(names, swept.faults, strict=True)
        ]
        out.append(row)
    return out


def _target(answer: NeutralAnswer) -> dict[str, Any]:
    target, neutral = answer.target, answer.report.neutral
    assert isinstance(target, Target)
    ohms = None if not math.isfinite(target.ohms) else cartesian(target.ohms * neutral.direction)
    ratio = (neutral.record.ratio or 1.0) ** 2
    states = []
    if ohms is not None:
        for state in neutral.states:
            faults = state.faults(np.array([target.ohms * neutral.direction]))
            states.append({"scenario": state.name, **_column(faults, 0, answer.report.duty.duration)})
    return {
        "current": target.current,
        "sound_phase_below": target.limit,
        "see": dict(target.see),
        "ohms": ohms,
        "ohms_to_state": None if ohms is None else [part / ratio for part in ohms],
        "met": target.met,
        "binds": target.binds,
        "scenario": target.state,
        "other_ohms": list(target.others),
        "for_current": [
            {"scenario": state.name, "ohms": _finite(value)}
            for state, value in zip(neutral.states, target.for_current, strict=False)
        ],
        "reach": [
            {
                "scenario": r.state,
                "least": r.least,
                "least_ohms": _finite(r.least_ohms),
                "greatest": r.greatest,
                "greatest_ohms": _finite(r.greatest_ohms),
            }
            for r in target.reach
        ],
        "states": states,
    }


def _cover(c: WindingCover) -> dict[str, Any]:
    return {
        "generator": c.generator,
        "scenario": c.scenario,
        "pickup": c.pickup,
        "phase_voltage": c.voltage,
        "neutral": cartesian(c.neutral),
        "winding": cartesian(c.winding),
        "unprotected": _finite(c.unprotected),
        "unprotected_without_winding_impedance": c.simple,
        "cover": c.cover,
        "resistor": c.resistor,
    }


def neutral_rows(answer: NeutralAnswer) -> Iterator[Quantity]:
    """``answer`` in long form; ``where`` says of which ohms a value is."""
    report = answer.report
    neutral, place = report.neutral, report.neutral.place
    for s, failures in zip(report.standing, report.failures, strict=True):
        state = s.state.name
        for k, temperature in enumerate(("cold", "hot")):
            label = f"{neutral.name} as it stands, {temperature}"
            yield from _values(place, label, state, s.faults, k, report.duty.duration)
            yield Quantity(place, "", "let-through", "", s.let_through[k], "A", None, label, state)
        for share in s.charging.shares:
            yield Quantity(place, "", "charging current", "", share.current, "A", None, share.name, state)
        g, name = s.grounding, neutral.name
        for quantity, value in (
            ("X0/X1", g.x0_over_x1),
            ("R0/X1", g.r0_over_x1),
            ("R0/X0", g.r0_over_x0),
            ("coefficient of grounding", g.coefficient),
        ):
            yield Quantity(place, "", quantity, "", _finite(value), "", None, name, state)
        yield Quantity(place, "", "class by ratios", "", g.by_ratios, "", None, name, state)
        for d in s.duties:
            yield Quantity(place, d.kind, "phase current", "", d.phase, "A", None, d.name, state)
            yield Quantity(place, d.kind, "short-time rating", "", d.needed, "VA", None, d.name, state)
        for failure in failures[1:]:
            label = f"{failure.name} lost" if failure.what == "lost" else f"{name} {failure.what}"
            yield from _values(place, label, state, failure.faults, 0, report.duty.duration)
    if answer.sweep is not None:
        swept = answer.sweep
        for item, faults in zip(neutral.states, swept.faults, strict=True):
            for n, z in enumerate(swept.ohms):
                label = "open" if not np.isfinite(z) else f"{abs(z):.12g} ohm"
                yield from _values(place, label, item.name, faults, n, swept.duration)
        for one in seen_by(neutral, swept.ohms):
            for n, z in enumerate(swept.ohms):
                label = "open" if not np.isfinite(z) else f"{abs(z):.12g} ohm"
                for quantity, number, unit in (
                    ("least current seen", one.current[n], "A"),
                    ("times pickup", one.multiple[n], ""),
                ):
                    found = float(number)
                    yield Quantity(
                        place, label, quantity, "", found, unit, None, one.view.name, one.state[n]
                    )
    target = answer.target
    if target is not None:
        name, state = neutral.name, target.state
        yield Quantity(place, "", "ohms for the target", "", _finite(target.ohms), "ohm", None, name, state)
        yield Quantity(place, "", "what binds", "", target.binds, "", None, name, state)
    if answer.cover is not None:
        c = answer.cover
        for quantity, part in (("unprotected share", c.unprotected), ("the same, simple rule", c.simple)):
            yield Quantity(place, "", quantity, "", _finite(part), "", None, c.generator, c.scenario)
        if c.resistor is not None:
            text = "resistor for the cover"
            yield Quantity(place, "", text, "", c.resistor, "ohm", None, c.generator, c.scenario)


def _values(
    place: str, label: str, state: str, faults: EarthFaults, n: int, duration: float
) -> Iterator[Quantity]:
    for k, kind in enumerate(KINDS):
        for quantity, phasor, unit in (
            ("current to earth", faults.earth[k, n], "A"),
            ("neutral current", faults.neutral[k, n], "A"),
            ("neutral voltage", faults.star[k, n], "V"),
        ):
            size, angle = polar(phasor)
            yield Quantity(place, kind, quantity, "", size, unit, angle, label, state)
        power = float(faults.power[k, n])
        for quantity, value, unit in (
            ("earth-fault factor", float(faults.factor[k, n]), ""),
            ("power", power, "W"),
            ("energy", power * duration, "J"),
        ):
            yield Quantity(place, kind, quantity, "", value, unit, None, label, state)
