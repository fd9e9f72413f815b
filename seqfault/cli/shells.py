"""What a completion script has to know, read off the parser.

Each script knows the commands, their options and the choices of these; files ending in ``.toml`` or
``.json`` complete CASE, and ``seqfault inspect CASE --places`` is asked for PLACE.
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass

from seqfault.cli.options import KINDS

WORDS = {"kind": KINDS, "phases": ("a", "b", "c", "ab", "bc", "ca"), "scenario": ("base", "all")}


@dataclass(frozen=True)
class Option:
    """An option as shells complete it: ``value`` is none, words, file or text."""

    names: tuple[str, ...]
    help: str
    value: str
    words: tuple[str, ...] = ()


@dataclass(frozen=True)
class Command:
    """A command, its options and what its positional words are: case, place or choices."""

    name: str
    help: str
    options: tuple[Option, ...]
    words: tuple[tuple[str, ...] | str, ...]


def script(shell: str, parser: argparse.ArgumentParser) -> str:
    """The script for ``bash``, ``zsh`` or ``fish``."""
    from seqfault.cli import shell_scripts

    make = {"bash": shell_scripts.bash, "zsh": shell_scripts.zsh, "fish": shell_scripts.fish}
    return make[shell](commands_of(parser))


def commands_of(parser: argparse.ArgumentParser) -> tuple[Command, ...]:
    """All commands of ``parser``; argparse has no public way to ask it for them."""
    commands = next(a for a in parser._actions if isinstance(a, argparse._SubParsersAction))
    helps = {choice.dest: choice.help or "" for choice in commands._choices_actions}
    return tuple(_command(name, helps[name], own) for name, own in commands.choices.items())


def _command(name: str, text: str, parser: argparse.ArgumentParser) -> Command:
    options, words = [], []
    for action in parser._actions:
        if action.option_strings:
            options.append(_option(action))
        else:
            known = action.dest if action.dest in ("case", "place") else ()  # other names are typed
            words.append(tuple(action.choices) if action.choices else known)
    return Command(name, text, tuple(options), tuple(words))


def _option(action: argparse.Action) -> Option:
    text = (action.help or "").replace("%%", "%")
    names = tuple(action.option_strings)
    if action.nargs == 0:
        return Option(names, text, "none")
    words = tuple(action.choices) if action.choices else WORDS.get(action.dest, ())
    value = "words" if words else "file" if action.dest in ("output", "plot", "steps") else "text"
    return Option(names, text, value, words)
