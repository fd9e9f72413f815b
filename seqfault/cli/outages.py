"""``seqfault levels CASE --outages``: every outage of a list, one after the other."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from seqfault.cli.options import read_states, with_prefault
from seqfault.cli.progress import bar
from seqfault.errors import RequestError, quoted

if TYPE_CHECKING:
    from seqfault.case.records import Case
    from seqfault.studies.outages import Outage

TABLES = ("lines", "transformers")


def add_outages(parser: argparse.ArgumentParser) -> None:
    """--outages and --at."""
    group = parser.add_argument_group("outages")
    group.add_argument(
        "--outages",
        metavar="WHICH",
        help="least and greatest with elements out, one outage after the other: lines, transformers, or a"
        " file with one outage a line, names separated by commas",
    )
    group.add_argument(
        "--at", metavar="BUS", nargs="+", action="extend", help="with --outages: these buses only"
    )


def run_outages(options: argparse.Namespace) -> int:
    """Answer ``levels --outages``."""
    from functools import partial

    from seqfault.case.scenarios import in_state
    from seqfault.cli.delivery import Answer, deliver, form_wanted

    form = form_wanted(options)
    if options.scenario == "all":
        raise RequestError("--outages: one state at a time; name it with --scenario")
    if options.workers > 1 or options.scheduler is not None:
        raise RequestError("--outages works from one factorisation; leave --workers and --scheduler off")
    listed = None if options.outages in TABLES else read_outages(options.outages)
    case = read_states(options)[0]
    from seqfault.faults.network import Network
    from seqfault.report.outages import outages_page, outages_rows, outages_tree
    from seqfault.studies.levels import silent
    from seqfault.studies.outages import single_outages, survey_outages

    network = Network(case, machine=options.machine)

    def rebuilt(outage: Outage) -> Case:
        gone = (*options.without, *outage)
        changed = in_state(case, options.scenario, gone, options.open, options.close)
        return with_prefault(changed, options.prefault, options.loaded)

    outages = single_outages(network, options.outages) if listed is None else listed
    if not outages:
        raise RequestError(f"--outages {options.outages}: there are none in service")
    with bar("outages", len(outages)) as done:
        survey = survey_outages(network, outages, options.at, rebuilt, done)
    answer = Answer(
        partial(outages_page, network, survey),
        partial(outages_tree, network, survey),
        partial(outages_rows, survey),
        (*network.model.warnings, *survey.warnings, *silent(network)),
    )
    return deliver(options, form, [answer])


def read_outages(path: str) -> tuple[Outage, ...]:
    """Outages of a file: one a line, names separated by commas; ``#`` begins a remark.

    Raises ``RequestError`` for a file that cannot be read or holds none.
    """
    import csv
    from pathlib import Path

    try:
        text = Path(path).read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise RequestError(f"--outages {quoted(path)}: the file is no UTF-8 text") from None
    except (OSError, ValueError) as error:
        why = getattr(error, "strerror", None) or str(error)
        raise RequestError(
            f"--outages {quoted(path)}: {why}; lines, transformers, or a file with one outage a line"
        ) from None
    lines = [line for line in text.splitlines() if line.strip() and not line.lstrip().startswith("#")]
    out = [tuple(name.strip() for name in row) for row in csv.reader(lines, skipinitialspace=True)]
    empty = [k for k, names in enumerate(out) if not all(names)]
    if empty:
        raise RequestError(f"--outages {quoted(path)}: {quoted(lines[empty[0]])}: a name is missing")
    if not out:
        raise RequestError(f"--outages {quoted(path)}: no outage in it; one a line, as in T1 or T1, T2")
    return tuple(dict.fromkeys(out))
