"""``seqfault completion SHELL``: a script for the shell."""

from __future__ import annotations

import argparse

from seqfault.cli.options import Commands, add_command

SHELLS = ("bash", "zsh", "fish")


def add(commands: Commands) -> None:
    """Add the command to the parser."""
    parser = add_command(
        commands,
        "completion",
        "a completion script for bash, zsh or fish",
        "Print a script that completes commands, options, case files and places. bash:"
        ' eval "$(seqfault completion bash)"; zsh: the same, after compinit; fish: seqfault'
        " completion fish | source.",
    )
    parser.add_argument("shell", choices=SHELLS, metavar="SHELL", help="bash, zsh or fish")
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> int:
    """Print the script."""
    from seqfault.cli.parser import build_parser
    from seqfault.cli.shells import script

    print(script(options.shell, build_parser()), end="")
    return 0
