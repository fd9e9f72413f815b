"""What neutrals are: ohm from their records, and arc-suppression coils tuned to the base case."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from seqfault.case.records import Neutral
from seqfault.equations.earthing import parallel, resistor_of_current
from seqfault.errors import quoted
from seqfault.model.elements import Ints, Model

ARC_SUPPRESSION = "arc-suppression"


def impedance_of(neutral: Neutral) -> complex:
    """Ohm between a star point and earth, exactly 0 where the record says so.

    Through a distribution transformer of ratio n the ohms stated lie on its secondary: n² Z.
    """
    if neutral.current is not None and neutral.resistance is None and neutral.reactance is None:
        assert neutral.voltage is not None
        series = complex(
            resistor_of_current(float(neutral.current.value.real), float(neutral.voltage.value.real))
        )
    else:
        series = complex(
            neutral.resistance.value.real if neutral.resistance else 0.0,
            neutral.reactance.value.real if neutral.reactance else 0.0,
        )
    if neutral.parallel_resistance is not None:
        series = complex(parallel(series, complex(neutral.parallel_resistance.value)))
    return series * (neutral.ratio or 1.0) ** 2


def fixed_impedances(neutrals: Mapping[str, Neutral]) -> dict[str, complex]:
    """Ohm of every neutral but the arc-suppression coils, infinite where it is out of service."""
    return {
        name: complex(np.inf) if record.out else impedance_of(record)
        for name, record in neutrals.items()
        if record.kind != ARC_SUPPRESSION
    }


def tuned_coils(
    base: Model, coils: Mapping[str, Neutral], states: Mapping[str, Neutral]
) -> tuple[dict[str, complex], list[tuple[str, str]], list[str]]:
    """Ohm of the arc-suppression ``coils``, what was assumed of each, and complaints.

    ``coils`` as in the base case, ``states`` as the state asked for has them (loss, resistance).

    ``base`` is the base case with these coils open: a coil passes (1 + detuning) times the capacitive
    earth-fault current of the network its star points belong to, X = 1/(3 ω C0 (1 + d)), beside a
    resistance of X over its ``loss``. Source: IEC 60909-3 and IEC 60076-6 (earthing reactors),
    formulas from memory. Several coils of one network share its current equally.
    """
    susceptance = earth_susceptance(base, base.wired)
    home = {name: _networks(base, name) for name in coils if name in base.stars.names}
    out = {name: complex(np.inf) for name in coils}
    noted: list[tuple[str, str]] = []
    complaints = []
    for name, record in coils.items():
        if record.out:
            continue
        if name not in home:
            complaints.append(
                f"neutral {quoted(name)}, kind: no winding in service names this coil in the base case,"
                " so there is no network to tune it to"
            )
            continue
        b, most = 0.0, 1
        for label in home[name]:
            sharing = [n for n, labels in home.items() if label in labels and not coils[n].out]
            b += 3 * susceptance[label] / len(sharing)
            most = max(most, len(sharing))
        if b <= 0:
            complaints.append(
                f"neutral {quoted(name)}, kind: the network of this coil has no capacitance to earth in"
                " the base case; state c0 of its cables and machines"
            )
            continue
        if most > 1:
            noted.append((name, f"shares the charging current equally with {most - 1} more"))
        record = states.get(name, record)
        assert record.detuning is not None
        y = b * (1 + record.detuning.value.real)
        loss = record.loss.value.real if record.loss else 0.0
        if record.loss is None:
            noted.append((name, "loss not stated, taken as 0"))
        admittance = y * (loss - 1j)
        if record.parallel_resistance is not None:
            admittance += 1 / record.parallel_resistance.value.real
        out[name] = complex(1 / admittance)
    return out, noted, complaints


def _networks(model: Model, neutral: str) -> set[int]:
    """Labels of the networks whose star points name ``neutral``."""
    star = model.stars.names.index(neutral)
    out: set[int] = set()
    for sets in model.winding_sets:
        out.update(model.wired[sets.node[sets.star == star]].tolist())
    return out


def earth_susceptance(model: Model, network: Ints) -> dict[int, float]:
    """Capacitive susceptance to earth (S a phase) of each network, labels (common,) of the nodes."""
    lines, shunts = model.lines, model.capacitances
    standing = lines.closed.any(axis=0)
    nodes = np.concatenate([*lines.nodes[:, standing], shunts.node])
    buses = np.concatenate([*lines.ends[:, standing], shunts.bus])
    line = lines.shunt[0, standing]
    per_unit = np.concatenate([line, line, shunts.admittance[0]]).imag
    siemens = per_unit * model.base_power / model.nominal[buses] ** 2
    total = np.zeros(int(network.max(initial=-1)) + 1)
    np.add.at(total, network[nodes], siemens)
    return dict(enumerate(total.tolist()))
