"""Transformers and machines by winding incidence: one rule for every group.

The nodal admittance of a unit is Nᵀ y N: y its short-circuit admittance matrix, N its winding voltages
from node voltages (bus and star point). In zero sequence a star winding sees bus minus star point, a
delta winding's voltage is zero since its loop closes, and a winding whose star point is joined to
nothing carries no current: it is eliminated from y, not struck out.

Source: winding incidence and short-circuit admittance matrices as in H. Edelmann, "Berechnung
elektrischer Verbundnetze", Springer 1963 (from memory); vector diagrams of IEC 60076-1.
"""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.model.elements import DELTA, ISOLATED, STAR, ZIGZAG, Bools, Complex, Floats, Ints, WindingSets

TOLERANCE = 1e-9
"""Entries below this share of a unit's largest admittance are structurally zero."""


class Incidence(msgspec.Struct, frozen=True, eq=False):
    """Winding voltages from node voltages in one sequence.

    ``node`` and ``weight`` (m, w, 2): bus and star point of each winding; node −1 is earth.
    ``admittance`` (m, w, w): the leakage admittances left after windings without current are gone.
    """

    node: Ints
    weight: Floats
    admittance: Complex

    def voltages(self, node_voltage: Complex) -> Complex:
        """Winding voltages (m, w) of ``node_voltage`` (n,)."""
        padded = np.append(node_voltage, 0)  # node −1 reads the reference
        return np.asarray((self.weight * padded[self.node]).sum(axis=2))

    def currents(self, node_voltage: Complex) -> Complex:
        """Currents into the windings (m, w), a delta's circulating current among them."""
        if not len(self.node):
            return np.zeros(self.node.shape[:2], complex)
        return np.asarray(np.einsum("mij,mj->mi", self.admittance, self.voltages(node_voltage)))


def incidence(sets: WindingSets, sequence: int, star_node: Ints) -> Incidence:
    """The incidence of ``sets`` in sequence 0, 1 or 2.

    ``star_node`` (k,) gives the network node of each star point, −1 where it is earth itself.
    """
    bus = np.stack([sets.node, np.full_like(sets.node, -1)], axis=2)
    if sequence:
        return Incidence(
            bus, np.stack([sets.ratio, np.zeros_like(sets.ratio)], axis=2), sets.leakage[sequence]
        )
    on_star = sets.kind == STAR
    joined = sets.star >= 0
    star = np.full_like(sets.star, -1)
    if joined.any():
        star[joined] = star_node[sets.star[joined]]
    bus[:, :, 1] = np.where(on_star, star, -1)
    weight = np.stack(
        [
            np.where(on_star, sets.sign * sets.ratio, 0.0),
            np.where(on_star & (star >= 0), -sets.sign * sets.star_ratio, 0.0),
        ],
        axis=2,
    )
    return Incidence(bus, weight, without_current(sets.leakage[0], _idle(sets)))


def _idle(sets: WindingSets) -> Bools:
    """Windings (m, w) that carry no zero-sequence current: star joined to nothing, zigzag."""
    return np.asarray((sets.kind == ISOLATED) | (sets.kind == ZIGZAG))


def without_current(y: Complex, gone: Bools) -> Complex:
    """``y`` (m, w, w) with the windings marked in ``gone`` (m, w) eliminated, their rows zero.

    Kron's reduction, rank-revealing: what falls under ``TOLERANCE`` of the unit is exactly zero, as
    the leakage of star-star without a delta must be.
    """
    if not gone.any():
        return y
    out = y.copy()
    for pattern in np.unique(gone, axis=0):
        if not pattern.any():
            continue
        rows = np.flatnonzero((gone == pattern).all(axis=1))
        e, k = np.flatnonzero(pattern), np.flatnonzero(~pattern)
        block = np.zeros((len(rows), *y.shape[1:]), complex)
        if len(k):
            unit = y[rows]
            inner = np.linalg.pinv(unit[:, e[:, None], e], rcond=TOLERANCE)
            rest = unit[:, k[:, None], k] - unit[:, k[:, None], e] @ inner @ unit[:, e[:, None], k]
            largest = np.abs(unit).max(axis=(1, 2), keepdims=True)
            rest[np.abs(rest) < TOLERANCE * largest] = 0
            block[:, k[:, None], k] = rest
        out[rows] = block
    return out


def induced(sets: WindingSets, winding_voltage: Complex) -> Complex:
    """Zero-sequence voltages (m, w) of all windings, those without current included.

    A winding without current takes the voltage its core induces, v_e = −y_ee⁺ y_ek v_k; where no
    winding of the unit carries flux it is zero.
    """
    gone = _idle(sets)
    out = np.where(gone, 0, winding_voltage)
    for pattern in np.unique(gone, axis=0):
        e, k = np.flatnonzero(pattern), np.flatnonzero(~pattern)
        if not len(e) or not len(k):
            continue
        rows = np.flatnonzero((gone == pattern).all(axis=1))
        unit = sets.leakage[0][rows]
        inner = np.linalg.pinv(unit[:, e[:, None], e], rcond=TOLERANCE)
        v = -inner @ unit[:, e[:, None], k] @ out[rows][:, k, None]
        out[rows[:, None], e] = v[:, :, 0]
    return out


def zero_sequence_effect(sets: WindingSets, unit: int, winding: int) -> str:
    """What a winding does to zero sequence.

    ``path`` to earth or to its star point, ``through`` to another winding, ``circulates`` in a delta,
    ``open``, or ``apart`` for a zigzag winding, whose own set of one winding tells.
    """
    kinds = sets.kind[unit]
    if kinds[winding] == ZIGZAG:
        return "apart"
    carries = (kinds == STAR) | (kinds == DELTA)
    if kinds[winding] == ISOLATED:
        return "open"
    held = len(kinds) == 1 or bool(sets.magnetised[unit])
    if not held and carries.sum() < 2:
        return "open"
    if kinds[winding] == DELTA:
        return "circulates" if (kinds == STAR).any() else "open"
    return "path" if held or (kinds == DELTA).any() else "through"
