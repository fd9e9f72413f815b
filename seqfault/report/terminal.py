"""Pages on a stream: width, colour and encoding of where the text goes."""

from __future__ import annotations

import os
from typing import Literal, TextIO

from seqfault.report.layout import lay_out
from seqfault.report.prose import Line
from seqfault.report.spelling import Spelling
from seqfault.report.tables import Page

Color = Literal["auto", "always", "never"]

STYLES = {"title": "bold", "heading": "cyan", "mark": "bold", "quiet": "dim"}
UNKNOWN_WIDTH = 100
NARROWEST = 40


def width_of(stream: TextIO) -> int:
    """Columns of the terminal behind ``stream``: COLUMNS, the terminal itself, or 100."""
    stated = os.environ.get("COLUMNS", "")
    if stated.isdecimal() and int(stated):
        return max(NARROWEST, int(stated))
    try:
        return max(NARROWEST, os.get_terminal_size(stream.fileno()).columns or UNKNOWN_WIDTH)
    except (OSError, ValueError, AttributeError):
        return UNKNOWN_WIDTH


def wants_color(stream: TextIO, color: Color) -> bool:
    """Whether to colour; NO_COLOR (no-color.org) and TERM=dumb say no to ``auto``."""
    if color != "auto":
        return color == "always"
    if os.environ.get("NO_COLOR") or os.environ.get("TERM") == "dumb":
        return False
    return stream.isatty()


def show(page: Page, stream: TextIO, width: int | None = None, color: Color = "auto") -> None:
    """Print ``page``."""
    spell = Spelling(getattr(stream, "encoding", None) or "utf-8")
    lines = lay_out(page, width or width_of(stream), spell)
    if wants_color(stream, color):
        _colored(lines, stream)
    else:
        stream.write(as_text(lines))


def as_text(lines: list[Line]) -> str:
    """The lines without any style, blanks at their ends cut."""
    return "".join("".join(piece for piece, _ in line).rstrip() + "\n" for line in lines)


def page_text(page: Page, width: int | None = None) -> str:
    """``page`` as plain text in Unicode."""
    return as_text(lay_out(page, width or UNKNOWN_WIDTH, Spelling("utf-8")))


def _colored(lines: list[Line], stream: TextIO) -> None:
    from rich.console import Console
    from rich.text import Text

    console = Console(file=stream, force_terminal=True, color_system="standard", no_color=False)
    for line in lines:
        text = Text()
        for piece, style in line:
            text.append(piece, STYLES.get(style, ""))
        text.rstrip()
        console.print(text, soft_wrap=True)
