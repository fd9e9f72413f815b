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
from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import NDArray

Phasors = NDArray[np.complex128]
Matrix = NDArray[np.clongdouble]
Solution = tuple[Matrix, list[tuple["Group", Matrix]], Matrix]

EARTH = 0  # the node all voltages are measured from
FAULT = ""  # no element bears this name
# Extended precision where the platform has it (Linux); elsewhere plain double, at a loss of digits
# where capacitances are very small.
LONG = np.clongdouble
ONE = np.eye(3, dtype=LONG)
TURN = LONG(complex(-0.5, 0.0)) + LONG(1j) * np.sqrt(np.longdouble(3)) / 2  # 120 degrees ahead
# Ohms that make unknowns comparable, and what then is nothing: 1 pF is 3e-9, data carry 1e-16.
SCALE = 10.0
NOTHING = 1e-13


def _static(one: complex, zero: complex) -> Matrix:
    """Phase matrix of a static element: self (2 z1 + z0)/3, mutual (z0 - z1)/3."""
    mutual = (LONG(zero) - LONG(one)) / 3
    return LONG(one) * ONE + mutual  # self = z1 + mutual


def _rotating(z1: complex, z2: complex, z0: complex) -> Matrix:
    """Phase matrix of a machine: circulant, since it answers differently to the two rotations.

    Currents of rotation a b c see z1, those of rotation a c b see z2, equal currents z0: row a is
    (z0 + z1 + z2, z0 + h z1 + h2 z2, z0 + h2 z1 + h z2)/3 with h the turn by 120 degrees.
    """
    one, two, zero = LONG(z1), LONG(z2), LONG(z0)
    h, h2 = TURN, TURN * TURN
    row = np.array([zero + one + two, zero + h * one + h2 * two, zero + h2 * one + h * two]) / 3
    return np.array([row, np.roll(row, 1), np.roll(row, 2)])


@dataclass(frozen=True)
class Group:
    """Branches, from -> to, that share a law: ``voltage @ v + current @ i = drive``."""

    element: str
    ends: Sequence[tuple[int, int]]
    voltage: Matrix
    current: Matrix
    drive: complex | np.clongdouble = 0j


def _impedance(element: str, p: int, q: int, ohms: complex, drive: complex | np.clongdouble = 0j) -> Group:
    """One branch under Ohm's law, v - Z i = drive; zero ohm makes it a joint."""
    return Group(element, [(p, q)], ONE[:1, :1], np.array([[-LONG(ohms)]]), drive)


