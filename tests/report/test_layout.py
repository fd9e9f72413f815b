from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from seqfault.report.layout import lay_out
from seqfault.report.prose import wrap
from seqfault.report.spelling import Spelling, printable
from seqfault.report.tables import (
    AMPERE,
    SHARE,
    TEXT,
    WORDS,
    Block,
    Fact,
    Facts,
    Group,
    Page,
    Row,
    Sentences,
    Table,
    Title,
    greatest,
)
from seqfault.report.terminal import as_text, page_text

UTF8 = Spelling("utf-8")


def lines(page: Page, width: int = 80) -> list[str]:
    return as_text(lay_out(page, width, UTF8)).splitlines()


def test_numbers_align_at_the_point() -> None:
    rows = tuple(Row(str(k), ((v, None),)) for k, v in enumerate((395.0, 5.8, 0.0, 12345.0)))
    out = lines(Page((Table((Group(("x",)),), (Block("", (AMPERE, SHARE), rows),)),)))
    points = {line.find(".") for line in out if "." in line}
    assert len(points) == 1
    last = {len(line) for line in out[1:] if "." not in line}
    assert last == points


def test_marks_stand_before_the_greatest() -> None:
    row = Row("r", ((1.0,), (3.0,), (2.0,)), greatest([1.0, 3.0, 2.0]))
    out = lines(Page((Table(tuple(Group((c,)) for c in "abc"), (Block("", (AMPERE,), (row,)),)),)))
    assert out[-1].split() == ["r", "1.00", ">3.00", "2.00"]


@pytest.mark.parametrize("values", [[2.0, 2.0], [0.0, 0.0], [None, 1.0], [float("nan"), 1.0]])
def test_nothing_is_marked_where_nothing_stands_out(values: list[float | None]) -> None:
    assert greatest(values) is None


def test_tables_of_the_same_groups_have_the_same_columns() -> None:
    groups = (Group(("a",)), Group(("b",)))
    short = Table(groups, (Block("", (AMPERE,), (Row("x", ((1.0,), (2.0,))),)),))
    long = Table(groups, (Block("", (AMPERE,), (Row("y", ((123456.0,), (2.0,))),)),))
    out = lines(Page((short, long)))
    heads = [line for line in out if line.split() == ["a", "b"]]
    assert len(heads) == 2
    assert heads[0] == heads[1]


@given(
    st.lists(st.text(min_size=1, max_size=60), min_size=1, max_size=3),
    st.integers(40, 120),
)
def test_no_text_breaks_the_width_or_is_lost(texts: list[str], width: int) -> None:
    name = texts[0]
    groups = (Group(("k",)), Group(("words",), left=True))
    number = tuple(Row(t, ((12345.678,), (None,))) for t in texts)
    page = Page(
        (
            Title(name, name, name),
            Table(groups, (Block(name, (AMPERE,), number),)),
            Table(
                (Group(("t",), left=True),),
                (Block("", (TEXT,), tuple(Row("r", ((t,),)) for t in texts)),),
            ),
            Facts((Fact("label", "1 A", name),)),
            Sentences("heading", tuple(texts)),
        )
    )
    out = lay_out(page, width, UTF8)
    for line in out:
        assert cell_len("".join(piece for piece, _ in line).rstrip()) <= width
    whole = "".join("".join(piece for piece, _ in line) for line in out).replace(" ", "")
    for text in texts:
        assert printable(text).replace(" ", "") in whole


@given(st.text(max_size=200), st.integers(8, 40))
def test_wrap_keeps_every_character(text: str, width: int) -> None:
    safe = printable(text)
    wrapped = wrap(safe, width)
    assert all(cell_len(line) <= width for line in wrapped)
    assert "".join(wrapped).replace(" ", "") == safe.replace(" ", "")


def test_spanning_words_take_the_width_of_their_group() -> None:
    page = Page(
        (
            Table(
                (Group(("kind",)),),
                (
                    Block("", (WORDS,), (Row("symbol", (("a rather long text",),)),)),
                    Block("", (AMPERE, SHARE), (Row("x", ((1.0, 0.5),)),)),
                ),
            ),
        )
    )
    out = lines(page)
    assert len({len(line) for line in out}) == 1


@pytest.mark.parametrize(
    ("encoding", "text", "spelt"),
    [
        ("ascii", "3 Ω ∠-30° √3", "3 ohm at -30 deg sqrt 3"),
        ("latin-1", "3 Ω 30°", "3 ohm 30°"),
        ("utf-8", "3 Ω ∠", "3 Ω ∠"),
        ("ascii", "変", "\\u5909"),
        ("no-such-encoding", "Ω", "ohm"),
        ("utf-8", "a\x1b\n\u202e", "a\\x1b\\n\\u202e"),
    ],
)
def test_spelling(encoding: str, text: str, spelt: str) -> None:
    assert Spelling(encoding)(text) == spelt


def test_page_text_ends_its_lines_clean() -> None:
    text = page_text(Page((Title("over", "name", "conditions"),)))
    assert text == "over\nname    conditions\n"
