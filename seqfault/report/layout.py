"""A page to lines of styled pieces of a given width.

Columns are aligned at the decimal point. A table too wide is cut between groups into panels, a
label too long for its column takes lines of its own: nothing is shortened, nothing overruns.
"""

from __future__ import annotations

from collections.abc import Iterator

import msgspec
from rich.cells import cell_len

from seqfault.report.numbers import figures, fixed
from seqfault.report.prose import INDENT, Line, Piece, Spell, padded, prose, wrap
from seqfault.report.tables import (
    Block,
    Cell,
    Column,
    Group,
    Page,
    Row,
    Table,
)

LABEL = 14
"""Least width of a label column before a table is cut into panels."""
GAP, INNER = 2, 1
WORDY = 41
"""Texts wider than this are wrapped in their column."""


def lay_out(page: Page, width: int, spell: Spell) -> list[Line]:
    """The lines of ``page``; ``spell`` makes each text safe for where it goes."""
    lines: list[Line] = []
    tables = [part for part in page.parts if isinstance(part, Table)]
    drawn = {id(table): _block_texts_of(table, spell) for table in tables}
    for part in page.parts:
        if isinstance(part, Table):
            alike = [table for table in tables if table.groups == part.groups]
            frame = _frame([(t, drawn[id(t)]) for t in alike], width, spell)
            made = list(_table(part, drawn[id(part)], frame, width, spell))
        else:
            made = list(prose(part, width, spell))
        if made and lines:
            lines.append([])
        lines += made
    return lines


class Frame(msgspec.Struct, frozen=True):
    """Widths shared by tables with the same groups: columns and totals by group, and the labels."""

    columns: list[list[int]]
    totals: list[int]
    label: int
    width: int


Texts = list[list[list[str]]]
"""Texts of a block by row, group and column."""


def _frame(tables: list[tuple[Table, list[Texts]]], width: int, spell: Spell) -> Frame:
    groups = tables[0][0].groups
    columns = [_column_widths(tables, g, min(WORDY, width - LABEL - GAP)) for g in range(len(groups))]
    totals = [
        max(_sum(inner), max((cell_len(spell(h)) for h in group.heading), default=0)) + GAP
        for inner, group in zip(columns, groups, strict=True)
    ]
    rows = (row for table, _ in tables for block in table.blocks for row in block.rows)
    natural = INDENT + max((cell_len(spell(row.label)) for row in rows), default=0)
    return Frame(columns, totals, min(natural, max(LABEL, width - sum(totals))), width)


def _table(table: Table, texts: list[Texts], frame: Frame, width: int, spell: Spell) -> Iterator[Line]:
    for number, panel in enumerate(_panels(frame.totals, width - frame.label)):
        if number:
            yield []
        if table.heading and not number:
            yield from ([(text, "heading")] for text in wrap(spell(table.heading), width))
        yield from _headings(table.groups, panel, frame, spell)
        for block, text in zip(table.blocks, texts, strict=True):
            if block.heading:
                if block is not table.blocks[0]:
                    yield []
                yield from ([(line, "heading")] for line in wrap(spell(block.heading), width))
            for row, cells in zip(block.rows, text, strict=True):
                yield from _row(block, row, cells, panel, frame, spell)


def _panels(totals: list[int], room: int) -> list[list[int]]:
    panels: list[list[int]] = [[]]
    for g, total in enumerate(totals):
        if panels[-1] and sum(totals[k] for k in panels[-1]) + total > room:
            panels.append([])
        panels[-1].append(g)
    return panels


def _headings(groups: tuple[Group, ...], panel: list[int], frame: Frame, spell: Spell) -> Iterator[Line]:
    tall = max((len(groups[g].heading) for g in panel), default=0)
    for k in range(tall):
        line = " " * frame.label
        for g in panel:
            heading = groups[g].heading
            low = k - (tall - len(heading)) if groups[g].left else k
            text = spell(heading[low]) if 0 <= low < len(heading) else ""
            line += " " * GAP + padded(text, frame.totals[g] - GAP, groups[g].left)
        if line.strip():
            yield [(line.rstrip(), "heading")]


def _block_texts_of(table: Table, spell: Spell) -> list[Texts]:
    return [_block_texts(block, len(table.groups), spell) for block in table.blocks]


