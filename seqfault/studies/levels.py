"""Fault levels of every bus, and the states that give the greatest and the least."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import msgspec
import numpy as np

from seqfault.equations.iec60909 import bolted_currents
from seqfault.equations.per_unit import base_impedance
from seqfault.errors import quoted
from seqfault.faults.network import Network
from seqfault.model.elements import Bools, Complex, Floats


class Levels(msgspec.Struct, frozen=True, eq=False):
    """Bolted-fault currents (n,) A at every bus of one state, magnitudes, in the order of the case.

    ``k2e`` is the larger faulted phase, ``earth`` what a line-line-ground fault sends to earth;
    ``impedance`` (3, n) ohm, infinite where there is no path.
    """

    state: str
    buses: tuple[str, ...]
    nominal: Floats
    live: Bools
    impedance: Complex
    k3: Floats
    k2: Floats
    k2e: Floats
    k2e_earth: Floats
    k1: Floats

    @property
    def earth_share(self) -> Floats:
        """k1 over k3 (n,), nan at dead buses."""
        return np.asarray(np.divide(self.k1, self.k3, out=np.full(len(self.k3), np.nan), where=self.k3 > 0))


class LevelRange(msgspec.Struct, frozen=True, eq=False):
    """Greatest and least of one current (n,) A over states, with the state that gives each.

    States in which a bus is dead or out of service do not count for it.
    """

    greatest: Floats
    greatest_state: tuple[str, ...]
    least: Floats
    least_state: tuple[str, ...]


def levels(network: Network) -> Levels:
    """Bolted-fault currents at every bus of ``network``."""
    model = network.model
    z_base = base_impedance(model.nominal, model.base_power)
    survey = network.sequences.survey()
    z = survey.impedance[:, model.node] * z_base
    infinite = survey.infinite[:, model.node]
    v = np.abs(model.before) * model.nominal / np.sqrt(3)
    closed = ~(infinite[1] | infinite[2]) & model.live
    one = np.where(closed, z[1], 1)
    two = np.where(closed, z[2], 1)
    y0 = np.zeros(len(model.buses), complex)
    joined = ~infinite[0] & (z[0] != 0)
    y0[joined] = 1 / z[0, joined]
    currents = bolted_currents(np.where(closed, v, 0), one, two, y0)
    z[infinite] = np.inf
    return Levels(
        state=model.state,
        buses=model.buses,
        nominal=model.nominal,
        live=model.live,
        impedance=z,
        k3=np.abs(currents.k3),
        k2=np.abs(currents.k2),
        k2e=np.maximum(np.abs(currents.k2e_b), np.abs(currents.k2e_c)),
        k2e_earth=np.abs(currents.k2e_earth),
        k1=np.abs(currents.k1),
    )


def silent(network: Network) -> tuple[str, ...]:
    """A sentence on what a survey of bolted faults leaves out."""
    names = network.model.converters.names
    if not names:
        return ()
    return (
        f"converters {', '.join(map(quoted, names))} are left out of this survey; `fault` and `compare`"
        " settle their current for each fault",
    )


def level_range(
    states: Sequence[Levels], current: Callable[[Levels], Floats], buses: Sequence[str]
) -> LevelRange:
    """Greatest and least of ``current`` over ``states`` for each of ``buses``."""
    greatest, least = np.full(len(buses), np.nan), np.full(len(buses), np.nan)
    greatest_state, least_state = [""] * len(buses), [""] * len(buses)
    for each in states:
        value, at = current(each), {name: k for k, name in enumerate(each.buses)}
        for b, name in enumerate(buses):
            k = at.get(name)
            if k is None or not each.live[k]:
                continue
            if not value[k] <= greatest[b]:
                greatest[b], greatest_state[b] = value[k], each.state
            if not value[k] >= least[b]:
                least[b], least_state[b] = value[k], each.state
    return LevelRange(greatest, tuple(greatest_state), least, tuple(least_state))
