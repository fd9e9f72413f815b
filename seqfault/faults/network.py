"""A network built once, asked many times."""

from __future__ import annotations

import difflib

from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.errors import RequestError, quoted
from seqfault.faults.kinds import Fault, fault_at
from seqfault.faults.solution import FaultSolution
from seqfault.faults.solve import solve_fault
from seqfault.model.build import MACHINES, Machine, build_model
from seqfault.model.elements import Model
from seqfault.networks.factors import SequenceNetworks


class Network:
    """The three sequence networks of a case in one operating state.

    ``model`` holds the per-unit elements and all assumptions, ``sequences`` the factorised networks.
    Building costs one factorisation a sequence; each ``fault`` after that costs three solves.
    """

    def __init__(
        self,
        case: Case,
        scenario: str | None = None,
        *,
        machine: Machine = "subtransient",
    ) -> None:
        """``case`` as read, in its own state or in that of ``scenario``.

        ``machine`` picks the reactance of synchronous machines. Raises ``CaseError`` where the case
        does not make a network, ``RequestError`` for an unknown scenario or machine state.
        """
        if machine not in MACHINES:
            raise RequestError(f"machine {quoted(str(machine))}: one of {', '.join(MACHINES)}")
        self.case = case if scenario is None else in_state(case, scenario)
        self.model: Model = build_model(self.case, machine)
        self.sequences = SequenceNetworks(self.model)

    @property
    def buses(self) -> tuple[str, ...]:
        """Names of the buses in service, in the order of the case."""
        return self.model.buses

    def check_place(self, place: str) -> None:
        """Raises ``RequestError`` with the nearest name where ``place`` is no bus in service."""
        if place in self.model.index:
            return
        if place in self.case.buses:
            raise RequestError(f"place {quoted(place)}: this bus is out of service in this state")
        near = difflib.get_close_matches(place, self.model.buses, n=1, cutoff=0.5)
        hint = f"did you mean {quoted(near[0])}?" if near else "inspect CASE --places lists them"
        raise RequestError(f"place {quoted(place)}: no bus has this name; {hint}")

    def fault(
        self,
        place: str,
        kind: str = "line-ground",
        *,
        phases: str | None = None,
        zf: complex = 0,
        zg: complex = 0,
    ) -> FaultSolution:
        """Solve one fault at the bus ``place``.

        ``kind`` is one of line-ground, line-line, line-line-ground, three-phase, three-phase-ground;
        ``phases`` such as ``"b"`` or ``"ca"``; ``zf`` and ``zg`` in ohm (see ``faults.kinds.Fault``).
        Raises ``RequestError`` for what cannot be asked, ``NoAnswerError`` at resonance.
        """
        self.check_place(place)
        asked: Fault = fault_at(place, kind, phases, zf, zg)
        return solve_fault(self.sequences, asked)
