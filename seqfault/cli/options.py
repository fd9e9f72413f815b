"""Options that commands share, and the case in the states they ask for."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from seqfault.errors import QuantityError, RequestError

if TYPE_CHECKING:
    from seqfault.case.records import Case
    from seqfault.faults.network import Network

MACHINES = ("subtransient", "transient", "synchronous")
KINDS = (
    "three-phase",
    "three-phase-ground",
    "line-line",
    "line-line-ground",
    "line-ground",
    "open-one",
    "open-two",
    "open-three",
)
FORMATS = ("table", "json", "csv")
COLORS = ("auto", "always", "never")

Commands = Any  # argparse keeps the type of what add_subparsers returns to itself


def add_command(commands: Commands, name: str, what: str, text: str) -> argparse.ArgumentParser:
    """A command with its description."""
    parser: argparse.ArgumentParser = commands.add_parser(
        name, help=what, description=text, allow_abbrev=False
    )
    parser.set_defaults(parser=parser)
    return parser


def add_case(parser: argparse.ArgumentParser) -> None:
    """CASE and the options that pick its state."""
    parser.add_argument("case", metavar="CASE", help="case file, TOML or JSON; - reads standard input")
    state = parser.add_argument_group("state")
    state.add_argument(
        "--scenario",
        metavar="NAME",
        default="base",
        help="a scenario of the case, or all of them: all",
    )
    state.add_argument(
        "--without",
        metavar="NAME",
        action="append",
        default=[],
        help="take a record out of service",
    )
    state.add_argument(
        "--open", metavar="LINE@BUS", action="append", default=[], help="switch a line end off"
    )
    state.add_argument(
        "--close", metavar="LINE@BUS", action="append", default=[], help="switch a line end on"
    )
    state.add_argument(
        "--loaded",
        action="store_true",
        help="let loads, infeeds and generators make the state before the fault",
    )
    state.add_argument(
        "--prefault",
        metavar="VOLTAGE",
        help='voltage before the fault, as in "1.05 pu" or "105 %%"; loaded: held where none is stated',
    )
    state.add_argument(
        "--machine",
        choices=MACHINES,
        default="subtransient",
        help="reactance of synchronous machines (default: subtransient)",
    )


def add_impedances(parser: argparse.ArgumentParser, action: type[argparse.Action] | str = "store") -> None:
    """--zf and --zg."""
    group = parser.add_argument_group("fault impedance, bolted unless stated")
    group.add_argument(
        "--zf",
        metavar="OHM",
        action=action,
        help="of the fault itself: phase to earth (line-ground), between the phases (line-line), in"
        ' each faulted phase (the others), as in "0.5 ohm" or --zf=-j0.1ohm',
    )
    group.add_argument(
        "--zg", metavar="OHM", action=action, help="from the common point of the fault to earth"
    )


def add_output(parser: argparse.ArgumentParser) -> None:
    """Form, file and look of the answer."""
    group = parser.add_argument_group("answer")
    group.add_argument(
        "--format", choices=FORMATS, help="default: what the suffix of --output says, or table"
    )
    group.add_argument("--output", metavar="FILE", help="write the answer to a file: .json .csv .txt")
    group.add_argument("--overwrite", action="store_true", help="let --output replace a file")
    group.add_argument("--width", metavar="COLUMNS", type=_width, help="40 and more")
    group.add_argument(
        "--color", choices=COLORS, default="auto", help="auto heeds NO_COLOR and the terminal"
    )
    group.add_argument("--debug", action="store_true", help="show the traceback of an internal error")


def add_curves(parser: argparse.ArgumentParser) -> None:
    """--plot and --plot-at, of time-current curves."""
    group = parser.add_argument_group("chart")
    group.add_argument(
        "--plot", metavar="FILE", help="draw the time-current curves of the relays: .svg .png .pdf"
    )
    group.add_argument(
        "--plot-at",
        metavar="VOLTAGE",
        help='with --plot: the voltage whose amperes are drawn, as in "11 kV"',
    )


def _width(text: str) -> int:
    try:
        width = int(text)
    except ValueError:
        width = 0
    if not 40 <= width <= 1000:
        raise argparse.ArgumentTypeError(f'"{text}": a whole number of columns, 40 to 1000')
    return width


def read_ohms(text: str | None, option: str) -> complex:
    """The impedance an option states, ohm; 0 where it is not given."""
    if text is None:
        return 0j
    from seqfault.case.quantities import Dimensions, read_quantity

    try:
        return complex(read_quantity(text, Dimensions("impedance", complex=True)).value)
    except QuantityError as error:
        raise RequestError(f"{option} {error}") from None


def read_states(options: argparse.Namespace) -> list[Case]:
    """The case in each of the states asked for, in the order of the file."""
    from seqfault.case.reader import read_case
    from seqfault.case.scenarios import in_state

    case = read_case(options.case)
    names = ["base", *case.scenarios] if options.scenario == "all" else [options.scenario]
    changes = (options.without, options.open, options.close)
    return [
        with_prefault(
            case if name == "base" and not any(changes) else in_state(case, name, *changes),
            options.prefault,
            options.loaded,
        )
        for name in names
    ]


def with_prefault(case: Case, text: str | None, loaded: bool) -> Case:
    """``case`` as --prefault and --loaded want it. Raises ``RequestError``."""
    import msgspec

    if loaded:
        prefault = msgspec.structs.replace(case.prefault, state="loaded")
        case = msgspec.structs.replace(case, prefault=prefault)
    if text is None:
        return case

    from seqfault.case.quantities import Dimensions, read_quantity

    try:
        voltage = read_quantity(text, Dimensions("ratio"))
    except QuantityError as error:
        raise RequestError(f"--prefault {error}") from None
    if not 0 < voltage.value.real <= 2:
        raise RequestError(f"--prefault {text}: more than 0 and at most 2 pu of nominal is wanted")
    prefault = msgspec.structs.replace(case.prefault, voltage=voltage)
    return msgspec.structs.replace(case, prefault=prefault)


def read_networks(options: argparse.Namespace) -> list[Network]:
    """The network of each state asked for."""
    from seqfault.faults.network import Network

    return [Network(case, machine=options.machine) for case in read_states(options)]
