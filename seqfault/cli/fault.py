"""``seqfault fault CASE PLACE``: one fault in full, or several at once."""

from __future__ import annotations

import argparse
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from seqfault.cli.batches import add_workers, over_states
from seqfault.cli.options import (
    KINDS,
    Commands,
    add_case,
    add_command,
    add_impedances,
    add_output,
    read_ohms,
)
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from seqfault.faults.kinds import Fault
    from seqfault.faults.network import Network
    from seqfault.faults.solution import FaultSolution
    from seqfault.report.data import Quantity
    from seqfault.report.tables import Page

OWN = ("kind", "phases", "zf", "zg", "fallen")
"""Options of one fault: those behind ``--and PLACE`` are that fault's."""


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "fault",
        "one fault in full, or several at once",
        "One fault in full, or several at once: the currents, how they get home, the voltages at every"
        " bus, who feeds them, what flows elsewhere, and what each star point sees. A place is a bus,"
        " ELEMENT@BUS for a terminal, or LINE@37% for a point along a line.",
    )
    add_case(parser)
    parser.add_argument(
        "place",
        metavar="PLACE",
        nargs="?",
        help="a bus (inspect CASE --places lists them), ELEMENT@BUS, LINE@37%% or LINE@4.2km",
    )
    group = add_fault(parser)
    group.add_argument(
        "--steps", metavar="FILE", help="faults and open poles step by step, in TOML, instead of PLACE"
    )
    shown = parser.add_argument_group("what is shown")
    shown.add_argument("--flows", action="store_true", help="every element, small flows included")
    shown.add_argument("--components", action="store_true", help="zero, positive, negative sequence")
    add_workers(parser)
    add_output(parser)
    parser.set_defaults(run=run)


def add_fault(parser: argparse.ArgumentParser) -> Any:
    """The options of one fault, and of others at the same time; returns their group."""
    group = parser.add_argument_group("fault")
    group.add_argument(
        "--kind",
        metavar="KIND",
        default="line-ground",
        action=OfLast,
        help=f"{', '.join(KINDS)} (default: line-ground)",
    )
    group.add_argument(
        "--phases",
        metavar="PHASES",
        action=OfLast,
        help="faulted or open phases, as in b or ca (default: a, or bc)",
    )
    group.add_argument(
        "--fallen",
        metavar="SIDE",
        action=OfLast,
        help="an open conductor lies on earth on this side: source, load, or the bus or element there",
    )
    group.add_argument(
        "--and",
        metavar="PLACE",
        dest="also",
        action=Also,
        help="another fault at the same time; its own --kind, --phases, --zf, --zg and --fallen follow",
    )
    add_impedances(parser, OfLast)
    return group


class OfLast(argparse.Action):
    """An option of the fault named last."""

    def __call__(
        self, parser: object, namespace: argparse.Namespace, values: object, option_string: object = None
    ) -> None:
        """Keep the value with its fault."""
        if namespace.also:
            namespace.also[-1][self.dest] = values
        else:
            setattr(namespace, self.dest, values)


class Also(argparse.Action):
    """``--and PLACE``: a further fault."""

    def __call__(
        self, parser: object, namespace: argparse.Namespace, values: object, option_string: object = None
    ) -> None:
        """Begin its options."""
        namespace.also = [*(namespace.also or []), {"place": values}]


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from seqfault.cli.delivery import Answer, deliver, form_wanted

    if options.steps is not None:
        from seqfault.cli.steps import run_steps

        return run_steps(options)
    if options.place is None:
        raise RequestError("a place is wanted: a bus, ELEMENT@BUS or LINE@37%; or --steps FILE")
    form = form_wanted(options)
    first = {name: getattr(options, name) for name in ("place", *OWN)}
    faults = [read_fault(own) for own in (first, *(options.also or []))]
    from seqfault.faults.network import Network

    def answer(network: Network, solution: FaultSolution) -> Answer:

        def page() -> Page:
            from seqfault.report.fault import fault_page

            return fault_page(network, solution, every_flow=options.flows, sequence=options.components)

        def tree() -> dict[str, Any]:
            from seqfault.report.data import fault_tree

            return fault_tree(network, solution)

        def rows() -> Iterable[Quantity]:
            from seqfault.report.data import fault_rows

            return fault_rows(solution)

        return Answer(page, tree, rows, network.model.warnings, network.model.state)

    found = over_states(options, Network.solve, faults, place=options.place)
    return deliver(options, form, [answer(*each) for each in found])


def read_fault(own: dict[str, Any]) -> Fault:
    """The fault that the options of one fault state. Raises ``RequestError``."""
    from seqfault.faults.kinds import fault_at

    zf, zg = read_ohms(own.get("zf"), "--zf"), read_ohms(own.get("zg"), "--zg")
    kind, phases = own.get("kind") or "line-ground", own.get("phases")
    return fault_at(own["place"], kind, phases, zf, zg, own.get("fallen") or "")
