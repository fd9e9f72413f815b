"""A network built once, asked many times."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from msgspec.structs import replace

from seqfault.case.arrangement import Label, arranged
from seqfault.case.places import Place, read_place
from seqfault.case.records import Case
from seqfault.case.scenarios import in_state
from seqfault.errors import RequestError, quoted
from seqfault.faults.breaks import fallen_side
from seqfault.faults.kinds import Fault, fault_at
from seqfault.faults.loaded import loaded
from seqfault.faults.ports import null_basis
from seqfault.faults.solution import FaultSolution
from seqfault.faults.solve import solve_faults
from seqfault.faults.standing import Standing, loops_of
from seqfault.model.build import MACHINES, Machine, build_arranged, build_model
from seqfault.model.elements import Model, Shunts
from seqfault.networks.factors import SequenceNetworks


class Network:
    """The three sequence networks of a case in one operating state.

    ``model`` holds the per-unit elements and all assumptions, ``sequences`` the factorised networks.
    Building costs one factorisation a sequence; each ``fault`` at a bus after that costs three solves.
    A fault along a line or at a terminal, and an open conductor, make a network with buses there first
    (``located``); ``labels`` say how its answers name terminals, where not as its model does.
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
        self.machine: Machine = machine
        self.case = case if scenario is None else in_state(case, scenario)
        self.model: Model
        self.model, self.loading = loaded(build_model(self.case, machine))
        self.sequences = SequenceNetworks(self.model)
        self._bus_of: Mapping[str, str] = {}
        self._breaks: Mapping[str, tuple[str, str, str]] = {}
        self.labels: Mapping[tuple[str, str], Label | None] = {}  # a mapping proxy does not pickle

    @property
    def buses(self) -> tuple[str, ...]:
        """Names of the buses in service, in the order of the case."""
        return self.model.buses

    def place(self, text: str) -> Place:
        """What ``text`` names: a bus, a terminal, a point along a line.

        Raises ``RequestError`` with the nearest name where it names nothing in service.
        """
        return read_place(self.case, text)

    def bus_of(self, place: Place) -> str:
        """The bus that stands for a place; this network must have been made for it (``located``)."""
        return place.bus if not place.element else self._bus_of[place.name]

    def check_place(self, place: str) -> None:
        """Raises ``RequestError`` with the nearest name where ``place`` names nothing in service."""
        self.place(place)

    def located(self, places: Iterable[str], breaks: Iterable[str] = ()) -> Network:
        """This network with a bus at each of ``places`` and a break at each of ``breaks``.

        Faults that need no other places are solved on it without another factorisation. Raises
        ``RequestError`` for places that are none.
        """
        points = [place for text in places if (place := self.place(text)).element]
        broken = [self.place(text) for text in breaks]
        if not (points or broken):
            return self
        made = arranged(self.case, points, broken)
        located = object.__new__(Network)
        located.case = self.case
        model, located.loading = loaded(build_arranged(made.case, self.model, self.machine))
        if made.breaks:
            case, links = made.broken()
            opened = build_arranged(case, self.model, self.machine, links)
            model = replace(opened, before=model.before, sources=_loads_of(model, opened))
        located.machine = self.machine
        located.model = replace(model, assumptions=self.model.assumptions, warnings=self.model.warnings)
        located.sequences = SequenceNetworks(located.model)
        located._bus_of, located._breaks, located.labels = made.bus_of, made.breaks, made.labels
        return located

    def fault(
        self,
        place: str,
        kind: str = "line-ground",
        *,
        phases: str | None = None,
        zf: complex = 0,
        zg: complex = 0,
        fallen: str = "",
        also: Sequence[Fault] = (),
    ) -> FaultSolution:
        """Solve one fault, and others that stand ``also`` at the same time.

        ``place`` is a bus, ``ELEMENT@BUS`` or ``LINE@37%``; ``kind`` one of line-ground, line-line,
        line-line-ground, three-phase, three-phase-ground, open-one, open-two, open-three; ``phases`` such
        as ``"b"`` or ``"ca"``; ``zf`` and ``zg`` in ohm and ``fallen`` as in ``faults.kinds.Fault``.
        Raises ``RequestError`` for what cannot be asked, ``NoAnswerError`` at resonance.
        """
        return self.solve([fault_at(place, kind, phases, zf, zg, fallen), *also])

    def solve(self, faults: Sequence[Fault]) -> FaultSolution:
        """Solve ``faults`` that stand at once; angles refer to the first. Raises as ``fault`` does."""
        if not faults:
            raise RequestError("no fault was asked for")
        places = [self.place(fault.place) for fault in faults]
        broken = [p for p, fault in zip(places, faults, strict=True) if fault.kind.series]
        needed = [p for p in places if p.element]
        have = {p.name for p in needed} <= set(self._bus_of)
        if have and {p.name for p in broken} == set(self._breaks):
            return self._solved(faults, places)
        return self.located([p.text for p in needed], [p.text for p in broken])._solved(faults, places)

    def _solved(self, faults: Sequence[Fault], places: Sequence[Place]) -> FaultSolution:
        standing = [self._standing(fault, p) for fault, p in zip(faults, places, strict=True)]
        _check_together(self.model, standing)
        return solve_faults(self.sequences, standing, self.loading, self.labels)

    def _standing(self, fault: Fault, place: Place) -> Standing:
        if not fault.kind.series:
            if place.fraction is not None and place.name in self._breaks:
                raise RequestError(
                    f"place {quoted(place.text)}: the line is broken at this very point; put the other"
                    " fault a little to one side, or say on which side the conductor has fallen"
                )
            return Standing(fault, (self.bus_of(place),))
        joint, near, far = self._breaks[place.name]
        names = (place.bus, place.element)
        if place.fraction is not None:
            line = self.case.lines[place.element]
            names = (line.from_, line.to)
        side = fallen_side(self.model, fault, names, (near, far)) if fault.fallen else None
        return Standing(fault, (near, far), side, joint)


def _loads_of(closed: Model, opened: Model) -> Shunts:
    """The sources of ``opened`` with the admittances that loads have in ``closed``."""
    return replace(opened.sources, admittance=closed.sources.admittance)


def _check_together(model: Model, standing: Sequence[Standing]) -> None:
    """Raise ``RequestError`` where two faults are one: the same phases joined without impedance twice."""
    ports = [[int(model.node[model.index[bus]]) for bus in each.buses] for each in standing]
    row = {node: k for k, node in enumerate(dict.fromkeys(node for at in ports for node in at))}
    joints = np.zeros((3 * len(row), 0), complex)
    for number, (each, at) in enumerate(zip(standing, ports, strict=True)):
        shape = loops_of(model, each, np.array([model.index[bus] for bus in each.buses]))
        bolted = null_basis(shape.impedance)
        own = np.zeros((3 * len(row), bolted.shape[1]), complex)
        for node, incidence in zip(at, shape.incidence, strict=True):
            own[3 * row[node] : 3 * row[node] + 3] += incidence @ bolted
        joints = np.concatenate([joints, own], axis=1)
        if joints.shape[1] and np.linalg.matrix_rank(joints) < joints.shape[1]:
            others = ", ".join(quoted(each.fault.place) for each in standing[:number])
            raise RequestError(
                f"place {quoted(each.fault.place)}: what is joined here without impedance is joined already"
                f" by the faults at {others or 'it'}; how the current shares between them has no answer:"
                " ask for one fault of the kind meant, or give each an impedance"
            )
