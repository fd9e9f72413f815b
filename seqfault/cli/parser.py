"""The commands and their options, without importing what they run."""

from __future__ import annotations

import argparse
import sys
from importlib import import_module
from typing import NoReturn

from seqfault import __version__

COMMANDS = (
    "inspect",
    "fault",
    "compare",
    "levels",
    "along",
    "neutral",
    "settings",
    "operate",
    "completion",
)
EPILOG = """\
examples:
  seqfault inspect plant.toml
  seqfault compare plant.toml main
  seqfault fault plant.toml main --kind line-ground --zf "0.5 ohm"
  seqfault fault plant.toml F1@37% --kind open-one --fallen load --loaded
  seqfault along plant.toml F1 --far-end-open
  seqfault levels plant.toml --scenario all --output levels.csv
  seqfault neutral plant.toml NER --target "300 A"
  seqfault operate plant.toml F1@37% --replay

exit codes: 0 done, 1 done and a condition is not met, 2 command or case wrong, 3 no answer exists,
70 internal error, 130 interrupted
"""


class Parser(argparse.ArgumentParser):
    """A parser that takes no abbreviations and complains in one line."""

    def error(self, message: str) -> NoReturn:
        """Say what is wrong on standard error and leave with exit code 2."""
        message = message.removeprefix("argument ")
        if message.endswith("expected one argument"):
            option = message.partition(":")[0]
            message = f"{option}: a value is missing; where it begins with - write {option}=-…"
        from seqfault.report.spelling import Spelling

        spell = Spelling(getattr(sys.stderr, "encoding", None))
        self.exit(2, f"seqfault: {spell(message)}; {self.prog} --help explains\n")


def build_parser(only: str | None = None) -> Parser:
    """The parser of all commands, or of ``only`` one: each costs a module and its options."""
    parser = Parser(
        prog="seqfault",
        description="Unbalanced faults in power networks: what flows, what voltage is left, and how"
        " earth current gets home.",
        epilog=EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"seqfault {__version__}")
    commands = parser.add_subparsers(
        dest="command", metavar="COMMAND", title="commands", required=True, parser_class=Parser
    )
    for name in COMMANDS:
        if only in (None, name):
            import_module(f"seqfault.cli.{name}").add(commands)
    return parser


def read_arguments(arguments: list[str]) -> argparse.Namespace:
    """The options that ``arguments`` state; ``run`` among them is the command's function."""
    first = arguments[0] if arguments else ""
    parser = build_parser(first if first in COMMANDS else None)
    if not arguments:
        parser.error(f"a command is wanted: {', '.join(COMMANDS)}")
    if not first.startswith("-") and first not in COMMANDS:
        parser.error(f'there is no command "{first}"{nearest(first, COMMANDS)}')
    options, extra = parser.parse_known_args(arguments)
    if extra:
        own: Parser = options.parser
        known = [name for action in own._actions for name in action.option_strings]
        if extra[0].startswith("-") and extra[0] != "-":
            name = extra[0].partition("=")[0]
            own.error(f"there is no option {name}{nearest(name, known)}")
        own.error(f'"{extra[0]}" is one word too many; a name with blanks needs quotes')
    return options


def nearest(word: str, known: tuple[str, ...] | list[str]) -> str:
    """``; did you mean X?``, or nothing."""
    import difflib

    near = difflib.get_close_matches(word, known, n=1)
    return f"; did you mean {near[0]}?" if near else ""
