"""What an earthing transformer, or a zigzag winding, carries when its neutral does."""

from __future__ import annotations

import msgspec
import numpy as np

from seqfault.equations.neutrals import ohms_of_rating, short_time_rating
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution


class EarthingDuty(msgspec.Struct, frozen=True):
    """The greatest earth fault's duty of one earthing transformer or zigzag winding.

    ``record`` is ``earthing transformer`` or ``transformer``; ``kind`` of fault that governs; ``neutral``
    A it sends into the star point, ``phase`` A in each phase; ``needed`` VA for the short time,
    ``hundred_percent`` ohm a phase that 100 % on it is; ``z0`` ohm a phase of the record; ``rating`` VA
    and ``duration`` s stated, or None.
    """

    name: str
    record: str
    kind: str
    neutral: float
    phase: float
    needed: float
    hundred_percent: float
    z0: complex
    rating: float | None
    duration: float | None

    @property
    def z0_percent(self) -> float:
        """z0 as per cent of the rating needed."""
        return 100 * abs(self.z0) / self.hundred_percent if self.hundred_percent else float("nan")


def earthing_duties(
    network: Network, star: int, solutions: tuple[FaultSolution, ...]
) -> tuple[EarthingDuty, ...]:
    """Duties of all zigzag windings and earthing transformers whose star point is ``star``."""
    model, out = network.model, []
    for sets in model.winding_sets:
        zigzag = sets.kind_of_record == "earthing transformer" or (
            sets.kind_of_record == "transformer" and len(sets.sides) == 1
        )
        if not zigzag:
            continue
        for k, name in enumerate(sets.names):
            if int(sets.star[k, 0]) != star:
                continue
            bus = int(sets.bus[k, 0])
            currents = [_residual(s, name, model.buses[bus]) for s in solutions]
            worst = int(np.argmax(currents))
            neutral, nominal = currents[worst], float(model.nominal[bus])
            needed = short_time_rating(nominal, neutral)
            record = network.case.earthing_transformers.get(name)
            rating = record.rating.value.real if record is not None and record.rating else None
            duration = record.duration.value.real if record is not None and record.duration else None
            out.append(
                EarthingDuty(
                    name=name,
                    record=sets.kind_of_record,
                    kind=solutions[worst].fault.kind.name,
                    neutral=neutral,
                    phase=neutral / 3,
                    needed=needed,
                    hundred_percent=ohms_of_rating(nominal, needed) if needed else float("inf"),
                    z0=complex(nominal**2 / model.base_power / sets.leakage[0, k, 0, 0]),
                    rating=None if rating is None else float(rating),
                    duration=None if duration is None else float(duration),
                )
            )
    return tuple(out)


def _residual(solution: FaultSolution, element: str, bus: str) -> float:
    """3I0 (A) that an element draws at a bus, all its terminals there together."""
    t = solution.terminals
    at = [k for k, key in enumerate(zip(t.element, t.bus, strict=True)) if key == (element, bus)]
    return float(np.abs(t.residual[at].sum()))
