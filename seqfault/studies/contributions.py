"""What every element at a bus contributes to the bolted faults there, all buses at once."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.equations.per_unit import base_current
from seqfault.equations.symmetrical import A
from seqfault.faults.flows import terminal_map
from seqfault.faults.network import Network
from seqfault.model.elements import Bools, Complex, Floats, Ints
from seqfault.networks.neighbours import terminal_shares
from seqfault.studies.levels import Levels, levels


class Contributions(msgspec.Struct, frozen=True, eq=False):
    """Currents (c,) A towards the fault from each element at its bus, magnitudes, as ``Levels`` has them.

    Row by row of compressed storage: those of bus k of the case are ``start[k]`` to ``start[k + 1]``.
    ``element`` and ``side`` (c,) name them, ``bus`` (c,) the bus they stand at: a closed tie makes one
    node of its buses, and each of these lists all its elements. ``k2``, ``k2e`` and ``k1`` are the
    greater faulted phase, ``earth`` 3I0 from the element in a line-line-ground fault, ``k1_earth`` in a
    line-ground fault; both and ``k2e``, ``k1`` are nan where exact resonance leaves the zero sequence
    unbounded (``fault`` answers there). ``share`` (3, c) is the part of each sequence's fault current
    that comes from the element, complex.
    """

    state: str
    start: Ints
    element: tuple[str, ...]
    side: tuple[str, ...]
    bus: Ints
    share: Complex
    k3: Floats
    k2: Floats
    k2e: Floats
    earth: Floats
    k1: Floats
    k1_earth: Floats


def contributions(network: Network) -> Contributions:
    """Contributions of all elements to bolted faults at all buses of ``network``.

    Converters are left out, as in ``levels``. Raises ``CheckError`` as ``levels`` does.
    """
    model = network.model
    survey = network.sequences.survey()
    terminals = terminal_map(model)
    rows = len(terminals.shown)
    used = np.flatnonzero((terminals.row >= 0) & (terminals.node >= 0))
    share = np.zeros((3, rows), complex)
    for s, of in enumerate(terminal_shares(model, survey)):
        np.add.at(share[s], terminals.row[used], of[used])
    # Rows by node, then a slice a bus.
    kept = np.flatnonzero(terminals.closed[terminals.shown])
    node = terminals.node[terminals.shown[kept]]
    kept = kept[np.argsort(node, kind="stable")]
    first = np.concatenate([[0], np.cumsum(np.bincount(node, minlength=model.common))])
    size = (first[1:] - first[:-1])[model.node]
    start = np.concatenate([[0], np.cumsum(size)])
    whose = np.repeat(np.arange(len(model.buses)), size)
    chosen = kept[first[model.node][whose] + np.arange(len(whose)) - start[whose]]
    shown = terminals.shown[chosen]
    part = share[:, chosen]
    part[0, _unbounded(network)[whose]] = np.nan
    fault = _fault_currents(network)
    out = {name: np.zeros(len(whose)) for name in ("k3", "k2", "k2e", "earth", "k1", "k1_earth")}
    for name, sequence in fault.items():
        if name == "k3":
            out[name] = np.abs(sequence[1][whose] * part[1])
            continue
        i0, i1, i2 = (current[whose] * of for current, of in zip(sequence, part, strict=True))
        if name == "k1":
            out[name], out["k1_earth"] = np.abs(i0 + i1 + i2), 3 * np.abs(i0)
            continue
        if name == "k2":
            i0[:] = 0
        b, c = i0 + A.conjugate() * i1 + A * i2, i0 + A * i1 + A.conjugate() * i2
        out[name] = np.maximum(np.abs(b), np.abs(c))
        if name == "k2e":
            out["earth"] = 3 * np.abs(i0)
    return Contributions(
        state=model.state,
        start=start,
        element=tuple(map(terminals.element.__getitem__, shown.tolist())),
        side=tuple(map(terminals.side.__getitem__, shown.tolist())),
        bus=terminals.bus[shown],
        share=part,
        **out,
    )


def levels_and_contributions(network: Network) -> tuple[Levels, Contributions]:
    """Both surveys of ``network``, from one selected inverse."""
    return levels(network), contributions(network)


def _unbounded(network: Network) -> Bools:
    """Buses (n,) whose zero sequence is in exact resonance: nothing bounds it, though currents flow."""
    model, zero = network.model, network.sequences[0]
    infinite = network.sequences.survey().infinite[0, model.node]
    part = zero.free.part
    floats = part >= 0
    charged = np.zeros(len(zero.free.dimension) + 1, bool)
    np.logical_or.at(charged, part[floats], zero.stamps.weak[floats] != 0)
    return np.asarray(infinite & charged[part[model.node]])


def _fault_currents(network: Network) -> dict[str, tuple[Complex, Complex, Complex]]:
    """Sequence currents 0, 1, 2 (n,) A of each kind of bolted fault; phase a is faulted, or b and c."""
    model = network.model
    survey = network.sequences.survey()
    z0, z1, z2 = survey.impedance[:, model.node]
    endless = survey.infinite[:, model.node]
    closed = ~(endless[1] | endless[2]) & model.live
    v = np.where(closed, model.before * base_current(model.nominal, model.base_power), 0)
    z1, z2 = np.where(closed, z1, 1), np.where(closed, z2, 1)
    y0 = np.zeros(len(v), complex)
    joined = ~endless[0] & (z0 != 0)
    y0[joined] = 1 / z0[joined]
    none = np.zeros(len(v), complex)
    together = z1 + z2 + z1 * z2 * y0
    ground = v * y0 / ((z1 + z2) * y0 + 1)
    return {
        "k3": (none, v / z1, none),
        "k2": (none, v / (z1 + z2), -v / (z1 + z2)),
        "k2e": (-v * z2 * y0 / together, v * (1 + z2 * y0) / together, -v / together),
        "k1": (ground, ground, ground),
    }
