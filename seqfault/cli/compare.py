"""``seqfault compare CASE PLACE``: kinds of fault side by side."""

from __future__ import annotations

import argparse

from seqfault.cli.options import (
    Commands,
    add_case,
    add_command,
    add_impedances,
    add_output,
    read_networks,
    read_ohms,
)

NAME = "compare"


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        NAME,
        "kinds of fault side by side",
        "Three-phase, line-line, line-line-ground and line-ground faults at one bus, side by side:"
        " currents, voltages left, and how earth current gets home.",
    )
    add_case(parser)
    parser.add_argument("place", metavar="PLACE", help="a bus; inspect CASE --places lists them")
    add_impedances(parser)
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    zf, zg = read_ohms(options.zf, "--zf"), read_ohms(options.zg, "--zg")
    networks = read_networks(options, options.place)
    from seqfault.report.compare import compare_page, compare_rows, compare_tree
    from seqfault.studies.compare import compare

    answers = []
    for network in networks:
        comparison = compare(network, options.place, zf=zf, zg=zg)
        answers.append(
            Answer(
                partial(compare_page, network, comparison),
                partial(compare_tree, network, comparison),
                partial(compare_rows, comparison),
                network.model.warnings,
            )
        )
    return deliver(options, form, answers)
