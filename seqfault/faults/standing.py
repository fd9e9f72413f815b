"""Faults that stand at once: their loops on the ports, and what each draws, passes and leaves."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_current, base_impedance
from seqfault.equations.symmetrical import to_phases, to_sequence, turn_sequence
from seqfault.faults.flows import TerminalMap
from seqfault.faults.kinds import Fault, branches, sound_poles
from seqfault.faults.ports import Loops, PortSolution, driving_point
from seqfault.faults.solution import FaultState
from seqfault.model.elements import Complex, Ints, Model


class Standing(msgspec.Struct, frozen=True):
    """A fault and the buses it stands at: one, or both sides of a break.

    ``fallen`` says which of the two sides lies on earth, None where neither does; ``joint`` names the
    opened tie of the break.
    """

    fault: Fault
    buses: tuple[str, ...]
    fallen: int | None = None
    joint: str = ""


class Loading(msgspec.Struct, frozen=True, eq=False):
    """The state before the fault where loads flow, per unit in the frame of each bus.

    ``voltage`` (n,) positive sequence; ``terminal`` (t,) currents into the terminals of
    ``faults.flows.terminal_map``.
    """

    voltage: Complex
    terminal: Complex
    notes: tuple[str, ...] = ()


def turned(loading: Loading, reference: complex) -> Loading:
    """``loading`` with the angle of ``reference`` taken off."""
    turn = abs(reference) / reference
    return Loading(loading.voltage * turn, loading.terminal * turn, loading.notes)


def through_breaks(
    model: Model, terminals: TerminalMap, where: Sequence[Ints], loading: Loading | None
) -> list[Complex]:
    """Positive-sequence current that left each port of each fault before it: what its break carried."""
    out = []
    for at in where:
        flowed = np.zeros(len(at), complex)
        if len(at) == 2 and loading is not None:
            through = loading.terminal[terminals.bus == at[1]].sum()
            flowed[:] = through, -through
        out.append(flowed)
    return out


def loops_of(model: Model, standing: Standing, at: Ints) -> Loops:
    """The loops of a fault on the buses ``at``."""
    fault = standing.fault
    scale = model.base_power / model.nominal[at[0]] ** 2
    if len(at) == 1:
        incidence, z = branches(fault)
        return Loops(at, incidence[None], z * scale)
    poles = sound_poles(fault)
    incidence = np.stack([poles, -poles])
    z = np.zeros((poles.shape[1], poles.shape[1]), complex)
    if standing.fallen is not None:
        lying, own = branches(fault)
        to_earth = np.zeros((2, *lying.shape), complex)
        to_earth[standing.fallen] = lying
        incidence = np.concatenate([incidence, to_earth], axis=2)
        m = len(z)
        z = np.zeros((m + len(own), m + len(own)), complex)
        z[m:, m:] = own * scale
    return Loops(at, incidence, z)


def states(
    model: Model,
    standing: Sequence[Standing],
    where: Sequence[Ints],
    ports: PortSolution,
    shapes: Sequence[Loops],
    flowing: Sequence[Complex],
    clock: Ints,
    before: Complex,
    voltage: Complex,
) -> tuple[FaultState, ...]:
    """What each fault draws, passes and leaves."""
    out: list[FaultState] = []
    row = 0
    for each, at, shape, i, flowed in zip(standing, where, shapes, ports.loops, flowing, strict=True):
        bus = int(at[0])
        sequence: Complex
        through: Complex | None = None
        through_before: Complex | None = None
        across: Complex | None = None
        ampere = float(base_current(model.nominal[bus], model.base_power))
        shares = np.zeros(len(ports.ports))
        shares[row] = 1.0
        if len(at) == 1:
            current = shape.incidence[0] @ i * ampere
            sequence = turn_sequence(ports.drawn[:, row], clock[bus]) * ampere
        else:
            shares[row + 1] = -1.0
            m = 3 - len(each.fault.phases)
            through = shape.incidence[0, :, :m] @ i[:m] * ampere
            lying = 0 if each.fallen is None else each.fallen
            current = shape.incidence[lying, :, m:] @ i[m:] * ampere
            sequence = to_sequence(current)
            stood = np.array([0, flowed[0], 0], complex)
            through_before = to_phases(turn_sequence(stood, clock[bus])) * ampere
            sides = to_phases(voltage[:, at])
            across = sides[:, 0] - sides[:, 1]
        z_base = float(base_impedance(model.nominal[bus], model.base_power))
        out.append(
            FaultState(
                fault=each.fault,
                nominal=float(model.nominal[bus]),
                prefault=float(np.abs(before[bus])),
                impedance=_ohms(driving_point(ports, shares), z_base),
                current=current,
                current_sequence=sequence,
                bus=model.buses[bus if each.fallen is None else int(at[each.fallen])],
                through=through,
                through_before=through_before,
                across=across,
                sides=None if len(at) == 1 else (model.buses[at[0]], model.buses[at[1]]),
            )
        )
        row += len(at)
    return tuple(out)


def leaving(
    where: Sequence[Ints], standing: Sequence[Standing], faults: Sequence[FaultState]
) -> list[tuple[int, Complex]]:
    """What leaves each bus for a fault or through a break: bus, phases (3,) A."""
    out = []
    for at, each, state in zip(where, standing, faults, strict=True):
        out.append((int(at[0 if each.fallen is None else each.fallen]), state.current))
        if state.through is not None:
            out += [(int(at[0]), state.through), (int(at[1]), -state.through)]
    return out


def _ohms(per_unit: Complex, base: float) -> Complex:
    """Impedances in ohm, infinite ones left as they are."""
    out = np.full(per_unit.shape, np.inf, complex)
    known = np.isfinite(per_unit)
    out[known] = per_unit[known] * base
    return out
