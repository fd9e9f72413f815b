"""``seqfault settings CASE``: do the relays see, keep still and grade?"""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from seqfault.cli.options import Commands, add_command, add_curves, add_output
from seqfault.cli.progress import bar
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from seqfault.case.records import Case

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
    what = parser.add_argument_group("instead of the study")
    what.add_argument(
        "--sheet", action="store_true", help="the setting sheet: what is set, and when it acts"
    )
    what.add_argument(
        "--propose",
        action="store_true",
        help="pickups and times that meet every demand with the least sum of operate times, or what"
        " contradicts what; exit code 1 unless every demand is met",
    )
    what.add_argument(
        "--keep",
        metavar="RELAY",
        action="append",
        default=[],
        help="with --propose: leave this relay as it stands; may be given more than once",
    )
    what.add_argument(
        "--write",
        metavar="FILE",
        help="with --propose: save the case with the proposed settings, its comments kept",
    )
    add_output(parser)
    add_curves(parser)
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
    from seqfault.cli.curves import check_curves, draw_settings
    from seqfault.cli.delivery import Answer, deliver, form_wanted

    _check(options)
    form, plot = form_wanted(options), check_curves(options)
    case = read_case(options.case)
    if options.propose:
        return _propose(options, form, case, plot)
    if options.sheet:
        from seqfault.report.settings_sheet import sheet_page, sheet_rows, sheet_tree
        from seqfault.studies.settings_sheet import setting_sheet
        from seqfault.studies.settings_states import study_states

        with bar("states", 1 + len(case.scenarios)) as done:
            study = study_states(case, options.points, done)
        draw_settings(options, plot, study)
        sheet = Answer(
            partial(sheet_page, study),
            partial(sheet_tree, study),
            lambda: sheet_rows(setting_sheet(study)),
            study.warnings,
        )
        return deliver(options, form, [sheet])
    from seqfault.report.settings import settings_page
    from seqfault.report.settings_data import settings_rows, settings_tree
    from seqfault.studies.settings import study_settings

    with bar("states", 1 + len(case.scenarios)) as done:
        study, found = study_settings(case, options.points, done)
    draw_settings(options, plot, study)
    answer = Answer(
        partial(settings_page, study, found),
        partial(settings_tree, study, found),
        partial(settings_rows, found),
        study.warnings,
    )
    deliver(options, form, [answer])
    return 0 if found.verdict == "pass" else 1


def _check(options: argparse.Namespace) -> None:
    """Raise ``RequestError`` for options that do not go together, before any work."""
    if options.propose and options.sheet:
        raise RequestError("--sheet: --propose shows the sheet of what it proposes; leave one of them out")
    if not options.propose and (options.keep or options.write is not None):
        raise RequestError("--keep, --write: they go with --propose")
    if options.write is None:
        return
    from seqfault.report.files import check_target

    if options.case == "-":
        raise RequestError("--write: a case from standard input cannot be edited; name its file")
    check_target(options.write, options.overwrite, options.case, "--write")


def _propose(options: argparse.Namespace, form: str, case: Case, plot: str) -> int:
    from functools import partial

    from seqfault.cli.curves import draw_settings
    from seqfault.cli.delivery import Answer, deliver
    from seqfault.cli.run import say
    from seqfault.report.settings_proposal import proposal_page, proposal_rows, proposal_tree
    from seqfault.studies.settings_proposal import changes_of, propose_settings
    from seqfault.studies.settings_states import study_states

    with bar("states", 1 + len(case.scenarios)) as done:
        study = study_states(case, options.points, done)
    proposal = propose_settings(study, options.keep)
    draw_settings(options, plot, proposal.study or study)
    content = None
    if options.write is not None and proposal.study is not None and not proposal.contradictions:
        from seqfault.case.rewriting import rewritten
        from seqfault.case.text import read_bytes

        content = rewritten(read_bytes(options.case), options.case, changes_of(study, proposal))
    answer = Answer(
        partial(proposal_page, study, proposal),
        partial(proposal_tree, study, proposal),
        partial(proposal_rows, proposal),
        study.warnings,
    )
    deliver(options, form, [answer])
    if content is not None:
        from seqfault.report.files import write_whole

        write_whole(options.write, content, options.overwrite, "--write")
        say(f"wrote {options.write}")
    elif options.write is not None:
        say(f"nothing written to {options.write}: no settings meet every condition")
    return 0 if proposal.met else 1
