"""An independent judge of the package: a fault solver in phase coordinates.

Nothing here comes from ``seqfault`` and nothing is solved by symmetrical components. A network is
a set of phase nodes, star points and branches; every branch current and every node voltage is an
unknown of one dense set of equations (the tableau of circuit theory: Kirchhoff's two laws and the
law of each branch), so neither a bolted fault nor a capacitance of a picofarad needs a trick. Only
the data that a nameplate gives as z1, z2, z0 are turned into 3x3 phase matrices, in closed form.

Units are volt, ampere, ohm, farad, hertz. Phasors are r.m.s.; voltages are to earth.

Model of the fault. The state before it is flat: every live bus has ``prefault`` times its nominal
voltage, balanced, turned by -30 degrees for every hour its clock is ahead of the faulted bus, whose
phase a is the reference; dead parts (no infeed, no generator) have none. The sources are then
shorted and the fault branches driven by minus the voltage that stood across them. Voltages are the
sum of both states, currents those of the fault alone.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import accumulate
from math import pi

import numpy as np
from numpy.typing import NDArray

from tests.referee_equations import (
    EARTH,
    LONG,
    ONE,
    TURN,
    Branch,
    Group,
    Matrix,
    Solution,
    kirchhoff,
    ohmic,
    rotating,
    size,
    static,
)  # fmt: skip
from tests.referee_windings import Core, Pairs, Winding, star_pairs

Phasors = NDArray[np.complex128]

__all__ = ["Referee", "Result", "Winding", "star_pairs"]


@dataclass(frozen=True)
class Short:
    """A shunt fault: ``phases`` of ``bus``, ohms as the kinds define (see ``Referee.solve``)."""

    bus: str
    kind: str
    phases: str
    zf: complex = 0j
    zg: complex = 0j


@dataclass(frozen=True)
class Result:
    """What a fault does. Arrays hold phases a, b, c.

    ``undetermined`` marks the phase voltages (and ``star_undetermined`` the star points) whose
    potential to earth nothing fixes: the number beside the mark is one of infinitely many answers.
    ``line_undetermined`` does so for a-b, b-c, c-a: only a bus with next to nothing on it has any.
    """

    fault_current: Phasors  # network -> the first fault
    fault_currents: tuple[Phasors, ...]  # network -> each fault
    prefault: dict[str, Phasors]  # before the fault, by bus
    voltages: dict[str, Phasors]  # during the fault, by bus
    undetermined: dict[str, NDArray[np.bool_]]
    line_undetermined: dict[str, NDArray[np.bool_]]
    flows: dict[tuple[str, str], Phasors]  # (element, bus): from the bus into the element
    star_current: dict[str, complex]  # star point -> earth, by the star point's name
    star_voltage: dict[str, complex]
    star_undetermined: frozenset[str]
    star_share: dict[str, complex]  # what one winding or machine brings to its star point
    delta_current: dict[str, complex]  # "T1.lv": mean winding current in the sense a -> b -> c -> a
    winding_current: dict[str, Phasors]  # delta windings: a -> b, b -> c, c -> a
    through: dict[str, Phasors]  # lines and reactors: in series, first -> second bus
    live: frozenset[str]  # buses with a source
    joined: frozenset[str]  # buses joined to the faulted one: only their clock is known

    def line_voltages(self, bus: str) -> Phasors:
        """Voltages a-b, b-c, c-a at ``bus``."""
        v = self.voltages[bus]
        return v - np.roll(v, -1)


class Referee:
    """A network put together element by element, then faulted."""

    def __init__(self, frequency: float) -> None:
        self.omega = 2 * np.longdouble(pi) * frequency
        self._nominal: dict[str, float] = {}
        self._bus: dict[str, tuple[int, int, int]] = {}
        self._bases: list[float] = [0.0]  # volts that scale each node; EARTH comes first
        self._groups: list[Group] = []
        self._series: dict[str, tuple[list[Branch], Matrix]] = {}  # lines: branches, ohms
        self._mutual: list[tuple[str, str, complex]] = []
        self._star: dict[str, int] = {}  # star point -> node
        # winding or machine -> star point, group, branches with their sign towards the star point
        self._star_of: dict[str, tuple[str, int, list[tuple[int, int]]]] = {}
        self._delta: dict[str, tuple[int, list[tuple[int, int]]]] = {}  # sign in the sense a b c
        self._terminals: dict[tuple[str, str], None] = {}
        self._links: list[tuple[str, str, int]] = []  # bus, bus, hours the second lags
        self._sources: list[str] = []
        self._machines: dict[int, str] = {}  # group -> infeed, generator or motor
        self._parted: set[tuple[str, str]] = set()  # of one clock, but nothing joins them

    def bus(self, name: str, nominal: float) -> None:
        """``nominal`` is line to line."""
        self._nominal[name] = nominal
        self._bus[name] = self._nodes(nominal)

    def neutral(self, name: str, impedance: complex) -> None:
        """A star point other elements may name; 0 ohm is a bolted joint."""
        node = self._star[name] = self._node(1.0)
        self._groups.append(ohmic(name, node, EARTH, impedance))

    def infeed(self, name: str, bus: str, z1: complex, z2: complex, z0: complex | None) -> None:
        """A source behind its impedances; ``z0`` None means no path to earth."""
        star = self._node(self._nominal[bus]) if z0 is None else EARTH
        self._machine(name, bus, rotating(z1, z2, z1 if z0 is None else z0), star)
        self._sources.append(bus)

    def generator(self, name: str, bus: str, z1: complex, z2: complex, z0: complex, star: str) -> None:
        """``star`` is "solid", "isolated" or the name of a neutral."""
        point, node = self._star_node(star, bus, name)
        self._star_of[name] = (point, len(self._groups), [(0, 1), (1, 1), (2, 1)])
        self._machine(name, bus, rotating(z1, z2, z0), node)
        self._sources.append(bus)

    def motor(self, name: str, bus: str, z1: complex, z2: complex) -> None:
        """Star point to nothing: its currents add to zero, so z0 does not matter."""
        self._machine(name, bus, rotating(z1, z2, z1), self._node(self._nominal[bus]))

    def line(
        self, name: str, bus_i: str, bus_j: str, z1: complex, z0: complex, c1: float = 0.0,
        c0: float = 0.0, open_ends: Sequence[str] = (), earthed: bool = False,
    ) -> None:  # fmt: skip
        """Totals of a pi: half the capacitance at each end; an open end keeps its half.

        ``earthed``: taken off both buses and earthed at both ends.
        """
        ends = [self._phase_nodes(name, bus, earthed or bus in open_ends) for bus in (bus_i, bus_j)]
        if earthed:
            ends = [(EARTH, EARTH, EARTH)] * 2
        elif not open_ends:
            self._links.append((bus_i, bus_j, 0))
        self._series[name] = (list(zip(*ends, strict=True)), static(z1, z0))
        if (c1 or c0) and not earthed:
            for nodes in ends:
                self._capacitors(name, nodes, static(c1, c0) / 2)

    def couple(self, first: str, second: str, z0: complex) -> None:
        """Zero-sequence coupling of two lines, ohm in all, both taken from their first bus.

        Every conductor of one induces z0/3 in every conductor of the other.
        """
        self._mutual.append((first, second, z0))

    def reactor(self, name: str, bus_i: str, bus_j: str, z1: complex, z0: complex) -> None:
        """Ohms in series."""
        self.line(name, bus_i, bus_j, z1, z0)

    def tie(self, name: str, bus_i: str, bus_j: str, closed: bool) -> None:
        """Three joints of 0 ohm if ``closed``, else nothing."""
        pairs = zip(self._phase_nodes(name, bus_i), self._phase_nodes(name, bus_j), strict=True)
        if closed:
            self._groups += [ohmic(name, p, q, 0) for p, q in pairs]
            self._links.append((bus_i, bus_j, 0))

    def poles(self, name: str, bus_i: str, bus_j: str, closed: str) -> None:
        """A switch of three poles of which those in ``closed`` join its buses with 0 ohm.

        Both buses stood at one voltage before the others opened.
        """
        pairs = list(zip(self._phase_nodes(name, bus_i), self._phase_nodes(name, bus_j), strict=True))
        self._groups += [ohmic(name, *pairs["abc".index(phase)], 0) for phase in closed]
        self._links.append((bus_i, bus_j, 0))
        if not closed:
            self._parted.add((bus_i, bus_j))

    def load(self, name: str, bus: str, z: complex, connection: str) -> None:
        """Three of ``z`` ohm: "star-earthed", or "star" to a point that is not."""
        star = EARTH if connection == "star-earthed" else self._node(self._nominal[bus])
        for node in self._phase_nodes(name, bus):
            self._groups.append(ohmic(name, node, star, z))

    def capacitance(self, name: str, bus: str, c: float) -> None:
        """``c`` farad from each phase to earth."""
        self.capacitor(name, bus, c, "star-earthed")

    def capacitor(self, name: str, bus: str, c: float, connection: str) -> None:
        """Three of ``c`` farad: "star-earthed", "star" to a point that is not, or "delta"."""
        nodes = self._phase_nodes(name, bus)
        if connection == "delta":
            self._capacitors(name, nodes, LONG(c) * ONE, (nodes[1], nodes[2], nodes[0]))
        else:
            star = EARTH if connection == "star-earthed" else self._node(self._nominal[bus])
            self._capacitors(name, nodes, LONG(c) * ONE, (star, star, star))

    def transformer(
        self, name: str, hv_bus: str, lv_bus: str, hv_kind: str, lv_kind: str, clock: int,
        hv_rated: float, lv_rated: float, z1: complex, z0: complex,
        hv_star: str = "isolated", lv_star: str = "isolated",
    ) -> None:  # fmt: skip
        """Three legs, an hv and an lv winding on each; no magnetising current.

        Kinds are "star" or "delta", rated voltages line to line with the tap in; ``z1``, ``z0`` are
        the leakage in ohm a phase of the equivalent star on the lv side.
        """
        sides = (
            Winding("hv", hv_bus, hv_kind, hv_rated, 0, hv_star),
            Winding("lv", lv_bus, lv_kind, lv_rated, clock, lv_star),
        )
        self.windings(name, sides, {("hv", "lv"): z1}, {("hv", "lv"): z0}, lv_rated)

    def windings(
        self, name: str, windings: Sequence[Winding], one: Pairs, zero: Pairs, volts: float
    ) -> None:
        """Any transformer: windings of one core, the first of clock 0, without magnetising current.

        ``one`` and ``zero`` are the impedances between the pairs of sides, positive and zero sequence,
        in ohm a phase of a star of ``volts`` line to line (the rated voltage of the side they are
        seen from); a pair that ``zero`` leaves out is as in ``one``. Where ``zero`` pairs a side with
        "tank" the core has three limbs: the flux that the limbs have in common returns through the
        tank, which acts as a closed delta around them that meets nothing else.
        """
        core = Core(windings, one, zero, volts)
        nodes = {w.side: self._phase_nodes(name, w.bus) for w in windings}
        stars = {}
        for w in core.starred():
            stars[w.side] = self._star_node(w.star, w.bus, f"{name}.{w.side}" if w.side else name)
        coils = core.coils(nodes, {side: node for side, (_, node) in stars.items()}, self._node)
        deltas = [w.side for w in windings if w.kind == "delta"]
        for number, coil in enumerate(coils):
            branches = coil.of_phases(3 * number)
            if coil.side in deltas:
                self._delta[f"{name}.{coil.side}"] = (len(self._groups), branches)
            elif coil.star is not None:
                point = stars[coil.star][0]
                full = f"{name}.{coil.star}" if coil.star else name
                self._star_of[full] = (point, len(self._groups), branches)
        ends = [pair for coil in coils for pair in coil.on_legs()]
        self._groups.append(Group([name] * len(ends), ends, *core.law(coils)))
        self._links += [(windings[0].bus, w.bus, w.clock) for w in windings[1:]]

    def earthing_transformer(self, name: str, bus: str, z0: complex, star: str) -> None:
        """A zigzag alone: ``z0`` ohm a phase to equal currents, nothing to any others."""
        own = Winding("", bus, "zigzag", self._nominal[bus], 0, star, z0)
        self.windings(name, [own], {}, {}, self._nominal[bus])

    def solve(
        self, bus: str, kind: str, phases: str, zf: complex = 0j, zg: complex = 0j,
        prefault: float = 1.0, clocks: Mapping[str, int] | None = None,
    ) -> Result:  # fmt: skip
        """Fault ``phases`` (such as "bc") of ``bus``; ``zf``, ``zg`` in ohm as the kinds define.

        ``line-ground``: zf + zg to earth. ``line-line``: zf between the two. ``line-line-ground``,
        ``three-phase-ground``: zf from each to a common point, zg from it to earth;
        ``three-phase``: no path to earth. Bus ``clocks`` are walked if not given.
        """
        return self.solve_many([Short(bus, kind, phases, zf, zg)], prefault, clocks)

    def solve_many(
        self, faults: Sequence[Short], prefault: float = 1.0, clocks: Mapping[str, int] | None = None,
        reference: str = "",
    ) -> Result:  # fmt: skip
        """Faults that stand at once, as ``solve``; angles refer to ``reference`` or the first bus."""
        bus = reference or faults[0].bus
        walked = self._walk(bus)
        hours = {name: h for name, (_, h, _) in walked.items()} if clocks is None else clocks
        before = {}
        for name, nominal in self._nominal.items():
            turned = np.exp(-LONG(1j) * pi / 6 * ((hours[name] - hours[bus]) % 12))
            size = prefault * nominal / np.sqrt(np.longdouble(3)) * walked[name][2]
            before[name] = size * turned * np.array([1, TURN * TURN, TURN])
        return self._faulted(faults, before, self._groups, bus)

    def solve_driven(
        self, faults: Sequence[Short], sources: Mapping[str, Matrix], reference: str = ""
    ) -> Result:
        """As ``solve_many``, with the voltages (3,) behind the impedances of ``sources`` driving all.

        Nothing is superposed: voltages and flows are those of the faulted network.
        """
        at = reference or faults[0].bus
        still = {name: np.zeros(3, dtype=LONG) for name in self._nominal}
        groups = [
            replace(group, drive=sources[self._machines[k]]) if self._machines.get(k) in sources else group
            for k, group in enumerate(self._groups)
        ]
        return self._faulted(faults, still, groups, at)

    def _faulted(
        self, faults: Sequence[Short], before: dict[str, Matrix], own: list[Group], at: str
    ) -> Result:
        bases, groups = list(self._bases), [*own, *self._lines()]
        for number, fault in enumerate(faults):
            faulted = [
                (self._bus[fault.bus][k], before[fault.bus][k]) for k in map("abc".index, fault.phases)
            ]
            (first, stood), *others = faulted
            common, name = len(bases), _fault_name(number)  # where the faulted phases meet
            bases.append(self._nominal[fault.bus])
            zf, zg = complex(fault.zf), complex(fault.zg)
            if fault.kind == "line-ground":
                groups.append(ohmic(name, first, EARTH, zf + zg, -stood))
            elif fault.kind == "line-line":
                groups.append(ohmic(name, first, others[0][0], zf, others[0][1] - stood))
            elif fault.kind in ("line-line-ground", "three-phase-ground", "three-phase"):
                groups += [ohmic(name, node, common, zf, -volts) for node, volts in faulted]
                if fault.kind != "three-phase":
                    groups.append(ohmic(name, common, EARTH, zg))
            else:
                raise ValueError(f"no such kind of fault: {fault.kind}")
        places = [fault.bus for fault in faults]
        return self._collect(at, places, before, kirchhoff(bases, groups))

    def _lines(self) -> list[Group]:
        """Series branches of all lines under one law, Ohm's with the coupling: v = Z i."""
        if not self._series:
            return []
        at = dict(zip(self._series, accumulate([3] * len(self._series), initial=0), strict=False))
        ohms = np.zeros((3 * len(at), 3 * len(at)), dtype=LONG)
        for name, (_, own) in self._series.items():
            ohms[at[name] : at[name] + 3, at[name] : at[name] + 3] = own
        for first, second, z0 in self._mutual:
            i, j = at[first], at[second]
            ohms[i : i + 3, j : j + 3] += LONG(z0) / 3
            ohms[j : j + 3, i : i + 3] += LONG(z0) / 3
        ends = [pair for pairs, _ in self._series.values() for pair in pairs]
        names = [name for name in at for _ in range(3)]
        return [Group(names, ends, np.eye(len(ends), dtype=LONG), -ohms)]

    def _collect(
        self, bus: str, places: Sequence[str], before: Mapping[str, Matrix], solution: Solution
    ) -> Result:
        """Put the solution in the words of the network."""
        potential, groups, free = solution

        branches = [branch for g, i in groups for branch in zip(g.elements, g.ends, i, strict=True)]

        def entering(element: str, nodes: Iterable[int]) -> Phasors:
            found = dict.fromkeys(nodes, LONG(0))
            for owner, ends, i in branches:
                if owner == element:
                    for node, signed in zip(ends, (i, -i), strict=True):
                        if node in found:
                            found[node] += signed
            return np.array(list(found.values())).astype(complex)

        def picked(index: int, branches: Iterable[tuple[int, int]]) -> Phasors:
            return np.array([sign * groups[index][1][k] for k, sign in branches]).astype(complex)

        def moves(rows: Matrix) -> NDArray[np.bool_]:
            return np.array(np.any(size(rows) > 1e-6, axis=1))

        share = {n: complex(picked(g, b).sum()) for n, (_, g, b) in self._star_of.items()}
        total = dict.fromkeys(self._star, 0j)
        for n, (star, _, _) in self._star_of.items():
            total[star] += share[n]
        turning = {name: picked(g, branches) for name, (g, branches) in self._delta.items()}
        moved = {name: free[list(nodes)] for name, nodes in self._bus.items()}
        walked = self._walk(bus).items()
        series = groups[len(self._groups)][1] if self._series else np.zeros(0)
        through = dict(zip(self._series, series.reshape(-1, 3).astype(complex), strict=True))
        currents = tuple(entering(_fault_name(k), self._bus[places[k]]) for k in range(len(places)))
        return Result(
            fault_current=currents[0] if currents else np.zeros(3, complex),
            fault_currents=currents,
            prefault={n: v.astype(complex) for n, v in before.items()},
            voltages={n: (v + potential[list(self._bus[n])]).astype(complex) for n, v in before.items()},
            undetermined={n: moves(m) for n, m in moved.items()},
            line_undetermined={n: moves(m - np.roll(m, -1, axis=0)) for n, m in moved.items()},
            flows={(e, b): entering(e, self._bus[b]) for e, b in self._terminals},
            star_current=total,
            star_voltage={n: complex(potential[k]) for n, k in self._star.items()},
            star_undetermined=frozenset(n for n, k in self._star.items() if moves(free[[k]])[0]),
            star_share=share,
            delta_current={n: complex(np.mean(i)) for n, i in turning.items()},
            winding_current=turning,
            through=through,
            live=frozenset(n for n, (_, _, live) in walked if live),
            joined=frozenset(n for n, (root, _, _) in walked if root == bus),
        )

    def _walk(self, start: str) -> dict[str, tuple[str, int, bool]]:
        """Root, clock and life of each bus; ``start`` first, then the first bus of each part."""
        reached: dict[str, tuple[str, int]] = {}
        for root in (start, *self._bus):
            fresh = [] if root in reached else [root]
            reached.setdefault(root, (root, 0))
            for name in fresh:  # grows while it is read
                for i, j, hours in self._links:
                    for here, there, step in ((i, j, hours), (j, i, -hours)):
                        if here == name and there not in reached:
                            reached[there] = (root, (reached[name][1] + step) % 12)
                            fresh.append(there)
        fed, grew = set(self._sources), True
        while grew:
            ends = [set(link[:2]) for link in self._links if link[:2] not in self._parted]
            more = {bus for pair in ends if pair & fed for bus in pair}
            grew = not more <= fed
            fed |= more
        return {name: (root, clock, name in fed) for name, (root, clock) in reached.items()}

    def _nodes(self, base: float) -> tuple[int, int, int]:
        return self._node(base), self._node(base), self._node(base)

    def _node(self, base: float) -> int:
        self._bases.append(base)
        return len(self._bases) - 1

    def _phase_nodes(self, element: str, bus: str, opened: bool = False) -> tuple[int, int, int]:
        self._terminals[element, bus] = None
        return self._nodes(self._nominal[bus]) if opened else self._bus[bus]

    def _star_node(self, star: str, bus: str, own_name: str) -> tuple[str, int]:
        """Name and node of a star point: earth if solid, a node of its own if isolated."""
        if star not in ("solid", "isolated"):
            node = self._star[star]
            self._bases[node] = max(self._bases[node], self._nominal[bus])
            return star, node
        self._star[own_name] = EARTH if star == "solid" else self._node(self._nominal[bus])
        return own_name, self._star[own_name]

    def _machine(self, name: str, bus: str, impedance: Matrix, star: int) -> None:
        ends = [(node, star) for node in self._phase_nodes(name, bus)]
        self._machines[len(self._groups)] = name
        self._groups.append(Group([name] * 3, ends, ONE, -impedance))  # Ohm, source shorted: v = Z i

    def _capacitors(
        self, name: str, nodes: Sequence[int], farads: Matrix, to: Sequence[int] = (EARTH, EARTH, EARTH)
    ) -> None:
        admittance = LONG(1j) * self.omega * farads
        ends = list(zip(nodes, to, strict=True))
        self._groups.append(Group([name] * 3, ends, -admittance, ONE))  # charging: i = jwC v


def _fault_name(number: int) -> str:
    return f"\0{number}"  # no element bears such a name
