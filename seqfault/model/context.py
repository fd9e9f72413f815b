"""What the builders of a model share."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import Any, Literal

import numpy as np

from seqfault.case.records import Case, Record
from seqfault.equations.per_unit import base_impedance
from seqfault.model.assumptions import Ledger
from seqfault.model.coils import fixed_impedances
from seqfault.model.stars import StarRegister
from seqfault.model.ties import merged_nodes

Machine = Literal["subtransient", "transient", "synchronous"]
MACHINES: tuple[Machine, ...] = ("subtransient", "transient", "synchronous")


class Context:
    """What the builders share: the buses in service, the base, the ledger, the star points."""

    def __init__(
        self,
        case: Case,
        machine: Machine,
        coils: Mapping[str, complex],
        links: Sequence[tuple[str, str]] = (),
    ) -> None:
        self.case = case
        self.machine = machine
        self.loaded = case.prefault.state == "loaded"
        self.power = case.base_power
        self.omega = 2 * np.pi * case.frequency
        kept = {name: bus for name, bus in case.buses.items() if not bus.out}
        self.index = {name: k for k, name in enumerate(kept)}
        self.nominal = np.array([bus.voltage.value.real for bus in kept.values()], float)
        self.base_z = base_impedance(self.nominal, self.power)
        self.ledger = Ledger()
        self.warnings: list[str] = []
        self.complaints: list[str] = []
        self.node = merged_nodes(case, self.index)
        self.stars = StarRegister({**fixed_impedances(case.neutrals), **coils})
        self.metal: list[tuple[int, int]] = []
        # Pairs of nodes that breaks stand between: one zone and one part, but not one node.
        pairs = [(self.index[p], self.index[q]) for p, q in links]
        self.links = self.node[np.array(pairs, np.int64).reshape(-1, 2)].T

    def in_service(self, table: str, ends: Callable[[Any], Iterable[str]]) -> dict[str, Any]:
        """Records of ``table`` that are in, at buses that are in."""
        records: dict[str, Record] = getattr(self.case, table)
        return {
            name: record
            for name, record in records.items()
            if not record.out and all(bus in self.index for bus in ends(record))
        }
