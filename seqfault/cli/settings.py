"""``seqfault settings CASE``: do the relays see, keep still and grade?"""

from __future__ import annotations

import argparse

from seqfault.cli.options import Commands, add_command, add_output

MOST = 51


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "settings",
        "earth-fault settings: seen, still, graded",
        "Whether the earth-fault relays of a case see what they must, keep still for the rest, and wait"
        " for one another, over all its states, places, kinds of earth fault and fault resistances, with"
        " resistors cold and hot; and what no relay sees. Exit code 1 unless all pass.",
    )
    parser.add_argument("case", metavar="CASE", help="case file, TOML or JSON; - reads standard input")
    parser.add_argument(
        "--points",
        metavar="N",
        type=_points,
        default=5,
        help=f"places along each line, 2 to {MOST} (default: 5)",
    )
    add_output(parser)
    parser.set_defaults(run=run)


def _points(text: str) -> int:
    try:
        count = int(text)
    except ValueError:
        count = 0
    if not 2 <= count <= MOST:
        raise argparse.ArgumentTypeError(f'"{text}": a whole number of places, 2 to {MOST}')
    return count


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from functools import partial

    from seqfault.case.reader import read_case
    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    case = read_case(options.case)
    from seqfault.report.settings import settings_page
    from seqfault.report.settings_data import settings_rows, settings_tree
    from seqfault.studies.settings import settings

    study, found = settings(case, options.points)
    answer = Answer(
        partial(settings_page, study, found),
        partial(settings_tree, study, found),
        partial(settings_rows, found),
        study.warnings,
    )
    deliver(options, form, [answer])
    return 0 if found.verdict == "pass" else 1
