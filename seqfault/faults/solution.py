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


class FaultSolution(msgspec.Struct, frozen=True, eq=False):
    """A solved fault. SI throughout; the sequence axis is the first, in the order 0, 1, 2.

    Angles are relative to the phase-a-to-earth voltage at the faulted place before the fault.

    ``impedance`` (3,) ohm, driving-point impedances, infinite where the place has no such path;
    ``current`` (3,) phases and ``current_sequence`` (3,) A from the network into the fault;
    ``voltage_sequence`` (3, n) V to earth at every bus of ``buses``; ``before`` (n,) V, phase a before
    the fault; ``undefined`` (n,) buses whose potential to earth nothing fixes; ``joined`` (n,) buses
    joined by metal to the place; ``balance`` the largest imbalance of any node over what the check
    allows.
    """

    fault: Fault
    state: str
    machine: str
    nominal: float
    base_power: float
    prefault: float
    impedance: Complex
    current: Complex
    current_sequence: Complex
    buses: tuple[str, ...]
    bus_nominal: Floats
    voltage_sequence: Complex
    before: Complex
    undefined: Bools
    joined: Bools
    terminals: Terminals
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
    def residual(self) -> complex:
        """Three times the zero-sequence current, A: what the fault sends into earth."""
        return complex(3 * self.current_sequence[0])

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
        phases to ground: IEC 60909-0 clause 4.2.
        """
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
        there without the fault. Where the bus is not joined by metal to the faulted place no phase is
        faulted, and the highest of all three counts; nan at dead buses and where ``undefined``.
        """
        if not self.fault.kind.earth:
            return None
        size = np.abs(self.voltage)
        faulted = [p in self.fault.phases for p in "abc"]
        size = np.where(np.array(faulted)[:, None] & self.joined[None, :], -1.0, size).max(axis=0)
        reference = np.abs(self.before)
        known = (reference > 0) & ~self.undefined & (size >= 0)
        return np.where(known, size / np.where(reference > 0, reference, 1), np.nan)
