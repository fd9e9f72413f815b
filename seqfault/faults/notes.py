"""Sentences on what is special about an answer."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqfault.equations.symmetrical import to_phases
from seqfault.errors import quoted
from seqfault.faults.solution import FaultState, StarPointState
from seqfault.model.doubts import idle_star_points
from seqfault.model.elements import Bools, Complex, Model
from seqfault.networks.factors import SequenceNetworks

RISEN = 1.1
"""A sound phase above this share of its voltage before an open conductor is named."""
DISPLACED = 1.8
"""The same where a fault touches earth: more than the √3 of a system without earth."""
DRIVEN = 0.5
"""Share of the phase voltage on a coil, without an earth fault, from which resonance is named."""


def notes(
    networks: SequenceNetworks,
    faults: Sequence[FaultState],
    lost: Bools,
    voltage: Complex,
    before: Complex,
    loaded: bool,
    stars: Sequence[StarPointState],
) -> tuple[str, ...]:
    """Notes on ``faults``; ``lost`` (n,) buses without a source since, ``voltage`` (3, n) V by sequence
    and ``before`` (n,) V phase a before them, ``stars`` what star points see.
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
    if broken and not any(state.fault.earth for state in faults):
        out += _resonance(model, stars)
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
    idle = idle_star_points(model).get(int(model.galvanic[model.node[place]]), [])
    if idle:
        return [
            f"the earthed star point {', '.join(map(quoted, dict.fromkeys(idle)))} lets no current through"
            " in this model, for want of another winding or a stated magnetising branch: no earth current"
            " is found here, and a real core may let a large one through; state z0_magnetising or"
            " zero_tests"
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
    return [
        f"phase {'abc'[phase]} of {quoted(model.buses[bus])} rises to {top:.2f} of its voltage to earth"
        " before the fault"
    ]


def _resonance(model: Model, stars: Sequence[StarPointState]) -> list[str]:
    """Coils that an open phase leaves near resonance with the capacitance still there."""
    out = []
    for k, star in enumerate(stars):
        z = complex(model.stars.impedance[k])
        if (
            star.kind != "neutral"
            or star.voltage is None
            or not np.isfinite(z)
            or abs(z.real) > 0.2 * z.imag
        ):
            continue
        share = abs(star.voltage) / (float(model.stars.base[k]) / np.sqrt(3))
        if share > DRIVEN:
            out.append(
                f"the open phase and the coil {quoted(star.name)} come near resonance with the capacitance"
                f" that is left: its star point stands at {share:.2f} of the phase voltage; losses, which"
                " the case may not state, decide how high it really goes"
            )
    return out


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
