"""``seqfault along CASE LINE``: faults along a line."""

from __future__ import annotations

import argparse
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from seqfault.cli.options import (
    Commands,
    add_case,
    add_command,
    add_impedances,
    add_output,
    read_networks,
    read_ohms,
)
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from seqfault.faults.network import Network
    from seqfault.report.data import Quantity
    from seqfault.report.tables import Page

MOST = 201


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "along",
        "faults along a line, from end to end",
        "Faults at points along a line, from end to end: for each kind the current, the residual current"
        " and the phase current that both ends see, and the voltages left.",
    )
    add_case(parser)
    parser.add_argument("line", metavar="LINE", help="a line of the case")
    scan = parser.add_argument_group("scan")
    scan.add_argument(
        "--kind",
        metavar="KIND",
        action="append",
        help="a kind of fault; may be given more than once (default: those that compare shows)",
    )
    scan.add_argument("--points", metavar="N", type=_points, default=11, help="2 to 201 (default: 11)")
    scan.add_argument(
        "--far-end-open",
        nargs="?",
        const="",
        metavar="BUS",
        help="with the line's breaker open at its to end, or at BUS",
    )
    add_impedances(parser)
    add_output(parser)
    parser.add_argument("--plot", metavar="FILE", help="draw currents over the line: .svg .png .pdf")
    parser.set_defaults(run=run)


def _points(text: str) -> int:
    try:
        count = int(text)
    except ValueError:
        count = 0
    if not 2 <= count <= MOST:
        raise argparse.ArgumentTypeError(f'"{text}": a whole number of points, 2 to {MOST}')
    return count


def run(options: argparse.Namespace) -> int:
    """Answer the command."""
    from seqfault.cli.delivery import Answer, deliver, deliver_plot, form_wanted, plot_wanted
    from seqfault.studies.along import along
    from seqfault.studies.compare import ORDER

    form, drawn = form_wanted(options), plot_wanted(options)
    zf, zg = read_ohms(options.zf, "--zf"), read_ohms(options.zg, "--zg")
    networks = read_networks(options)
    if drawn and len(networks) > 1:
        raise RequestError("--plot: one state at a time; name it with --scenario")

    def answer(network: Network) -> Answer:
        opened = options.far_end_open
        if opened == "" and options.line in network.case.lines:
            opened = network.case.lines[options.line].to
        scanned = along(
            network,
            options.line,
            options.kind or ORDER,
            points=options.points,
            opened=opened or "",
            zf=zf,
            zg=zg,
        )

        def page() -> Page:
            from seqfault.report.along import along_page

            return along_page(network, scanned)

        def tree() -> dict[str, Any]:
            from seqfault.report.along import along_tree

            return along_tree(network, scanned)

        def rows() -> Iterable[Quantity]:
            from seqfault.report.along import along_rows

            return along_rows(scanned)

        if drawn:
            from seqfault.report.along_chart import along_chart

            deliver_plot(options, along_chart(network.model.title, scanned, drawn))
        return Answer(page, tree, rows, network.model.warnings, network.model.state)

    return deliver(options, form, [answer(network) for network in networks])
