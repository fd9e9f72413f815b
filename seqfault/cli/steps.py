"""``seqfault fault CASE --steps FILE``: a fault that evolves."""

from __future__ import annotations

import argparse
from functools import partial

from seqfault.cli.options import read_networks
from seqfault.errors import RequestError


def run_steps(options: argparse.Namespace) -> int:
    """Answer the command for a file of steps. Raises ``RequestError`` where a place is given beside it."""
    if options.place is not None or options.also or options.fallen or options.phases:
        raise RequestError(
            "--steps: the file names places and kinds; leave out PLACE and what goes with it"
        )
    from seqfault.case.steps import read_steps
    from seqfault.cli.delivery import Answer, deliver, form_wanted
    from seqfault.report.steps import steps_page, steps_rows, steps_tree
    from seqfault.studies.steps import evolve

    form = form_wanted(options)
    steps = read_steps(options.steps)
    answers = []
    for network in read_networks(options):
        evolution = evolve(network, steps)
        answers.append(
            Answer(
                partial(steps_page, network, evolution),
                partial(steps_tree, network, evolution),
                partial(steps_rows, evolution),
                network.model.warnings,
                network.model.state,
            )
        )
    return deliver(options, form, answers)
