"""``seqfault neutral CASE NAME``: a neutral as it stands, over its ohms, for a target, for a winding."""

from __future__ import annotations

import argparse
import math
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from seqfault.cli.options import Commands, add_case, add_command, add_output, read_networks
from seqfault.errors import QuantityError, RequestError

if TYPE_CHECKING:
    from seqfault.report.data import Quantity
    from seqfault.report.neutral import NeutralAnswer

POINTS = 12
MOST_POINTS = 1000


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "neutral",
        "a neutral as it stands, over its ohms, for a wanted current, for a winding",
        "What joins a star point to earth: its duty, the charging current beside it, how the system is"
        " earthed, what happens when it fails; earth faults over its ohms; the ohms that give a wanted"
        " current; how much of a generator's winding a pickup sees.",
    )
    add_case(parser)
    parser.add_argument("name", metavar="NAME", help="a record of the table neutrals")
    group = parser.add_argument_group("faults")
    group.add_argument("--at", metavar="PLACE", help="the faulted bus (default: the bus of the star point)")
    group.add_argument(
        "--temperature-coefficient",
        metavar="NUMBER",
        help="rise of the resistance a kelvin, as a share of its cold value, as in 0.001",
    )
    ohms = parser.add_argument_group("other ohms")
    ohms.add_argument("--ohms", metavar="FROM..TO", help="a row for each of these ohms, as in 2..200")
    ohms.add_argument("--points", metavar="N", help=f"rows between the two (default: {POINTS})")
    ohms.add_argument(
        "--device",
        choices=("resistor", "reactor"),
        help="what is tried in its place (default: a reactor where it is one)",
    )
    ohms.add_argument("--target", metavar="CURRENT", help='line-ground current wanted, as in "400 A"')
    ohms.add_argument(
        "--sound-phase-below",
        metavar="VOLTAGE",
        help='limit of the sound phases, of the phase voltage before the fault, as in "1.4 pu"',
    )
    ohms.add_argument(
        "--see",
        metavar="RELAY=TIMES",
        action="append",
        default=[],
        help="a relay that must see this many times its pickup, as in R1=2; may be given more than once",
    )
    winding = parser.add_argument_group("winding of a generator on this neutral")
    winding.add_argument("--winding", metavar="GENERATOR", help="how much of its winding a pickup sees")
    winding.add_argument("--pickup", metavar="CURRENT", help='primary, in the neutral, as in "175 A"')
    winding.add_argument("--cover", metavar="SHARE", help='the resistor that covers this, as in "90 %%"')
    add_output(parser)
    parser.add_argument(
        "--plot", metavar="FILE", help="draw current and sound-phase voltage over the ohms: .svg .png .pdf"
    )
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Answer the command: 1 where a limit leaves no room for the target."""
    from functools import partial

    from seqfault.cli.delivery import Answer, deliver, form_wanted, plot_wanted, warnings_of

    form = form_wanted(options)
    between = _range(options.ohms, options.points)
    current = _quantity(options.target, "--target", "current")
    limit = _quantity(options.sound_phase_below, "--sound-phase-below", "ratio")
    pickup = _quantity(options.pickup, "--pickup", "current")
    cover = _quantity(options.cover, "--cover", "ratio")
    _check_winding(options, cover)
    coefficient = _coefficient(options.temperature_coefficient)
    plot = plot_wanted(options)
    see = [_see(text) for text in options.see]
    networks = read_networks(options)
    from seqfault.studies.neutral_relays import relay_views

    views, more = relay_views(networks[0].case)
    from seqfault.report.neutral import NeutralAnswer, neutral_page
    from seqfault.studies.neutral import study_neutral
    from seqfault.studies.neutral_sweep import spaced, sweep
    from seqfault.studies.neutral_target import find_target
    from seqfault.studies.winding_cover import winding_cover

    report = study_neutral(
        networks, options.name, options.at, device=options.device, coefficient=coefficient, relays=views
    )
    neutral = report.neutral
    swept = target = found = None
    if between is not None:
        swept = sweep(neutral, spaced(*between, neutral.direction), report.duty.duration)
    if current is not None or limit is not None or see:
        target = find_target(neutral, current, limit, see)
    if pickup is not None:
        found = winding_cover(neutral, options.winding, pickup, cover)
    answer = NeutralAnswer(report, swept, target, found, more)

    def tree() -> dict[str, Any]:
        from seqfault.report.neutral_data import neutral_tree

        return neutral_tree(answer)

    def rows() -> Iterable[Quantity]:
        from seqfault.report.neutral_data import neutral_rows

        return neutral_rows(answer)

    if plot:
        _draw(options, answer, plot)
    warnings = warnings_of([s.state.network for s in report.standing])
    code = deliver(options, form, [Answer(partial(neutral_page, answer), tree, rows, warnings)])
    return code or (0 if target is None or target.met else 1)


def _quantity(text: str | None, option: str, dimension: str) -> float | None:
    """The positive value an option states, SI; None where it is not given."""
    if text is None:
        return None
    from seqfault.case.quantities import Dimensions, read_quantity

    try:
        value = float(read_quantity(text, Dimensions(dimension)).value.real)
    except QuantityError as error:
        raise RequestError(f"{option} {error}") from None
    if value <= 0:
        raise RequestError(f'{option} "{text}": more than zero is wanted')
    return value


def _see(text: str) -> tuple[str, float]:
    """A relay and how many times its pickup it must see."""
    name, mark, times = text.rpartition("=")
    try:
        wanted = float(times)
    except ValueError:
        wanted = math.nan
    if not (mark and name and 0 < wanted < math.inf):
        raise RequestError(f'--see "{text}": a relay and how many times its pickup, as in R1=2')
    return name, wanted


def _range(text: str | None, points: str | None) -> tuple[float, float, int] | None:
    """Ends and number of rows of a sweep."""
    if text is None:
        if points is not None:
            raise RequestError("--points: it goes with --ohms; add the ends, as in --ohms 2..200")
        return None
    low, dots, high = text.partition("..")
    ends = [_ohm(low), _ohm(high)] if dots else []
    if len(ends) != 2 or None in ends:
        raise RequestError(f'--ohms "{text}": two numbers of ohm with two dots between, as in 2..200')
    a, b = (end for end in ends if end is not None)
    if not 0 < a < b:
        raise RequestError(
            f'--ohms "{text}": the first is more than zero and less than the second; solid and open are'
            " rows of every sweep"
        )
    number = int(points) if points is not None and points.isdecimal() else 0 if points else POINTS
    if not 2 <= number <= MOST_POINTS:
        raise RequestError(f'--points "{points}": a whole number of rows is wanted, 2 to {MOST_POINTS}')
    return a, b, number


def _ohm(text: str) -> float | None:
    """One end of a range, with or without its unit."""
    from seqfault.case.quantities import Dimensions, read_quantity

    text = text.strip()
    bare = text[-1:].isdigit() or text.endswith(".")
    try:
        return float(read_quantity(f"{text} ohm" if bare else text, Dimensions("impedance")).value.real)
    except QuantityError:
        return None


def _check_winding(options: argparse.Namespace, cover: float | None) -> None:
    """Raises ``RequestError`` where options of the winding lack one another."""
    needs = (("winding", "pickup"), ("pickup", "winding"), ("cover", "winding"))
    for option, other in needs:
        if getattr(options, option) is not None and getattr(options, other) is None:
            example = "GENERATOR" if other == "winding" else '"175 A"'
            raise RequestError(f"--{option}: it goes with --{other}; add --{other} {example}")
    if cover is not None and not cover < 1:
        raise RequestError(
            f'--cover "{options.cover}": less than the whole winding is wanted, as in "90 %"'
        )


def _coefficient(text: str | None) -> float | None:
    if text is None:
        return None
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not 0 <= value <= 0.02:
        raise RequestError(
            f'--temperature-coefficient "{text}": a number a kelvin is wanted, 0 to 0.02, as in 0.001'
        )
    return value


def _draw(options: argparse.Namespace, answer: NeutralAnswer, form: str) -> None:
    """Write the chart, over the ohms asked for or a decade on either side of what stands."""
    from seqfault.cli.delivery import deliver_plot
    from seqfault.report.neutral_chart import neutral_chart
    from seqfault.studies.neutral_sweep import around, sweep

    report, target = answer.report, answer.target
    swept = answer.sweep
    if swept is None:
        ohms = around(report.neutral, target.ohms if target is not None else None)
        swept = sweep(report.neutral, ohms, report.duty.duration)
    deliver_plot(options, neutral_chart(report, swept, target, form))
