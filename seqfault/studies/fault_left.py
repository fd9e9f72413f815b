"""What of a fault is left while breakers open: whether it is still fed, and what flows into it."""

from __future__ import annotations

from collections.abc import Container

import msgspec
import numpy as np

from seqfault.faults.solution import FaultSolution, FaultState


class Left(msgspec.Struct, frozen=True):
    """What still flows into the faults, A: the greatest phase current, and the greatest 3I0 to earth."""

    phase: float
    earth: float


def standing(solution: FaultSolution, opened: Container[str]) -> bool:
    """Whether an infeed or generator still feeds any fault; breakers that have ``opened`` are no faults.

    A break that lies on no earth counts while both its sides are fed.
    """
    return any(all(_fed(solution, bus) for bus in _buses(state)) for state in _asked(solution, opened))


def left_of(solution: FaultSolution, opened: Container[str], floor: float = 0.0) -> Left:
    """What flows into the faults, and through breaks that lie on no earth; 0 up to ``floor`` A."""
    phase = earth = 0.0
    for state in _asked(solution, opened):
        phase = max(phase, float(np.abs(state.current).max()))
        earth = max(earth, abs(state.residual) if state.fault.earth else 0.0)
        if state.through is not None and not state.fault.fallen:
            phase = max(phase, float(np.abs(state.through).max()))
    return Left(phase if phase > floor else 0.0, earth if earth > floor else 0.0)


def _asked(solution: FaultSolution, opened: Container[str]) -> list[FaultState]:
    """The faults asked for, without the breakers that have opened since."""
    return [
        state
        for state in solution.faults
        if not (state.fault.kind.name == "open-three" and state.fault.place in opened)
    ]


def _buses(state: FaultState) -> tuple[str, ...]:
    return state.sides if state.sides is not None and not state.fault.fallen else (state.bus,)


def _fed(solution: FaultSolution, bus: str) -> bool:
    at = solution.index[bus]
    return bool(solution.before[at] != 0 and not solution.lost[at])