@dataclass(frozen=True)
class Result:
    """What a fault does. Arrays hold phases a, b, c.

    ``undetermined`` marks the phase voltages (and ``star_undetermined`` the star points) whose
    potential to earth nothing fixes: the number beside the mark is one of infinitely many answers.
    ``line_undetermined`` does so for a-b, b-c, c-a: only a bus with next to nothing on it has any.
    """

    fault_current: Phasors  # network -> fault
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
        self._star: dict[str, int] = {}  # star point -> node
        # winding or machine -> star point, group, branches with their sign towards the star point
        self._star_of: dict[str, tuple[str, int, list[tuple[int, int]]]] = {}
        self._delta: dict[str, tuple[int, list[tuple[int, int]]]] = {}  # sign in the sense a b c
        self._terminals: dict[tuple[str, str], None] = {}
        self._links: list[tuple[str, str, int]] = []  # bus, bus, hours the second lags
        self._sources: list[str] = []

    def bus(self, name: str, nominal: float) -> None:
        """``nominal`` is line to line."""
        self._nominal[name] = nominal
        self._bus[name] = self._nodes(nominal)

    def neutral(self, name: str, impedance: complex) -> None:
        """A star point other elements may name; 0 ohm is a bolted joint."""
        node = self._star[name] = self._node(1.0)
        self._groups.append(_impedance(name, node, EARTH, impedance))

    def infeed(self, name: str, bus: str, z1: complex, z2: complex, z0: complex | None) -> None:
        """A source behind its impedances; ``z0`` None means no path to earth."""
        star = self._node(self._nominal[bus]) if z0 is None else EARTH
        self._machine(name, bus, _rotating(z1, z2, z1 if z0 is None else z0), star)
        self._sources.append(bus)

    def generator(self, name: str, bus: str, z1: complex, z2: complex, z0: complex, star: str) -> None:
        """``star`` is "solid", "isolated" or the name of a neutral."""
        point, node = self._star_node(star, bus, name)
        self._star_of[name] = (point, len(self._groups), [(0, 1), (1, 1), (2, 1)])
        self._machine(name, bus, _rotating(z1, z2, z0), node)
        self._sources.append(bus)

    def motor(self, name: str, bus: str, z1: complex, z2: complex) -> None:
        """Star point to nothing: its currents add to zero, so z0 does not matter."""
        self._machine(name, bus, _rotating(z1, z2, z1), self._node(self._nominal[bus]))

    def line(
        self, name: str, bus_i: str, bus_j: str, z1: complex, z0: complex, c1: float = 0.0,
        c0: float = 0.0, open_ends: Sequence[str] = (),
    ) -> None:  # fmt: skip
        """Totals of a pi: half the capacitance at each end; an open end keeps its half."""
        ends = [self._phase_nodes(name, bus, bus in open_ends) for bus in (bus_i, bus_j)]
        if not open_ends:
            self._links.append((bus_i, bus_j, 0))
        pairs = list(zip(*ends, strict=True))
        self._groups.append(Group(name, pairs, ONE, -_static(z1, z0)))  # Ohm: v = Z i
        if c1 or c0:
            for nodes in ends:
                self._capacitors(name, nodes, _static(c1, c0) / 2)

    def capacitance(self, name: str, bus: str, c: float) -> None:
        """``c`` farad from each phase to earth."""
        self._capacitors(name, self._phase_nodes(name, bus), LONG(c) * ONE)

    def transformer(
        self, name: str, hv_bus: str, lv_bus: str, hv_kind: str, lv_kind: str, clock: int,
        hv_rated: float, lv_rated: float, z1: complex, z0: complex,
        hv_star: str = "isolated", lv_star: str = "isolated",
    ) -> None:  # fmt: skip
        """Three legs, an hv and an lv winding on each; no magnetising current.

        Kinds are "star" or "delta", rated voltages line to line with the tap in; ``z1``, ``z0`` are
        the leakage in ohm a phase of the equivalent star on the lv side.
        """
        # Turns go with the voltage of a winding; a delta winding has 3 times its star's ohms.
        per_winding = {"star": np.sqrt(np.longdouble(3)), "delta": 1}
        turns = LONG(hv_rated) / per_winding[hv_kind] / (LONG(lv_rated) / per_winding[lv_kind])
        leakage = _static(z1, z0) * (3 if lv_kind == "delta" else 1)
        # Leg k carries the hv winding of phase k (star) or from phase k to the next (delta). With lv
        # phase k on the same leg, lv lags by 0 h when the kinds agree; a delta voltage leads its phase by
        # 1 h: star-delta 1, delta-star 11. Each shift of lv to the next leg adds 4 h, swapped ends 6 h.
        own = {("star", "delta"): 1, ("delta", "star"): 11}.get((hv_kind, lv_kind), 0)
        if (hours := (clock - own) % 12) % 2:
            raise ValueError(f"{hv_kind}-{lv_kind} has no clock {clock}")
        sign = -1 if hours % 4 == 2 else 1
        shift = (hours - (6 if sign < 0 else 0)) % 12 // 4
        ends: list[tuple[int, int]] = []
        hv, lv = (hv_bus, hv_kind, hv_star, 0, 1), (lv_bus, lv_kind, lv_star, shift, sign)
        for side, (bus, kind, star, moved, way) in (("hv", hv), ("lv", lv)):
            nodes = self._phase_nodes(name, bus)
            placed = [(len(ends) + (k + moved) % 3, way) for k in range(3)]  # branch of phase k
            if kind == "star":
                point, node = self._star_node(star, bus, f"{name}.{side}")
                self._star_of[f"{name}.{side}"] = (point, len(self._groups), placed)
                windings = [(nodes[k], node) for k in range(3)]
            else:
                self._delta[f"{name}.{side}"] = (len(self._groups), placed)
                windings = [(nodes[k], nodes[(k + 1) % 3]) for k in range(3)]
            on_legs = [windings[(leg - moved) % 3] for leg in range(3)]
            ends += [(q, p) if way < 0 else (p, q) for p, q in on_legs]
        none = np.zeros((3, 3), dtype=LONG)
        # rows 0-2, ampere-turns of a leg: turns i_hv + i_lv = 0
        # rows 3-5, induction and leakage:  v_lv = v_hv / turns + Z i_lv
        voltage = np.block([[none, none], [-ONE / turns, ONE]])
        current = np.block([[turns * ONE, ONE], [none, -leakage]])
        self._groups.append(Group(name, ends, voltage, current))
        self._links.append((hv_bus, lv_bus, clock))

    def solve(
        self, bus: str, kind: str, phases: str, zf: complex = 0j, zg: complex = 0j,
        prefault: float = 1.0, clocks: Mapping[str, int] | None = None,
    ) -> Result:  # fmt: skip
        """Fault ``phases`` (such as "bc") of ``bus``; ``zf``, ``zg`` in ohm as the kinds define.

        ``line-ground``: zf + zg to earth. ``line-line``: zf between the two. ``line-line-ground``,
        ``three-phase-ground``: zf from each to a common point, zg from it to earth;
        ``three-phase``: no path to earth. Bus ``clocks`` are walked if not given.
        """
        walked = self._walk(bus)
        hours = {name: h for name, (_, h, _) in walked.items()} if clocks is None else clocks
        before = {}
        for name, nominal in self._nominal.items():
            turned = np.exp(-LONG(1j) * pi / 6 * ((hours[name] - hours[bus]) % 12))
            size = prefault * nominal / np.sqrt(np.longdouble(3)) * walked[name][2]
            before[name] = size * turned * np.array([1, TURN * TURN, TURN])
        faulted = [(self._bus[bus][k], before[bus][k]) for k in map("abc".index, phases)]
        (first, stood), *others = faulted
        bases = [*self._bases, self._nominal[bus]]
        common = len(self._bases)  # where the faulted phases meet
        if kind == "line-ground":
            fault = [_impedance(FAULT, first, EARTH, complex(zf) + complex(zg), -stood)]
        elif kind == "line-line":
            fault = [_impedance(FAULT, first, others[0][0], zf, others[0][1] - stood)]
        elif kind in ("line-line-ground", "three-phase-ground", "three-phase"):
            fault = [_impedance(FAULT, node, common, zf, -volts) for node, volts in faulted]
            if kind != "three-phase":
                fault.append(_impedance(FAULT, common, EARTH, zg))
        else:
            raise ValueError(f"no such kind of fault: {kind}")
        return self._collect(bus, before, self._kirchhoff(bases, [*self._groups, *fault]))

    def _kirchhoff(self, bases: Sequence[float], groups: Sequence[Group]) -> Solution:
        """All laws at once: node voltages, branch currents, node voltages nothing fixes."""
        ends = np.array([pair for g in groups for pair in g.ends])
        joins = np.zeros((len(ends), len(bases)), dtype=LONG)  # 1 where a branch begins, -1 where it ends
        np.add.at(joins, (np.arange(len(ends)), ends[:, 0]), 1)
        np.add.at(joins, (np.arange(len(ends)), ends[:, 1]), -1)
        joins = joins[:, 1:]  # EARTH's voltage is zero, its current law follows from the others
        nodes, count = len(bases) - 1, len(bases) - 1 + len(ends)
        matrix, right = np.zeros((count, count), dtype=LONG), np.zeros(count, dtype=LONG)
        matrix[:nodes, nodes:] = joins.T  # Kirchhoff's current law at every node
        stop = nodes
        for g in groups:  # law of each branch, its voltage by Kirchhoff's voltage law
            start, stop = stop, stop + len(g.ends)
            matrix[start:stop, :nodes] = g.voltage @ joins[start - nodes : stop - nodes]
            matrix[start:stop, start:stop] = g.current
            right[start:stop] = g.drive
        volts_of = np.array(bases)
        scale = np.append(volts_of[1:], np.max(volts_of[ends], axis=1) / SCALE).astype(np.longdouble)
        matrix *= scale
        largest = np.max(_size(matrix), axis=1)
        largest[largest == 0] = 1  # a bus with nothing on it
        solution, free = _eliminate(matrix / largest[:, None], right / largest)
        if free.size and np.max(_size(free[nodes:])) > 1e-6:
            raise ArithmeticError("a current is undetermined: resonance, or a loop of no impedance")
        stops = np.cumsum([nodes, *(len(g.ends) for g in groups)])
        volts, *amperes = np.split(solution * scale, stops)[:-1]
        earth = np.zeros((1, free.shape[1]), dtype=LONG)
        pairs = list(zip(groups, amperes, strict=True))
        return np.append(LONG(0), volts), pairs, np.concatenate([earth, free[:nodes]])

    def _collect(self, bus: str, before: Mapping[str, Matrix], solution: Solution) -> Result:
        """Put the solution in the words of the network."""
        potential, groups, free = solution

        def entering(element: str, nodes: Iterable[int]) -> Phasors:
            found = dict.fromkeys(nodes, LONG(0))
            for g, amperes in groups:
                for ends, i in zip(g.ends, amperes, strict=True):
                    for node, signed in zip(ends, (i, -i), strict=True):
                        if g.element == element and node in found:
                            found[node] += signed
            return np.array(list(found.values())).astype(complex)

        def picked(index: int, branches: Iterable[tuple[int, int]]) -> Phasors:
            return np.array([sign * groups[index][1][k] for k, sign in branches]).astype(complex)

        def moves(rows: Matrix) -> NDArray[np.bool_]:
            return np.array(np.any(_size(rows) > 1e-6, axis=1))

        share = {n: complex(picked(g, b).sum()) for n, (_, g, b) in self._star_of.items()}
        total = dict.fromkeys(self._star, 0j)
        for n, (star, _, _) in self._star_of.items():
            total[star] += share[n]
        turning = {name: picked(g, branches) for name, (g, branches) in self._delta.items()}
        moved = {name: free[list(nodes)] for name, nodes in self._bus.items()}
        walked = self._walk(bus).items()
        return Result(
            fault_current=entering(FAULT, self._bus[bus]),
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
        fed = {reached[name][0] for name in self._sources}
        return {name: (root, clock, root in fed) for name, (root, clock) in reached.items()}

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
        self._groups.append(Group(name, ends, ONE, -impedance))  # Ohm, source shorted: v = Z i

    def _capacitors(self, name: str, nodes: Iterable[int], farads: Matrix) -> None:
        admittance = LONG(1j) * self.omega * farads
        ends = [(node, EARTH) for node in nodes]
        self._groups.append(Group(name, ends, -admittance, ONE))  # charging: i = jwC v


def _size(values: Matrix) -> NDArray[np.longdouble]:
    return np.abs(values.real) + np.abs(values.imag)


def _eliminate(matrix: Matrix, right: Matrix) -> tuple[Matrix, Matrix]:
    """Gauss-Jordan with full pivoting: one solution (free unknowns 0) and the free directions.

    Rows are scaled to 1; what is left below ``NOTHING`` is zero.
    """
    count = rank = len(right)
    work = np.concatenate([matrix, right[:, None]], axis=1)
    order = np.arange(count)
    for k in range(count):
        sizes = _size(work[k:, k:count])
        row, column = np.unravel_index(np.argmax(sizes), sizes.shape)
        if sizes[row, column] < NOTHING:
            rank = k
            break
        across, down = np.array([k, k + int(row)]), np.array([k, k + int(column)])
        work[across] = work[across[::-1]]
        work[:, down] = work[:, down[::-1]]
        order[down] = order[down[::-1]]
        work[k, k:] /= work[k, k]
        rows = np.flatnonzero(work[:, k])
        rows = rows[rows != k]
        columns = k + np.flatnonzero(work[k, k:])
        work[np.ix_(rows, columns)] -= np.outer(work[rows, k], work[k, columns])
        work[rows, k] = 0
    left = _size(work[rank:, count])
    if left.size and np.max(left) > 1e-10 * max(1.0, float(np.max(_size(right)))):
        raise ArithmeticError("the equations contradict each other: no answer exists")
    solution = np.zeros(count, dtype=LONG)
    solution[order[:rank]] = work[:rank, count]
    free = np.zeros((count, count - rank), dtype=LONG)
    free[order[:rank]] = -work[:rank, rank:count]
    free[order[rank:], np.arange(count - rank)] = 1
    return solution, free
