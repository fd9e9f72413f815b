"""A fault that evolves: the network solved at each step, all that stands in it at once."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec

from seqfault.case.steps import Step
from seqfault.errors import RequestError, SeqfaultError
from seqfault.faults.kinds import fault_at
from seqfault.faults.network import Network
from seqfault.faults.solution import FaultSolution


class Evolution(msgspec.Struct, frozen=True, eq=False):
    """``titles`` and ``solutions`` of the steps, in order."""

    titles: tuple[str, ...]
    solutions: tuple[FaultSolution, ...]


def evolve(network: Network, steps: Sequence[Step]) -> Evolution:
    """Solve every step on ``network``.

    Raises ``RequestError`` and ``NoAnswerError`` as ``Network.solve`` does, with the number of the step.
    """
    asked, refused = [], []
    for number, step in enumerate(steps, 1):
        try:
            faults = [fault_at(f.place, f.kind, f.phases, f.zf, f.zg, f.fallen) for f in step.faults]
            for fault in faults:
                network.check_place(fault.place)
            asked.append(faults)
        except RequestError as error:
            refused.append(f"step {number}: {error}")
    if refused:
        raise RequestError("\n".join(refused))
    solutions = []
    for number, faults in enumerate(asked, 1):
        try:
            solutions.append(network.solve(faults))
        except SeqfaultError as error:
            raise type(error)(f"step {number}: {error}") from None
    return Evolution(tuple(step.title for step in steps), tuple(solutions))
