"""Charging current of a network joined by metal, and what each feeder and machine has of it."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_current
from seqfault.model.elements import Model


class ChargingShare(msgspec.Struct, frozen=True):
    """What one record adds (A, 3I0 at nominal voltage); ``kind`` is line, machine or capacitor.

    ``count`` circuits of a line make it up together; ``count`` is 1 for the others.
    """

    name: str
    kind: str
    count: int
    current: float


class Charging(msgspec.Struct, frozen=True):
    """Charging currents of one network, 3I0 in A, every record at its own nominal voltage.

    ``silent`` names the lines that state no capacitance to earth.
    """

    shares: tuple[ChargingShare, ...]
    silent: tuple[str, ...]

    @property
    def total(self) -> float:
        """What all of it sends into a bolted earth fault of the unearthed network, 3 ω C0 U/√3."""
        return sum(share.current for share in self.shares)


def charging_currents(model: Model, networks: set[int]) -> Charging:
    """Charging currents of the ``networks``, labels of ``model.wired``.

    3 ω C0 U/√3 of each record (IEC 60071-2; common practice). A line that is open at one end keeps its
    capacitance on the other.
    """
    shares, silent = [], []
    lines, shunts = model.lines, model.capacitances
    for k, name in enumerate(lines.names):
        nodes = lines.nodes[:, k]
        if (nodes < 0).all() or not networks & set(model.wired[nodes[nodes >= 0]].tolist()):
            continue
        per_unit = 2 * float(np.abs(lines.shunt[0, k]))
        ampere = 3 * per_unit * float(base_current(lines.voltage[k], model.base_power))
        if ampere:
            shares.append(ChargingShare(name, "line", int(lines.count[k]), ampere))
        elif lines.kinds[k] == "line":
            silent.append(name)
    for k, name in enumerate(shunts.names):
        if int(model.wired[shunts.node[k]]) not in networks:
            continue
        nominal = model.nominal[shunts.bus[k]]
        ampere = 3 * float(np.abs(shunts.admittance[0, k]) * base_current(nominal, model.base_power))
        if ampere:
            kind = "machine" if shunts.kinds[k] == "capacitance" else "capacitor"
            shares.append(ChargingShare(name, kind, 1, ampere))
    shares.sort(key=lambda share: -share.current)
    return Charging(tuple(shares), tuple(silent))
