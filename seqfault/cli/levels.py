"""``seqfault levels CASE``: fault levels at every bus."""

from __future__ import annotations

import argparse

from seqfault.cli.options import Commands, add_case, add_command, add_output, read_networks


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
    add_output(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted, warnings_of

    form = form_wanted(options)
    networks = read_networks(options)
    from seqfault.report.levels import levels_page, levels_rows, levels_tree
    from seqfault.studies.levels import levels, silent

    states = [levels(network) for network in networks]
    answer = Answer(
        partial(levels_page, networks, states),
        partial(levels_tree, networks, states),
        partial(levels_rows, states),
        warnings_of(networks, [silent(network) for network in networks]),
    )
    return deliver(options, form, [answer])
