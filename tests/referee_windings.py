"""Windings on the three legs of a core: what the transformers of the referee are made of.

A coil is three like branches, one on each leg. The coils of a leg share its flux: per turn they
differ in voltage by their leakage alone, and their ampere-turns add to nothing (no magnetising
current). Leakage is stated between two coils, as a short-circuit test would find it, and made into
the law of all coils with the first as reference, in volts per turn and ampere-turns:

    e_w - e_0 = sum over u of Z_wu I_u,    Z_wu = (z_0w + z_0u - z_wu)/2,    z_ww = 0

with 3x3 blocks over the legs. For three windings that is the matrix [[z_hl, (z_hl + z_ht -
z_lt)/2], [the same, z_ht]] on the currents into lv and tv; a star equivalent with a negative branch
is no special case.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from tests.referee_equations import EARTH, LONG, ONE, Branch, Matrix, static

Pairs = Mapping[tuple[str, str], complex]

ROOT3 = np.sqrt(np.longdouble(3))
TANK = "tank"
# By how many hours of 30 degrees the terminals of a winding lag the flux of the leg of phase a. A
# delta branch a-b leads a; half of leg a less half of leg c lags a.
LAG = {"star": 0, "auto": 0, "delta": 1, "zigzag": 1}


@dataclass(frozen=True)
class Winding:
    """One side of a unit: ``side`` "hv", "lv" or "tv"; ``rated`` volts line to line, tap in.

    ``kind`` is "star", "delta", "zigzag" or "auto": the first two windings of an auto-transformer,
    high voltage first, whose ``star`` is the common star point. ``clock`` is by how many hours it
    lags the first winding. ``z0`` is a zigzag's own impedance to equal currents, ohm a phase.
    """

    side: str
    bus: str
    kind: str
    rated: float
    clock: int = 0
    star: str = "isolated"
    z0: complex = 0j


def star_pairs(**branches: complex) -> dict[tuple[str, str], complex]:
    """Impedances between windings from those of a star equivalent, ``hv=..., lv=..., tank=...``."""
    return {(a, b): branches[a] + branches[b] for a, b in combinations(branches, 2)}


@dataclass(frozen=True)
class Coil:
    """Branches of the phases a, b, c; ``way`` -1 where they run against the sense of their leg.

    ``star`` is the side whose star point they reach, if any; ``inwards`` -1 where they start there.
    """

    side: str
    turns: np.longdouble
    branches: Sequence[Branch]
    shift: int  # legs between phase and leg
    way: int
    star: str | None = None
    inwards: int = 1

    def on_legs(self) -> list[Branch]:
        """Ends in the sense of the leg, leg by leg."""
        by_leg = [self.branches[(leg - self.shift) % 3] for leg in range(3)]
        return [(q, p) if self.way < 0 else (p, q) for p, q in by_leg]

    def of_phases(self, first: int) -> list[tuple[int, int]]:
        """Number and sign of each phase's branch, the legs being numbered from ``first``."""
        return [(first + (k + self.shift) % 3, self.way * self.inwards) for k in range(3)]


