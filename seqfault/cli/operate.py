"""``seqfault operate CASE PLACE``: what every relay does about a fault, and a replay of it."""

from __future__ import annotations

import argparse
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from seqfault.cli.batches import add_workers, over_states
from seqfault.cli.fault import OWN, add_fault, read_fault
from seqfault.cli.options import Commands, add_case, add_command, add_curves, add_output
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from seqfault.cli.delivery import Answer
    from seqfault.faults.network import Network
    from seqfault.report.data import Quantity
    from seqfault.report.tables import Page
    from seqfault.studies.operate import Operation
    from seqfault.studies.replay import Replay


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "operate",
        "which relays act on a fault, in what order, and when",
        "What every relay of a case does about one fault: what it sees, how many times its pickup that is,"
        " when it acts, and why it does not. --replay opens breaker after breaker until the fault is"
        " cleared, or no relay is left to do so: exit code 1.",
    )
    add_case(parser)
    parser.add_argument(
        "place",
        metavar="PLACE",
        help="a bus (inspect CASE --places lists them), ELEMENT@BUS, LINE@37%% or LINE@4.2km",
    )
    add_fault(parser)
    group = parser.add_argument_group("relays and breakers")
    group.add_argument(
        "--replay",
        action="store_true",
        help="solve again after each breaker that opens, until the fault is cleared",
    )
    group.add_argument(
        "--trips",
        metavar="RELAY=ELEMENT@BUS",
        action="append",
        default=[],
        help="the breaker a relay trips (default: the one where it stands, of a star point those of its"
        " windings); may be given more than once, also for one relay",
    )
    group.add_argument(
        "--stuck",
        metavar="ELEMENT@BUS",
        action="append",
        default=[],
        help="with --replay: this breaker does not open; may be given more than once",
    )
    add_workers(parser)
    add_output(parser)
    add_curves(parser)
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command: 1 where a replay ends with the fault still fed."""
    from seqfault.cli.curves import check_curves
    from seqfault.cli.delivery import deliver, form_wanted

    if options.stuck and not options.replay:
        raise RequestError("--stuck: it goes with --replay; add it")
    form, plot = form_wanted(options), check_curves(options)
    first = {name: getattr(options, name) for name in ("place", *OWN)}
    faults = [read_fault(own) for own in (first, *(options.also or []))]
    stated = [_trip(text) for text in options.trips]
    if not options.replay:
        from seqfault.studies.operate import operate

        found = over_states(options, operate, faults, stated, place=options.place)
        _draw(options, *found[0], plot)
        deliver(options, form, [_operation(*each) for each in found])
        return 0
    from seqfault.studies.replay import replay

    played = over_states(options, replay, faults, stated, options.stuck, place=options.place)
    _draw(options, played[0][0], played[0][1].first, plot)
    deliver(options, form, [_replay(*each) for each in played])
    return 0 if all(each.cleared is not None for _, each in played) else 1


def _trip(text: str) -> tuple[str, str]:
    """A relay and a breaker it trips."""
    relay, mark, breaker = text.rpartition("=")
    if not (mark and relay and breaker):
        raise RequestError(f'--trips "{text}": a relay and its breaker are wanted, as in R1=T1@main')
    return relay, breaker


def _draw(options: argparse.Namespace, network: Network, found: Operation, plot: str) -> None:
    """Write the chart of the fault as it stands at first, where one is asked for."""
    if not plot:
        return
    from seqfault.cli.curves import write_curves
    from seqfault.report.fault import fault_title
    from seqfault.studies.breakers import unfolded
    from seqfault.studies.curve_zone import curves_of_fault, voltage_of

    s = found.solution
    case = unfolded(network.case, [b for own in found.trips.of.values() for b in own])
    balanced = all(len(state.fault.phases) == 3 and not state.fault.kind.series for state in s.faults)
    at = voltage_of(case, options.plot_at)
    curves = curves_of_fault(case, found.readings, s.nominal, balanced, at)
    title = fault_title(network, s)
    write_curves(options, plot, curves, title.over, f"{title.name}  {title.conditions}")


def _operation(network: Network, found: Operation) -> Answer:
    from seqfault.cli.delivery import Answer

    def page() -> Page:
        from seqfault.report.operate import operate_page

        return operate_page(network, found)

    def tree() -> dict[str, Any]:
        from seqfault.report.operate_data import operate_tree

        return operate_tree(network, found)

    def rows() -> Iterable[Quantity]:
        from seqfault.report.operate_data import operate_rows

        return operate_rows(found)

    warnings = (*network.model.warnings, *found.protection.warnings)
    return Answer(page, tree, rows, warnings, network.model.state)


def _replay(network: Network, found: Replay) -> Answer:
    from seqfault.cli.delivery import Answer

    def page() -> Page:
        from seqfault.report.replay import replay_page

        return replay_page(network, found)

    def tree() -> dict[str, Any]:
        from seqfault.report.operate_data import replay_tree

        return replay_tree(network, found)

    def rows() -> Iterable[Quantity]:
        from seqfault.report.operate_data import replay_rows

        return replay_rows(found)

    warnings = (*network.model.warnings, *found.first.protection.warnings)
    return Answer(page, tree, rows, warnings, network.model.state)
