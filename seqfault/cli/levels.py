"""``seqfault levels CASE``: fault levels at every bus."""

from __future__ import annotations

import argparse

from seqfault.cli.batches import add_workers, over_states
from seqfault.cli.options import Commands, add_case, add_command, add_output
from seqfault.cli.outages import add_outages, run_outages
from seqfault.errors import RequestError


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "levels",
        "fault levels at every bus",
        "Bolted-fault currents at every bus, by voltage; with --scenario all the greatest and the"
        " least of each, and the states that give them; with --outages the same over outages.",
    )
    add_case(parser)
    add_outages(parser)
    add_workers(parser)
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted, warnings_of

    if options.outages is not None:
        return run_outages(options)
    if options.at:
        raise RequestError("--at: this goes with --outages; levels alone answers for every bus")

    form = form_wanted(options)
    from seqfault.report.levels import levels_page, levels_rows, levels_tree
    from seqfault.studies.levels import levels, silent

    found = over_states(options, levels)
    networks, states = [network for network, _ in found], [each for _, each in found]
    answer = Answer(
        partial(levels_page, networks, states),
        partial(levels_tree, networks, states),
        partial(levels_rows, states),
        warnings_of(networks, [silent(network) for network in networks]),
    )
    return deliver(options, form, [answer])
