"""``seqfault inspect CASE``: what was read."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from seqfault.cli.options import (
    Commands,
    add_case,
    add_command,
    add_output,
    read_networks,
    read_states,
)

if TYPE_CHECKING:
    from seqfault.faults.network import Network


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "inspect",
        "what was read: zones, per unit, windings, assumptions",
        "What was read of a case: voltage zones and base values, impedances per unit, what each"
        " winding does to zero sequence, star points, relays with their settings, and every assumption.",
    )
    add_case(parser)
    parser.add_argument("--places", action="store_true", help="print one place a line, nothing else")
    parser.add_argument(
        "--sequence",
        metavar="PLACE",
        help="draw the three sequence networks a fault at this bus sees, branch by branch",
    )
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    if options.places:
        return _places(options)
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    networks = read_networks(options)
    if options.sequence is not None:
        return _sequence(options, networks)
    from seqfault.report.inspect import inspect_page, inspect_rows, inspect_tree
    from seqfault.studies.inspect import inspect_network

    answers = []
    for network in networks:
        inspection = inspect_network(network)
        answers.append(
            Answer(
                partial(inspect_page, inspection),
                partial(inspect_tree, inspection),
                partial(inspect_rows, inspection),
                inspection.warnings,
                inspection.state,
            )
        )
    return deliver(options, form, answers)


def _sequence(options: argparse.Namespace, networks: list[Network]) -> int:
    """The networks drawn, one answer a state."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted
    from seqfault.report.sequence import sequence_page, sequence_rows, sequence_tree
    from seqfault.studies.sequence_view import sequence_views

    answers = []
    for network in networks:
        views = sequence_views(network, options.sequence)
        model = network.model
        answers.append(
            Answer(
                partial(sequence_page, views, model.title),
                partial(sequence_tree, views, model.title, model.sha256),
                partial(sequence_rows, views),
                model.warnings,
                model.state,
            )
        )
    return deliver(options, form_wanted(options), answers)


def _places(options: argparse.Namespace) -> int:
    """Names as ``fault`` takes them, unescaped: this is for programs, so never dressed up."""
    import sys

    names = dict.fromkeys(
        name for case in read_states(options) for name, bus in case.buses.items() if not bus.out
    )
    text = "".join(f"{name}\n" for name in names)
    buffer = getattr(sys.stdout, "buffer", None)
    if buffer is None:
        sys.stdout.write(text)
    else:
        buffer.write(text.encode())
        buffer.flush()
    return 0