def _block_texts(block: Block, groups: int, spell: Spell) -> Texts:
    """Texts by row, group and column, numbers padded on the right to align their points."""
    texts = [
        [
            [
                _text(cell, block.columns[k], row.mark == g and k == 0, spell)
                for k, cell in enumerate(row.cells[g])
            ]
            for g in range(groups)
        ]
        for row in block.rows
    ]
    for g in range(groups):
        for k in range(len(block.columns)):
            numbers = [
                r
                for r, row in enumerate(block.rows)
                if k < len(row.cells[g]) and isinstance(row.cells[g][k], (int, float))
            ]
            tails = {r: len(texts[r][g][k].partition(".")[2]) for r in numbers}
            longest = max(tails.values(), default=0)
            for r, tail in tails.items():
                if longest and "." not in texts[r][g][k]:
                    texts[r][g][k] += " "
                texts[r][g][k] += " " * (longest - tail)
    return texts


def _text(cell: Cell, column: Column, mark: bool, spell: Spell) -> str:
    if cell is None:
        return ""
    if isinstance(cell, str):
        return (">" if mark else "") + spell(cell)
    if column.fixed:
        text = fixed(cell, column.decimals or 0)
    else:
        text = figures(cell, column.figures, column.decimals)
    return (">" if mark else "") + text


def _column_widths(tables: list[tuple[Table, list[Texts]]], g: int, wordy: int) -> list[int]:
    widths: list[int] = []
    spanning = 0
    blocks = [pair for table, texts in tables for pair in zip(table.blocks, texts, strict=True)]
    for block, rows in blocks:
        for number, row in enumerate(rows):
            alone = _alone(block, block.rows[number], g)
            for k, text in enumerate(row[g]):
                if block.columns[k].spans or alone:
                    spanning = max(spanning, cell_len(text))
                    continue
                widths += [0] * (k + 1 - len(widths))
                size = cell_len(text)
                widths[k] = max(widths[k], min(size, wordy) if block.columns[k].left else size)
    lacking = spanning - _sum(widths)
    if lacking > 0:
        widths = [widths[0] + lacking, *widths[1:]] if widths else [lacking]
    return widths


def _sum(widths: list[int]) -> int:
    return sum(widths) + INNER * max(0, len(widths) - 1)


def _row(
    block: Block, row: Row, cells: list[list[str]], panel: list[int], frame: Frame, spell: Spell
) -> Iterator[Line]:
    name, room = spell(row.label), frame.label - INDENT
    if cell_len(name) > room:
        lead = INDENT + len(name) - len(name.lstrip())  # a label of a tree keeps its place
        yield from ([(" " * lead + text, "")] for text in wrap(name.lstrip(), frame.width - lead))
        name = ""
    wrapped = {g: wrap(cells[g][0], frame.columns[g][0]) for g in panel if _is_text(block, cells[g])}
    for k in range(max((len(texts) for texts in wrapped.values()), default=1)):
        line: Line = [(" " * INDENT + padded("" if k else name, room, left=True), "")]
        for g in panel:
            own = wrapped[g][k : k + 1] if g in wrapped else [] if k else cells[g]
            line += _group(block, row, own, g, frame)
        yield line


def _alone(block: Block, row: Row, g: int) -> bool:
    """Whether a group holds one word in place of numbers, which takes the width of the whole group."""
    cells = row.cells[g]
    return len(cells) == 1 and isinstance(cells[0], str) and not block.columns[0].left


def _is_text(block: Block, cells: list[str]) -> bool:
    return block.columns[0].left and bool(cells)


def _group(block: Block, row: Row, cells: list[str], g: int, frame: Frame) -> Iterator[Piece]:
    size, columns = frame.totals[g] - GAP, frame.columns[g]
    if block.columns[0].spans or _alone(block, row, g):
        yield " " * GAP + padded(cells[0] if cells else "", size), ""
        return
    used = 0 if block.columns[0].left else size - _sum(columns)
    yield " " * (GAP + used), ""
    for k, text in enumerate(cells):
        piece = " " * INNER * bool(k) + padded(text, columns[k], block.columns[k].left)
        yield piece, "mark" if row.mark == g and k == 0 else ""
        used += INNER * bool(k) + columns[k]
    yield " " * (size - used), ""
