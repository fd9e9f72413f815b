"""What a fault does, in SI: currents, voltages, flows, star points, and how earth current gets home."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.equations.symmetrical import Complex, to_phases
from seqfault.faults.kinds import Fault
from seqfault.model.assumptions import Assumption
from seqfault.model.elements import Bools, Floats, Ints


class Terminals(msgspec.Struct, frozen=True, eq=False):
    """Currents (A) from the bus into each terminal of each element, in the order of the case.

    ``sequence`` (3, t) components 0, 1, 2 at the true angle of the bus; ``count`` (t,) identical
    circuits or units the record stands for.
    """

    element: tuple[str, ...]
    kind: tuple[str, ...]
    side: tuple[str, ...]
    bus: tuple[str, ...]
    bus_index: Ints
    count: Ints
    sequence: Complex

    def extended(
        self,
        element: tuple[str, ...],
        kind: str,
        side: tuple[str, ...],
        bus: Ints,
        buses: tuple[str, ...],
        sequence: Complex,
    ) -> Terminals:
        """These terminals and more of one ``kind``, at ``bus`` (m,) of ``buses``; counts are 1."""
        return Terminals(
            element=self.element + element,
            kind=self.kind + (kind,) * len(element),
            side=self.side + side,
            bus=self.bus + tuple(buses[k] for k in bus.tolist()),
            bus_index=np.concatenate([self.bus_index, bus]),
            count=np.concatenate([self.count, np.ones(len(element), np.int64)]),
            sequence=np.concatenate([self.sequence, sequence], axis=1),
        )

    @property
    def phases(self) -> Complex:
        """Phase currents a, b, c (3, t) A."""
        return to_phases(self.sequence)

    @property
    def residual(self) -> Complex:
        """Sum of the phase currents (t,) A."""
        return np.asarray(3 * self.sequence[0])


class StarPointState(msgspec.Struct, frozen=True, eq=False):
    """One star point: ``current`` (A) from it to earth, ``voltage`` (V) to earth.

    ``kind`` is solid, isolated or neutral; ``voltage`` is None where nothing fixes the potential.
    """

    name: str
    kind: str
    current: complex
    voltage: complex | None
    bus: str


class DeltaCurrent(msgspec.Struct, frozen=True, eq=False):
    """Current (A) circulating in a delta, positive a to b to c to a; of all units of the record."""

    element: str
    side: str
    bus: str
    current: complex


class EarthedLine(msgspec.Struct, frozen=True, eq=False):
    """A line out of service and earthed at both ends: its zero-sequence current times three, A."""

    name: str
    residual: complex


class HomePath(msgspec.Struct, frozen=True, eq=False):
    """One way the earth current returns: ``current`` (A) from earth into the network."""

    path: str
    current: complex


class FaultState(msgspec.Struct, frozen=True, eq=False):
    """One of the faults that stand at once, at true angles.

    ``nominal`` V and ``prefault`` per unit of it at its place; ``impedance`` (3,) ohm, driving-point
    impedances at the place, or between both sides of a break, infinite without a path; ``current`` (3,)
    phases and ``current_sequence`` (3,) A from the network into the fault, to earth where a conductor has
    fallen. Of a break alone: ``through`` (3,) A that flows on through the poles, ``through_before`` (3,)
    A before it, ``across`` (3,) V of the phases from its first side to its second, ``sides`` their buses.
    """

    fault: Fault
    nominal: float
    prefault: float
    impedance: Complex
    current: Complex
    current_sequence: Complex
    bus: str
    through: Complex | None = None
    through_before: Complex | None = None
    across: Complex | None = None
    sides: tuple[str, str] | None = None

    @property
    def residual(self) -> complex:
        """Three times the zero-sequence current, A: what the fault sends into earth."""
        return complex(3 * self.current_sequence[0])


class FaultSolution(msgspec.Struct, frozen=True, eq=False):
    """Solved faults. SI throughout; the sequence axis is the first, in the order 0, 1, 2.

    Angles are relative to the phase-a-to-earth voltage at the first faulted place before the fault.

    ``faults`` the faults that stand at once; the properties ``fault``, ``nominal``, ``prefault``,
    ``impedance``, ``current`` and ``current_sequence`` are of the first. ``voltage_sequence`` (3, n) V to
    earth at every bus of ``buses``; ``before`` (n,) V, phase a before the fault; ``undefined`` (n,)
    buses whose potential to earth nothing fixes; ``lost`` (n,) buses that open poles have cut off from
    every infeed and generator; ``joined`` (n,) buses joined by metal to a faulted place; ``terminals``
    the currents during the fault and ``terminals_before`` those before it, None on a flat profile;
    ``balance`` the largest imbalance of any node over what the check allows.
    """

    faults: tuple[FaultState, ...]
    state: str
    machine: str
    base_power: float
    loaded: bool
    buses: tuple[str, ...]
    bus_nominal: Floats
    voltage_sequence: Complex
    before: Complex
    undefined: Bools
    lost: Bools
    joined: Bools
    terminals: Terminals
    terminals_before: Terminals | None
    star_points: tuple[StarPointState, ...]
    deltas: tuple[DeltaCurrent, ...]
    earthed_lines: tuple[EarthedLine, ...]
    home: tuple[HomePath, ...]
    balance: float
    notes: tuple[str, ...]
    undefined_notes: tuple[str, ...]
    assumptions: tuple[Assumption, ...]
    warnings: tuple[str, ...]
    index: dict[str, int]

    @property
    def fault(self) -> Fault:
        """The first fault."""
        return self.faults[0].fault

    @property
    def nominal(self) -> float:
        """Nominal voltage (V) at the first fault."""
        return self.faults[0].nominal

    @property
    def prefault(self) -> float:
        """Voltage at the first fault before it, per unit of nominal."""
        return self.faults[0].prefault

    @property
    def impedance(self) -> Complex:
        """Driving-point impedances (3,) ohm of the first fault."""
        return self.faults[0].impedance

    @property
    def current(self) -> Complex:
        """Phase currents (3,) A from the network into the first fault."""
        return self.faults[0].current

    @property
    def current_sequence(self) -> Complex:
        """Components (3,) A of ``current``."""
        return self.faults[0].current_sequence

    @property
    def largest(self) -> float:
        """The largest phase current (A) of any fault or through any break."""
        sizes = [np.abs(f.current).max() for f in self.faults]
        sizes += [np.abs(f.through).max() for f in self.faults if f.through is not None]
        return float(max(sizes))

    @property
    def residual(self) -> complex:
        """What the first fault sends into earth, A: three times its zero-sequence current."""
        return self.faults[0].residual

    @property
    def voltage(self) -> Complex:
        """Phase-to-earth voltages (3, n) V; meaningless where ``undefined``."""
        return to_phases(self.voltage_sequence)

    @property
    def impedance_pu(self) -> Complex:
        """Driving-point impedances (3,) on the base power and the place's nominal voltage."""
        known = np.isfinite(self.impedance)
        scale = self.base_power / self.nominal**2
        return np.where(known, np.where(known, self.impedance, 0) * scale, np.inf)

    def at(self, bus: str) -> Complex:
        """Phase-to-earth voltages (3,) V at ``bus``. Raises ``KeyError`` for an unknown bus."""
        return np.asarray(self.voltage[:, self.index[bus]])

    @property
    def loop_impedance(self) -> complex:
        """The impedance (ohm) that limits the current, fault impedance included, for X/R.

        Z1 three-phase; Z1 + Z2 line-line; Z1 + Z2 + Z0 line-ground; Z1 + Z2 Z0/(Z2 + Z0) with two
        phases to ground: IEC 60909-0 clause 4.2. Not a number for open conductors and for several
        faults at once.
        """
        if len(self.faults) > 1 or self.fault.kind.series:
            return complex(np.nan)
        z0, z1, z2 = (complex(z) for z in self.impedance)
        zf, zg = self.fault.zf, self.fault.zg
        match self.fault.kind.name:
            case "line-ground":
                return z1 + z2 + z0 + 3 * (zf + zg)
            case "line-line":
                return z1 + z2 + zf
            case "line-line-ground":
                back, home = z2 + zf, z0 + zf + 3 * zg
                if not np.isfinite(home):
                    return z1 + zf + back
                return z1 + zf + back * home / (back + home)
            case _:
                return z1 + zf

    @property
    def x_over_r(self) -> float:
        """X/R of ``loop_impedance``; infinite without resistance, nan where no current can flow."""
        z = self.loop_impedance
        if not np.isfinite(z):
            return float("nan")
        return float("inf") if z.real == 0 else z.imag / z.real

    @property
    def earth_fault_factor(self) -> Floats | None:
        """Earth-fault factor (n,) of every bus, None for a fault clear of earth.

        IEC 60071-1 clause 3: the highest voltage to earth of a sound phase over the phase voltage
        there without the fault. Where the bus is not joined by metal to a faulted place no phase is
        faulted, and the highest of all three counts; nan at dead buses and where ``undefined``.
        """
        if not any(state.fault.earth for state in self.faults):
            return None
        size = np.abs(self.voltage)
        shorted = "".join(s.fault.phases for s in self.faults if not s.fault.kind.series or s.fault.fallen)
        faulted = [p in shorted for p in "abc"]
        size = np.where(np.array(faulted)[:, None] & self.joined[None, :], -1.0, size).max(axis=0)
        reference = np.abs(self.before)
        known = (reference > 0) & ~self.undefined & (size >= 0)
        return np.where(known, size / np.where(reference > 0, reference, 1), np.nan)
