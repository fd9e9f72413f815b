"""Inverter-fed infeeds: current-limited sources of positive sequence, settled for each fault.

A converter that sees its positive-sequence voltage fall below its threshold feeds its limited current at
a set angle behind that voltage (common practice of grid codes: reactive current in a voltage dip; IEC
60909-0:2016 clause 6.9 has the same source of constant current). Above the threshold it is silent: what
it fed before the fault is no part of a flat profile.

Where nothing but its own current makes its voltage, as at a bolted fault between it and all other sources,
no current stands at that angle: the phase it follows is then held as it was before the fault.
"""

from __future__ import annotations

from collections.abc import Callable

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_current
from seqfault.equations.symmetrical import turn_sequence
from seqfault.errors import NoAnswerError, quoted
from seqfault.faults.solution import Terminals
from seqfault.model.elements import Bools, Complex, Converters, Ints, Model

LIMIT = 300
SETTLED = 1e-13


class Settled(msgspec.Struct, frozen=True, eq=False):
    """``current`` (m,) per unit into the network, in the frame of its bus; sentences on each."""

    current: Complex
    notes: tuple[str, ...]


def settle(converters: Converters, live: Bools, respond: Callable[[Complex], Complex]) -> Settled:
    """Currents of the converters (m,) that agree with the voltages they cause.

    ``live`` (m,) whether their buses have another source; ``respond`` gives the positive-sequence
    voltages (m,) during the fault for their currents. Raises ``NoAnswerError`` where no state settles.
    """
    m = len(converters.names)
    acting = live.copy()
    seen: list[tuple[bool, ...]] = []
    current = np.zeros(m, complex)
    hunting = np.zeros(m, bool)
    held = np.zeros(m, bool)
    while True:
        current, held = _iterate(converters, acting, current, held, respond)
        voltage = np.abs(respond(current))
        wanted = (voltage < converters.threshold) & live
        wanted |= hunting & acting
        if (wanted == acting).all():
            return Settled(current, _notes(converters, live, acting, hunting, held, voltage))
        seen.append(tuple(acting.tolist()))
        if tuple(wanted.tolist()) in seen:  # on it rises above its threshold, off it falls below
            hunting |= wanted != acting
            wanted |= acting
        acting = wanted


def with_converters(model: Model, current: Complex, clock: Ints, terminals: Terminals) -> Terminals:
    """``terminals`` and those of the converters, whose ``current`` (m,) flows out of them."""
    converters = model.converters
    if not converters.names:
        return terminals
    m, bus = len(converters.names), converters.bus
    fed = -current * base_current(model.nominal[bus], model.base_power)
    sequence = turn_sequence(np.stack([0 * fed, fed, 0 * fed]), clock[bus])
    return terminals.extended(converters.names, "converter", ("",) * m, bus, model.buses, sequence)


def _iterate(
    converters: Converters,
    acting: Bools,
    start: Complex,
    held: Bools,
    respond: Callable[[Complex], Complex],
) -> tuple[Complex, Bools]:
    """Currents (m,) of the ``acting`` converters, and which of them have their phase ``held``.

    Steps that do not settle hold the phase of those that still move, and begin again.
    """
    size = np.where(acting, converters.limit, 0.0)
    turn = np.exp(-1j * converters.angle)
    while True:
        current = np.where(acting, start, 0)
        step, last = 1.0, np.inf
        for _ in range(LIMIT):
            voltage = respond(current)
            magnitude = np.abs(voltage)
            follows = (magnitude > 1e-9) & ~held
            direction = np.where(follows, voltage / np.where(follows, magnitude, 1), 1)
            target = size * turn * direction
            misses = np.abs(target - current)
            miss = float(misses.max(initial=0.0))
            if miss <= SETTLED * max(float(size.max(initial=0.0)), 1e-300) or not size.any():
                return np.asarray(target), held
            if miss > 0.9 * last:
                step = max(step / 2, 0.05)
            last = miss
            current = current + step * (target - current)
        moving = (misses > 1e-6 * size) & acting & ~held
        if not moving.any():
            break
        held = held | moving
    raise NoAnswerError(
        f"the converters {', '.join(map(quoted, converters.names))} find no steady state in this fault"
        f" ({LIMIT} steps, {miss:.2g} per unit left): the network is too weak for their current at this"
        " angle"
    )


def _notes(
    converters: Converters, live: Bools, acting: Bools, hunting: Bools, held: Bools, voltage: Complex
) -> tuple[str, ...]:
    out = []
    for k, name in enumerate(converters.names):
        if not live[k]:
            out.append(f"converter {quoted(name)} stays silent: its bus has no other source")
        elif hunting[k]:
            out.append(
                f"converter {quoted(name)} stands at its threshold ({converters.threshold[k]:.2f} of"
                " nominal): silent it sees less, feeding it sees more; taken as feeding its limit"
            )
        elif acting[k] and held[k]:
            out.append(
                f"converter {quoted(name)} feeds its limit at {voltage[k]:.2f} of nominal"
                " positive-sequence voltage, which is its own alone: its phase is held as before the fault"
            )
        elif acting[k]:
            out.append(
                f"converter {quoted(name)} feeds its limit at {voltage[k]:.2f} of nominal"
                " positive-sequence voltage"
            )
        else:
            out.append(
                f"converter {quoted(name)} stays silent: it sees {voltage[k]:.2f} of nominal"
                f" positive-sequence voltage, not below its threshold of {converters.threshold[k]:.2f}"
            )
    return tuple(out)
