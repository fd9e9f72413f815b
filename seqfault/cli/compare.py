"""``seqfault compare CASE PLACE``: kinds of fault side by side."""

from __future__ import annotations

import argparse
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from seqfault.cli.batches import add_workers, over_states
from seqfault.cli.options import (
    Commands,
    add_case,
    add_command,
    add_impedances,
    add_output,
    read_ohms,
)

if TYPE_CHECKING:
    from seqfault.faults.network import Network
    from seqfault.report.data import Quantity
    from seqfault.report.tables import Page
    from seqfault.studies.compare import Comparison


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "compare",
        "kinds of fault side by side",
        "Three-phase, line-line, line-line-ground and line-ground faults at one bus, side by side:"
        " currents, voltages left, and how earth current gets home.",
    )
    add_case(parser)
    parser.add_argument(
        "place", metavar="PLACE", help="a bus (inspect CASE --places lists them), ELEMENT@BUS or LINE@37%%"
    )
    parser.add_argument(
        "--at",
        metavar="ELEMENT@BUS",
        help="show what each kind of fault looks like from this terminal, wherever it is",
    )
    add_impedances(parser)
    add_workers(parser)
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    zf, zg = read_ohms(options.zf, "--zf"), read_ohms(options.zg, "--zg")
    from seqfault.studies.compare import compare

    study = partial(compare, place=options.place, zf=zf, zg=zg, at=options.at)

    def answer(network: Network, comparison: Comparison) -> Answer:

        def page() -> Page:
            from seqfault.report.compare import compare_page

            return compare_page(network, comparison)

        def tree() -> dict[str, Any]:
            from seqfault.report.compare_data import compare_tree

            return compare_tree(network, comparison)

        def rows() -> Iterable[Quantity]:
            from seqfault.report.compare_data import compare_rows

            return compare_rows(comparison)

        return Answer(page, tree, rows, network.model.warnings, network.model.state)

    return deliver(
        options, form, [answer(*each) for each in over_states(options, study, place=options.place)]
    )
