"""Sentences on what is special about an answer."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqfault.equations.symmetrical import to_phases
from seqfault.errors import quoted
from seqfault.faults.solution import FaultState
from seqfault.model.elements import Bools, Complex, Model
from seqfault.networks.factors import SequenceNetworks

RISEN = 1.1
"""A sound phase above this share of its voltage before an open conductor is named."""
DISPLACED = 1.8
"""The same where a fault touches earth: more than the √3 of a system without earth."""


def notes(
    networks: SequenceNetworks,
    faults: Sequence[FaultState],
    lost: Bools,
    voltage: Complex,
    before: Complex,
    loaded: bool,
) -> tuple[str, ...]:
    """Notes on ``faults``; ``lost`` (n,) buses without a source since, ``voltage`` (3, n) V by sequence
    and ``before`` (n,) V phase a before them.
    """
    model = networks.model
    out = [text for state in faults for text in _of_place(networks, state)]
    broken = [state for state in faults if state.fault.kind.series]
    if broken and not loaded and not any(state.fault.earth or state.through is None for state in faults):
        out.append(
            "no load flows on a flat profile, so an open conductor alone changes nothing here: ask for the"
            ' loaded state (--loaded, or prefault state = "loaded")'
        )
    if lost.any():
        out.append(f"{_names(model, lost)}: cut off from every infeed and generator; dead")
        motors = np.array([kind == "motor" for kind in model.sources.kinds], bool)
        if loaded and lost[model.sources.bus[motors]].any():
            out.append("motors behind the break hold some voltage there in the first moment; it decays")
    out += _rise(model, faults, lost, voltage, before)
    return tuple(dict.fromkeys(out))


def _of_place(networks: SequenceNetworks, state: FaultState) -> list[str]:
    model = networks.model
    place = model.index[state.bus]
    name = quoted(state.fault.place)
    if not model.live[place]:
        return [f"{name} is dead in this state: no infeed or generator is connected; nothing flows"]
    if state.fault.kind.series or not state.fault.earth or np.isfinite(state.impedance[0]):
        return []
    zero = networks[0]
    if zero.resonant[zero.free.part[model.node[place]]]:
        return [
            f"the earthing of {name} is in exact resonance with its capacitance, without loss: no"
            " residual current flows; a real coil's loss would let a little through"
        ]
    return [
        f"nothing joins the network of {name} to earth, not even a capacitance: no earth current"
        " flows; in a real network the charging current of its cables and machines does"
    ]


def _rise(
    model: Model, faults: Sequence[FaultState], lost: Bools, voltage: Complex, before: Complex
) -> list[str]:
    """The highest phase-to-earth voltage, where it is high enough to be named."""
    stood = np.abs(before)
    known = (stood > 0) & ~lost
    size = np.where(known, np.abs(to_phases(voltage)) / np.where(known, stood, 1), 0)
    broken = any(state.fault.kind.series for state in faults)
    limit = RISEN if broken and not any(state.fault.earth for state in faults) else DISPLACED
    phase, bus = np.unravel_index(int(size.argmax()), size.shape)
    top = float(size[phase, bus])
    if top <= limit:
        return []
    out = [
        f"phase {'abc'[phase]} of {quoted(model.buses[bus])} rises to {top:.2f} of its voltage to earth"
        " before the fault"
    ]
    if broken and any(z.imag > 0 and z.real < 0.2 * z.imag for z in _coils(model)):
        out.append(
            "a broken phase changes the capacitance that a coil in a star point faces: coil and"
            " capacitance may come near resonance, and the voltage then depends on the coil's losses"
        )
    return out


def _coils(model: Model) -> list[complex]:
    """Impedances (ohm) of the star points that are earthed through a reactance."""
    return [
        complex(z)
        for z, kind in zip(model.stars.impedance, model.stars.kinds, strict=True)
        if kind == "neutral" and np.isfinite(z)
    ]


def apart(model: Model, place: int, change: Complex) -> tuple[str, ...]:
    """A sentence on buses of another system that the fault reaches through earth alone.

    Their own phase angle against the faulted system is not in the data, so how the common voltage
    adds to their phases is not either.
    """
    other = model.live & (model.part != model.part[place]) & (np.abs(change[0]) > 1e-6)
    if not other.any():
        return ()
    return (
        f"{_names(model, other)}: joined to the fault by a shared star point or coupled lines only; how far"
        " this other system stands from the faulted one in angle is not in the data, so its phase voltages"
        " are shown for one angle of many",
    )


def _names(model: Model, which: Bools) -> str:
    names = [quoted(model.buses[k]) for k in np.flatnonzero(which)]
    return ", ".join(names[:6]) + (f" and {len(names) - 6} more" if len(names) > 6 else "")
