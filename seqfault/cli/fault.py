"""``seqfault fault CASE PLACE``: one fault in full."""

from __future__ import annotations

import argparse
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from seqfault.cli.options import (
    Commands,
    add_case,
    add_command,
    add_impedances,
    add_output,
    read_networks,
    read_ohms,
)

if TYPE_CHECKING:
    from seqfault.faults.network import Network
    from seqfault.report.data import Quantity
    from seqfault.report.tables import Page

KINDS = ("three-phase", "three-phase-ground", "line-line", "line-line-ground", "line-ground")


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "fault",
        "one fault in full",
        "One fault at one bus in full: the current, how it gets home, the voltages at every bus,"
        " who feeds it, what flows elsewhere, and what each star point sees.",
    )
    add_case(parser)
    parser.add_argument("place", metavar="PLACE", help="a bus; inspect CASE --places lists them")
    group = parser.add_argument_group("fault")
    group.add_argument(
        "--kind",
        metavar="KIND",
        default="line-ground",
        help=f"{', '.join(KINDS)} (default: line-ground)",
    )
    group.add_argument(
        "--phases", metavar="PHASES", help="faulted phases, as in b or ca (default: a, or bc)"
    )
    add_impedances(parser)
    shown = parser.add_argument_group("what is shown")
    shown.add_argument("--flows", action="store_true", help="every element, small flows included")
    shown.add_argument("--components", action="store_true", help="zero, positive, negative sequence")
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    zf, zg = read_ohms(options.zf, "--zf"), read_ohms(options.zg, "--zg")
    networks = read_networks(options, options.place)

    def answer(network: Network) -> Answer:
        solution = network.fault(options.place, options.kind, phases=options.phases, zf=zf, zg=zg)

        def page() -> Page:
            from seqfault.report.fault import fault_page

            return fault_page(network, solution, every_flow=options.flows, sequence=options.components)

        def tree() -> dict[str, Any]:
            from seqfault.report.data import fault_tree

            return fault_tree(network, solution)

        def rows() -> Iterable[Quantity]:
            from seqfault.report.data import fault_rows

            return fault_rows(solution)

        return Answer(page, tree, rows, network.model.warnings)

    return deliver(options, form, [answer(network) for network in networks])
