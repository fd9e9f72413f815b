"""Running text of a page to lines: wrapping, titles, closing facts, lists of sentences."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from rich.cells import cell_len

from seqfault.report.tables import Facts, Sentences, Title

Piece = tuple[str, str]
"""Text and the name of its style: title, heading, mark, quiet or nothing."""
Line = list[Piece]
Spell = Callable[[str], str]

INDENT = 2
PROSE = 100
"""Sentences are not drawn wider than this."""


def prose(part: Title | Facts | Sentences, width: int, spell: Spell) -> Iterator[Line]:
    """The lines of a part that is no table."""
    match part:
        case Title():
            yield from _title(part, width, spell)
        case Facts():
            yield from _facts(part, width, spell)
        case Sentences():
            yield from _sentences(part, width, spell)


def wrap(text: str, width: int) -> list[str]:
    """Lines of at most ``width`` cells, broken at blanks, inside a word only where it must be."""
    width = max(width, 8)
    lines, line, used = [], "", 0
    for word in text.split(" "):
        size = cell_len(word)
        if line and used + 1 + size > width:
            lines.append(line)
            line, used = word, size
        else:
            line = f"{line} {word}" if lines or line else word
            used = cell_len(line)
        while used > width:
            cut = _fitting(line, width)
            lines.append(line[:cut])
            line = line[cut:]
            used = cell_len(line)
    return [*lines, line]


def _fitting(text: str, width: int) -> int:
    used = 0
    for k, char in enumerate(text):
        used += cell_len(char)
        if used > width:
            return max(k, 1)
    return len(text)


def padded(text: str, width: int, left: bool = False) -> str:
    """``text`` filled with blanks to ``width`` cells."""
    blank = " " * max(0, width - cell_len(text))
    return text + blank if left else blank + text


def _title(title: Title, width: int, spell: Spell) -> Iterator[Line]:
    if title.over:
        for text in wrap(spell(title.over), width):
            yield [(text, "quiet")]
    name, conditions = spell(title.name), spell(title.conditions)
    if cell_len(name) + 4 + cell_len(conditions) <= width:
        yield [(name, "title"), ("    " + conditions, "")]
        return
    for text in wrap(name, width):
        yield [(text, "title")]
    for text in wrap(conditions, min(width, PROSE) - INDENT):
        yield [(" " * INDENT + text, "")]


def _facts(facts: Facts, width: int, spell: Spell) -> Iterator[Line]:
    rows = [(spell(f.label), spell(f.figure), spell(f.text)) for f in facts.rows]
    label = max((cell_len(row[0]) for row in rows), default=0)
    figure = max((cell_len(row[1]) for row in rows), default=0)
    for name, value, text in rows:
        start = f"{padded(name, label, left=True)}  "
        lines = wrap(text, width - label - figure - 5)
        end = "   " + lines[0] if text else ""
        yield [(start, ""), (padded(value, figure), "mark"), (end, "")]
        for more in lines[1:]:
            yield [(" " * (label + figure + 5) + more, "")]


def _sentences(part: Sentences, width: int, spell: Spell) -> Iterator[Line]:
    style = "quiet" if part.quiet else ""
    if not part.items:
        return
    if part.heading:
        yield [(spell(part.heading), "heading")]
    indent = " " * INDENT if part.heading else ""
    for item in part.items:
        first, *rest = wrap(spell(item), min(width, PROSE) - 2 * len(indent))
        yield [(indent + first, style)]
        for text in rest:
            yield [(2 * indent + text, style)]
