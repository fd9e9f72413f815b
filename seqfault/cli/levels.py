"""``seqfault levels CASE``: fault levels at every bus."""

from __future__ import annotations

import argparse
from collections.abc import Iterator
from typing import TYPE_CHECKING

from seqfault.cli.options import Commands, add_case, add_command, add_output, read_networks

if TYPE_CHECKING:
    from seqfault.report.data import Quantity


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "levels",
        "fault levels at every bus",
        "Bolted-fault currents at every bus, by voltage; with --scenario all the greatest and the"
        " least of each, and the states that give them.",
    )
    add_case(parser)
    parser.add_argument(
        "--contributions",
        action="store_true",
        help="also what each line, transformer and source at a bus sends towards the fault there",
    )
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    networks = read_networks(options)
    from itertools import chain

    from seqfault.report.contributions import contributions_rows
    from seqfault.report.levels import levels_page, levels_rows, levels_tree
    from seqfault.studies.contributions import contributions
    from seqfault.studies.levels import levels, silent

    states = [levels(network) for network in networks]
    fed = [contributions(network) for network in networks] if options.contributions else []

    def rows() -> Iterator[Quantity]:
        also = (contributions_rows(n.model, each) for n, each in zip(networks, fed, strict=False))
        return chain(levels_rows(states), *also)

    answer = Answer(
        partial(levels_page, networks, states, fed),
        partial(levels_tree, networks, states, fed),
        rows,
        [text for network in networks for text in (*network.model.warnings, *silent(network))],
    )
    return deliver(options, form, [answer])
