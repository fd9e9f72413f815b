"""How the earth current gets home: every path from earth into the faulted network, adding to 3I0."""

from __future__ import annotations

import numpy as np

from seqfault.equations.per_unit import base_current
from seqfault.errors import CheckError
from seqfault.faults.flows import SequenceFlows, TerminalMap, star_current_base
from seqfault.faults.solution import HomePath
from seqfault.model.elements import Bools, Model


def earth_paths(
    model: Model, group: int, flows: SequenceFlows, terminals: TerminalMap
) -> tuple[HomePath, ...]:
    """Every path from earth into a network joined by metal, that of label ``group`` in ``galvanic``.

    Transformers join nothing by metal, so by Kirchhoff's current law these alone add to 3I0. Star
    points, infeeds and earthed capacitor banks by name, charging currents by nominal voltage.
    """
    here = model.galvanic == group
    ampere = star_current_base(model)
    out = [
        HomePath(name, complex(-flows.star[k] * ampere[k]))
        for k, name in enumerate(model.stars.names)
        if here[model.node[model.stars.bus[k]]] and model.stars.kinds[k] != "isolated"
    ]
    nominal = model.nominal[terminals.bus]
    earth = -3 * flows.to_earth * base_current(nominal, model.base_power)
    inside = (terminals.node >= 0) & here[terminals.node] & _to_earth(model)
    for k, kind in enumerate(terminals.kind):
        if inside[k] and kind in ("infeed", "capacitor", "load"):
            out.append(HomePath(terminals.element[k], complex(earth[k])))
    charging = np.array([kind in ("line", "capacitance") for kind in terminals.kind], bool) & inside
    for voltage in sorted(set(nominal[charging].tolist())):
        at = charging & (nominal == voltage)
        out.append(HomePath(f"capacitance {voltage / 1000:g} kV", complex(earth[at].sum())))
    return tuple(out)


def _to_earth(model: Model) -> Bools:
    """Which terminals (t,) have a branch to earth of their own in zero sequence."""
    line = model.lines.shunt[0] != 0
    units = [np.zeros(sets.bus.size, bool) for sets in model.winding_sets]
    sources, capacitances = model.sources.admittance[0] != 0, model.capacitances.admittance[0] != 0
    return np.concatenate([line, line, *units, sources, capacitances])


def check_home(home: tuple[HomePath, ...], residual: complex) -> None:
    """Raise ``CheckError`` where the paths do not add to the ``residual`` current (A)."""
    total = sum((path.current for path in home), 0j)
    size = max([1e-3, abs(residual)] + [abs(path.current) for path in home])  # from one milliampere
    if abs(total - residual) > 1e-7 * size:
        raise CheckError(
            f"the paths home carry {abs(total):.6g} A, the fault sends {abs(residual):.6g} A into"
            " earth; the answer is withheld"
        )