class Core:
    """The windings of a unit and the leakages between them; terms as in ``Referee.windings``."""

    def __init__(self, windings: Sequence[Winding], one: Pairs, zero: Pairs, volts: float) -> None:
        self.windings = list(windings)
        if any(TANK in pair for pair in zero):  # on the legs of the first winding, unturned
            lag = LAG["delta"] - LAG[windings[0].kind]
            self.windings.append(Winding(TANK, "", "delta", volts, lag))
        self._between = self._leakages(one, zero, volts)
        # Equal currents see this between the two halves of a zigzag.
        self._own = {
            w.side: LONG(9 * w.z0) / np.longdouble(w.rated) ** 2 * ONE
            for w in windings
            if w.kind == "zigzag"
        }

    def starred(self) -> list[Winding]:
        """Windings that have a star point, the common one of an auto-transformer with its first."""
        first, *rest = self.windings
        return [first] * (first.kind != "delta") + [w for w in rest if w.kind in ("star", "zigzag")]

    def _leakages(self, one: Pairs, zero: Pairs, volts: float) -> dict[tuple[str, str], Matrix]:
        """Leakage between two sides, volts per turn by ampere-turns.

        A star winding of ``volts`` has volts/sqrt 3 turns here, so z ohm of a star are 3 z/volts**2.

        Auto-transformer: the tests are made between terminals and star point, the coils are the
        series winding s (N_s = N_H - N_L turns, from H to L) and the common one c (N_L turns, from L
        to the star point). Let k = N_H/N_s and z be per turn squared, z_HL being the test from H.

        H fed, L shorted to the star point: v_c = 0, all of v_H stands across s, so
        v_H = N_H**2 z_HL i_s = N_s**2 z_sc i_s:                               z_sc = k**2 z_HL
        L fed, t shorted, H open: s carries nothing:                           z_ct = z_LT
        H fed, t shorted, L open: i_c = i_s, i_t = -N_H i_s/N_t; with c as reference
        v_H = (N_s**2 z_sc - 2 N_H N_s Z_st + N_H**2 z_ct) i_s = N_H**2 z_HT i_s, whence
        Z_st = k (z_HL + z_LT - z_HT)/2 and                        z_st = z_sc + z_ct - 2 Z_st
        """
        found: dict[tuple[str, str], Matrix] = {}

        def keep(a: str, b: str, value: Matrix) -> None:
            found[a, b] = found[b, a] = value

        sides = [w.side for w in self.windings]
        for a, b in combinations(sides, 2):
            z1, z0 = (table.get((a, b), table.get((b, a))) for table in (one, zero))
            z1, z0 = (z0 if z1 is None else z1), (z1 if z0 is None else z0)
            if z1 is None or z0 is None:
                raise ValueError(f"nothing is stated between {a} and {b}")
            keep(a, b, static(z1, z0) * 3 / np.longdouble(volts) ** 2)
        if self.windings[0].kind == "auto":
            high, low, *others = sides
            n_high, n_low = (np.longdouble(w.rated) for w in self.windings[:2])
            k = n_high / (n_high - n_low)
            z_hl = found[high, low]
            keep(high, low, k**2 * z_hl)
            for t in others:
                z_ht, z_lt = found[high, t], found[low, t]
                keep(high, t, k**2 * z_hl + z_lt - k * (z_hl + z_lt - z_ht))
        return found

    def _placed(self, winding: Winding) -> tuple[int, int]:
        """Shift and sense of a winding that lags the first by its clock.

        Shifting it to the next leg adds 4 hours, exchanging its ends 6.
        """
        first = self.windings[0].kind
        hours = (winding.clock - LAG[winding.kind] + LAG[first]) % 12
        if hours % 2:
            raise ValueError(f"{first}-{winding.kind} has no clock {winding.clock}")
        way = -1 if hours % 4 == 2 else 1
        return (hours - (6 if way < 0 else 0)) % 12 // 4, way

    def coils(
        self, nodes: Mapping[str, Sequence[int]], stars: Mapping[str, int], fresh: Callable[[float], int]
    ) -> list[Coil]:
        """Coils of all windings; phase nodes and star points by side, ``fresh`` makes a node."""
        found: list[Coil] = []
        lead = self.windings[0].side
        for w in self.windings:
            rated, placed = np.longdouble(w.rated), self._placed(w)
            own = nodes.get(w.side) or (fresh(w.rated), fresh(w.rated), EARTH)  # the tank's corners
            star = [stars.get(lead if w.kind == "auto" else w.side, EARTH)] * 3
            if w.kind == "delta":
                found.append(Coil(w.side, rated, _joined(own, (own[1], own[2], own[0])), *placed))
            elif w.kind == "star":
                found.append(Coil(w.side, rated / ROOT3, _joined(own, star), *placed, w.side))
            elif w.kind == "zigzag":
                # Phase k: half of leg k to the middle, thence against the sense of leg k - 1 to the
                # star point. The two are sqrt 3 of one, so a half has a third of the line voltage.
                middle = [fresh(w.rated) for _ in range(3)]
                shift, way = placed
                found.append(Coil(w.side, rated / 3, _joined(own, middle), shift, way))
                found.append(Coil(w.side, rated / 3, _joined(star, middle), shift - 1, way, w.side, -1))
            elif w.side == lead:  # the series winding of an auto-transformer
                low = self.windings[1]
                turns = (rated - np.longdouble(low.rated)) / ROOT3
                found.append(Coil(w.side, turns, _joined(own, nodes[low.side]), *placed))
            else:  # its common winding
                found.append(Coil(w.side, rated / ROOT3, _joined(own, star), *placed, lead))
        return found

    def law(self, coils: Sequence[Coil]) -> tuple[Matrix, Matrix]:
        """``voltage @ v + current @ i = 0``, the branches by coil and leg.

        Zigzag: let z_12 lie between the halves of a leg, z_p1 between either half and another winding
        p. Equal currents pass the halves of a leg in opposite senses: they see z_12 and nothing else,
        and p is not met. Of a rotating set the halves of a leg carry i_k and -i_(k+1). With p shorted
        and as reference the phase sees (per turn) 2 z_p1 i_k - Z_12 (i_(k+1) + i_(k-1)) = (2 z_p1 +
        Z_12) i_k, Z_12 = z_p1 - z_12/2: three times z_p1 - z_12/6, on a third of the turns squared
        of a star. So 9 z0/rated**2 stands between the halves, and z1 of a pair, in these units, grows
        by a sixth of that between a half and another winding.
        """
        nothing = np.zeros((3, 3), dtype=LONG)

        def apart(a: Coil, b: Coil) -> Matrix:
            if a is b:
                return nothing
            if a.side == b.side:
                return self._own[a.side]
            halves = self._own.get(a.side, nothing) + self._own.get(b.side, nothing)
            return self._between[a.side, b.side] + halves / 6

        first, *rest = coils
        voltage = np.zeros((3 * len(coils), 3 * len(coils)), dtype=LONG)
        current = np.zeros_like(voltage)
        current[:3] = np.hstack([c.turns * ONE for c in coils])  # ampere-turns of each leg
        for row, w in enumerate(rest, start=1):
            rows = slice(3 * row, 3 * row + 3)
            voltage[rows, :3] = -ONE / first.turns
            voltage[rows, rows] = ONE / w.turns
            for column, u in enumerate(rest, start=1):
                z = (apart(first, w) + apart(first, u) - apart(w, u)) / 2
                current[rows, 3 * column : 3 * column + 3] = -z * u.turns
        return voltage, current


def _joined(p: Sequence[int], q: Sequence[int]) -> list[Branch]:
    return list(zip(p, q, strict=True))
