"""A solved fault as plain values: the tree for JSON, the long rows for CSV.

Complex values are ``[magnitude, degrees]``, impedances ``[R, X]``; A, V to earth, ohm. What is
rounding beside the greatest of its kind is exactly ``[0, 0]``; what nothing fixes is null.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Iterator, Sequence
from typing import Any

import msgspec
import numpy as np

from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution, FaultState, Terminals
from seqfault.model.elements import Complex
from seqfault.report.numbers import quiet

FORMAT = 1


class Quantity(msgspec.Struct, frozen=True):
    """One value of the long form.

    ``place`` and ``kind`` say which fault, ``where`` the bus, ``ELEMENT@BUS`` or star point the
    value belongs to; ``value`` is None where undefined, ``angle`` (degrees) where it has none.
    """

    place: str
    kind: str
    quantity: str
    phase: str
    value: float | str | None
    unit: str
    angle: float | None
    where: str
    state: str


class QuantityColumn(msgspec.Struct, frozen=True):
    """One quantity of one kind of fault at many places, a line of the long form for each.

    ``places``, ``values`` and ``where`` (n,) go together; a value is None where undefined.
    """

    places: Sequence[str]
    kind: str
    quantity: str
    values: Sequence[float | None]
    unit: str
    where: Sequence[str]
    state: str


def polar(value: complex) -> list[float]:
    """``[magnitude, degrees]``."""
    value = complex(value)
    if value == 0:
        return [0.0, 0.0]
    return [abs(value), math.degrees(cmath.phase(value))]


def cartesian(value: complex) -> list[float] | None:
    """``[R, X]``, None for what is infinite."""
    value = complex(value)
    return [value.real, value.imag] if cmath.isfinite(value) else None


def header(network: Network) -> dict[str, Any]:
    """What every answer in JSON opens with."""
    model = network.model
    return {
        "format": FORMAT,
        "case": {"title": model.title, "sha256": model.sha256},
        "scenario": model.state,
        "machine": model.machine,
    }


def fault_tree(network: Network, solution: FaultSolution) -> dict[str, Any]:
    """``solution`` as plain values."""
    s = solution
    first, *others = [state_tree(state, s.largest) for state in s.faults]
    return {
        **header(network),
        "loaded": s.loaded,
        **first,
        **({"also": others} if others else {}),
        "x_over_r": s.x_over_r if math.isfinite(s.x_over_r) else None,
        "voltages": _voltages(s),
        "flows": _flows(s.terminals, s.terminals_before),
        "neutrals": {
            star.name: {
                "current": polar(star.current),
                "voltage": None if star.voltage is None else polar(star.voltage),
                "kind": star.kind,
                "bus": star.bus,
            }
            for star in s.star_points
        },
        "deltas": [
            {"element": d.element, "side": d.side, "bus": d.bus, "current": polar(d.current)}
            for d in s.deltas
        ],
        "earthed_lines": [
            {"element": line.name, "residual": polar(line.residual)} for line in s.earthed_lines
        ],
        "home": [{"path": path.path, "current": polar(quiet(path.current, s.largest))} for path in s.home],
        "notes": list(s.notes),
        "assumptions": [text for a in s.assumptions for text in a.sentences()],
        "warnings": list(s.warnings),
        "undefined": list(s.undefined_notes),
    }


def state_tree(state: FaultState, top: float) -> dict[str, Any]:
    """One fault: what was asked, the impedances, the currents; of a break what passes and stands across."""
    fault = state.fault
    current = {p: polar(quiet(state.current[k], top)) for k, p in enumerate("abc")}
    current |= {f"i{k}": polar(quiet(state.current_sequence[k], top)) for k in range(3)}
    out: dict[str, Any] = {
        "fault": {
            "place": fault.place,
            "kind": fault.kind.name,
            "phases": fault.phases,
            "zf": cartesian(fault.zf),
            "zg": cartesian(fault.zg),
            **({"fallen": fault.fallen} if fault.fallen else {}),
            "nominal": state.nominal,
            "prefault": state.prefault,
        },
        "impedance": {f"z{k}": cartesian(state.impedance[k]) for k in (1, 2, 0)},
        "current": current | {"residual": polar(quiet(state.residual, top))},
    }
    if state.through is not None and state.across is not None and state.through_before is not None:
        out["break"] = {
            "sides": list(state.sides or ()),
            "through": _phases(state.through, top),
            "through_before": _phases(state.through_before, top),
            "across": _phases(state.across, state.nominal),
        }
    return out


def _phases(values: Complex, top: float) -> dict[str, list[float]]:
    return {p: polar(quiet(complex(values[k]), top)) for k, p in enumerate("abc")}


def _voltages(s: FaultSolution) -> dict[str, Any]:
    phases, sequence, before = s.voltage, s.voltage_sequence, np.abs(s.before)
    out: dict[str, Any] = {}
    for k, bus in enumerate(s.buses):
        top = max(float(before[k]), float(np.abs(phases[:, k]).max()))
        row: dict[str, Any] = {p: polar(quiet(phases[j, k], top)) for j, p in enumerate("abc")}
        row |= {f"v{j}": polar(quiet(sequence[j, k], top)) for j in range(3)}
        if s.undefined[k]:
            row |= dict.fromkeys(("a", "b", "c", "v0"))
        if s.loaded:
            row["before"] = polar(complex(s.before[k]))
        out[bus] = row
    return out


def _flows(t: Terminals, earlier: Terminals | None) -> list[dict[str, Any]]:
    phases, sequence = t.phases, t.sequence
    top = float(np.abs(phases).max(initial=0.0))
    out = []
    for k, element in enumerate(t.element):
        row: dict[str, Any] = {
            "element": element,
            "bus": t.bus[k],
            "side": t.side[k],
            "kind": t.kind[k],
            "count": int(t.count[k]),
        }
        row |= {p: polar(quiet(phases[j, k], top)) for j, p in enumerate("abc")}
        row |= {f"i{j}": polar(quiet(sequence[j, k], top)) for j in range(3)}
        row["residual"] = polar(quiet(3 * sequence[0, k], top))
        if earlier is not None:
            row["before"] = _phases(earlier.phases[:, k], top)
            row["by_the_fault"] = _phases(phases[:, k] - earlier.phases[:, k], top)
        out.append(row)
    return out


def fault_rows(solution: FaultSolution) -> Iterator[Quantity]:
    """``solution`` in long form."""
    s = solution
    place = " and ".join(state.fault.place for state in s.faults)
    kind = " and ".join(state.fault.kind.name for state in s.faults)

    def row(
        quantity: str, phase: str, value: complex | None, unit: str, where: str, real: bool = False
    ) -> Quantity:
        size, turn = (None, None) if value is None else polar(value)
        if real and value is not None:
            size, turn = complex(value).real, None
        return Quantity(place, kind, quantity, phase, size, unit, turn, where, s.state)

    top = s.largest
    for state in s.faults:
        at = state.fault.place
        for k, phase in enumerate("abc"):
            yield row("fault current", phase, quiet(state.current[k], top), "A", at)
        for k in range(3):
            yield row("fault current", str(k), quiet(state.current_sequence[k], top), "A", at)
        yield row("fault current", "residual", quiet(state.residual, top), "A", at)
        for k in range(3):
            z = complex(state.impedance[k])
            yield row("impedance", str(k), z if cmath.isfinite(z) else None, "ohm", at)
        if state.through is None or state.across is None or state.through_before is None:
            continue
        for k, phase in enumerate("abc"):
            yield row("current through the break", phase, quiet(state.through[k], top), "A", at)
            yield row("the same before", phase, quiet(state.through_before[k], top), "A", at)
            yield row("voltage across the break", phase, quiet(state.across[k], state.nominal), "V", at)
    if math.isfinite(s.x_over_r):
        yield row("X/R", "", s.x_over_r, "", place, real=True)
    voltages = _voltages(s)
    for bus, values in voltages.items():
        for key, pair in values.items():
            phase = key.removeprefix("v")
            if key == "before":
                yield row("voltage before the fault", "a", _phasor(pair), "V", bus)
                continue
            yield row("voltage to earth", phase, _phasor(pair), "V", bus)
    for flow in _flows(s.terminals, s.terminals_before):
        inner = f" {flow['side']}" if flow["side"].startswith("from ") else ""
        where = f"{flow['element']}{inner}@{flow['bus']}"
        for key in ("a", "b", "c", "i0", "i1", "i2", "residual"):
            yield row("current into element", key.removeprefix("i"), _phasor(flow[key]), "A", where)
        for phase, pair in flow.get("before", {}).items():
            yield row("current into element before", phase, _phasor(pair), "A", where)
    for star in s.star_points:
        yield row("neutral current", "", star.current, "A", star.name)
        yield row("neutral voltage", "", star.voltage, "V", star.name)
    for delta in s.deltas:
        yield row("current round the delta", "", delta.current, "A", f"{delta.element}@{delta.bus}")
    for line in s.earthed_lines:
        yield row("current of an earthed line", "", line.residual, "A", line.name)
    for path in s.home:
        yield row("earth current home", "", quiet(path.current, s.largest), "A", path.path)


def _phasor(pair: list[float] | None) -> complex | None:
    return None if pair is None else cmath.rect(pair[0], math.radians(pair[1]))
