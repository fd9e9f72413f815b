"""Earth faults over the ohms of a neutral: every state, the greatest of all, and what governs it."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.faults.neutral_faults import EarthFaults
from seqfault.faults.neutral_ports import KINDS
from seqfault.model.elements import Complex, Floats, Ints
from seqfault.studies.neutral_states import OPEN, NeutralStates


class Worst(msgspec.Struct, frozen=True, eq=False):
    """The greatest value (n,) over kinds and states, the kind and the state (n,) that give it."""

    value: Floats
    kind: Ints
    state: Ints


class Sweep(msgspec.Struct, frozen=True, eq=False):
    """Rows of a sweep: ``ohms`` (n,) complex, infinite open, and the earth faults of each state.

    ``duration`` s, for the energy. Each column is the greatest over kinds and states.
    """

    ohms: Complex
    faults: tuple[EarthFaults, ...]
    duration: float

    @property
    def earth(self) -> Worst:
        """3I0 into the fault, A."""
        return worst([np.abs(f.earth) for f in self.faults])

    @property
    def line_ground(self) -> Worst:
        """Line-ground current, A, the least over the states."""
        values = np.stack([np.abs(f.earth[0]) for f in self.faults])
        state = values.argmin(axis=0)
        return Worst(values.min(axis=0), np.zeros(len(self.ohms), np.int64), state)

    @property
    def neutral(self) -> Worst:
        """Current through the neutral, A; its voltage, power and energy have the same kind and state."""
        return worst([np.abs(f.neutral) for f in self.faults])

    @property
    def star(self) -> Worst:
        """Voltage of the star point to earth, V."""
        return worst([np.abs(f.star) for f in self.faults])

    @property
    def sound(self) -> Worst:
        """Earth-fault factor: the higher sound phase over the phase voltage before the fault."""
        return worst([f.factor for f in self.faults])

    @property
    def power(self) -> Worst:
        """W in the neutral."""
        return worst([f.power for f in self.faults])

    @property
    def energy(self) -> Floats:
        """J (n,) in the neutral over the duration."""
        return np.asarray(self.power.value * self.duration)


def worst(values: list[Floats]) -> Worst:
    """The greatest of ``values``, one (2, n) a state with the kind first; the first of equal ones."""
    every = np.concatenate(values)  # (states x kinds, n)
    top = every.max(axis=0)
    at = (every >= top * (1 - 1e-12)).argmax(axis=0)
    return Worst(top, at % len(KINDS), at // len(KINDS))


def sweep(neutral: NeutralStates, ohms: Complex, duration: float) -> Sweep:
    """Earth faults for ``ohms`` (n,) of the neutral in all its states."""
    return Sweep(np.asarray(ohms, complex), tuple(state.faults(ohms) for state in neutral.states), duration)


def spaced(low: float, high: float, points: int, direction: complex) -> Complex:
    """Rows of a sweep: solid, ``points`` from ``low`` to ``high`` ohm in equal ratios, open."""
    between = np.geomspace(low, high, points)
    between[0], between[-1] = low, high
    return np.concatenate([[0], between * direction, [OPEN]])


def around(neutral: NeutralStates, more: float | None) -> Complex:
    """Rows of a sweep a decade on either side of what stands and of ``more`` ohm."""
    known = [abs(state.ohms) for state in neutral.states if np.isfinite(state.ohms)]
    if more is not None and 0 < more < np.inf:
        known.append(more)
    return spaced(min(known) / 10, max(known) * 10, 12, neutral.direction)
