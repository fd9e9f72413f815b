"""``seqfault levels CASE``: fault levels at every bus."""

from __future__ import annotations

import argparse
from collections.abc import Iterator
from typing import TYPE_CHECKING

from seqfault.cli.batches import add_workers, over_states
from seqfault.cli.options import Commands, add_case, add_command, add_output
from seqfault.cli.outages import add_outages, run_outages
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from seqfault.faults.network import Network
    from seqfault.report.data import QuantityColumn
    from seqfault.studies.contributions import Contributions
    from seqfault.studies.levels import Levels


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

    from seqfault.cli.delivery import Answer, deliver, form_wanted, warnings_of

    if options.outages is not None:
        if options.contributions:
            raise RequestError("--contributions: this goes with whole surveys, not with --outages")
        return run_outages(options)
    if options.at:
        raise RequestError("--at: this goes with --outages; levels alone answers for every bus")

    form = form_wanted(options)
    from itertools import chain

    from seqfault.report.contributions import contributions_rows
    from seqfault.report.levels import levels_page, levels_rows, levels_tree
    from seqfault.studies.contributions import levels_and_contributions
    from seqfault.studies.levels import levels, silent

    networks: list[Network] = []
    states: list[Levels] = []
    fed: list[Contributions] = []
    if options.contributions:
        for network, (level, feeding) in over_states(options, levels_and_contributions):
            networks.append(network)
            states.append(level)
            fed.append(feeding)
    else:
        for network, level in over_states(options, levels):
            networks.append(network)
            states.append(level)

    def rows() -> Iterator[QuantityColumn]:
        also = (contributions_rows(n.model, each) for n, each in zip(networks, fed, strict=False))
        return chain(levels_rows(states), *also)

    answer = Answer(
        partial(levels_page, networks, states, fed),
        partial(levels_tree, networks, states, fed),
        rows,
        warnings_of(networks, [silent(network) for network in networks]),
    )
    return deliver(options, form, [answer])
