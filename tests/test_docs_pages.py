"""What the pages for developers and checkers name exists: paths, modules, tests, links, headings."""

from __future__ import annotations

import ast
import re
from functools import cache
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
PAGES = ("DEVELOPERS.md", "docs/method.md")
TOP = ("seqfault", "tests", "docs", "cases", ".ci")
FENCE = re.compile(r"^```.*?\n(.*?)^```$", re.MULTILINE | re.DOTALL)
LINK = re.compile(r"\[[^\]]*\]\(([^)\s]+)\)")


def mentions(text: str) -> list[str]:
    """Every word in backticks or in a fenced block that names a path, a module or a test."""
    fenced = " ".join(FENCE.findall(text))
    ticked = re.findall(r"`([^`]+)`", FENCE.sub("", text))
    words = [word.rstrip(",;") for part in (fenced, *ticked) for word in part.split()]
    return [word for word in words if is_path(word) or is_module(word) or is_test(word)]


def is_path(word: str) -> bool:
    at = word.partition("::")[0]
    return ("/" in at and at.split("/")[0] in TOP) or at.endswith((".py", ".md", ".toml", ".txt"))


def is_module(word: str) -> bool:
    return re.fullmatch(rf"({'|'.join(TOP[:2])})(\.\w+)+", word) is not None


def is_test(word: str) -> bool:
    return re.fullmatch(r"test_\w+", word) is not None


def exists(word: str) -> bool:
    """Whether what ``word`` names is there, a test in the very file it is said to be in."""
    if is_path(word):
        at, _, name = word.partition("::")
        return (ROOT / at).exists() and (not name or name in defined(ROOT / at))
    if is_module(word):
        return any(ROOT.joinpath(*word.split(".")).with_suffix(end).exists() for end in (".py", ""))
    return any(word in defined(path) for path in ROOT.glob("tests/**/test_*.py"))


@cache
def defined(path: Path) -> frozenset[str]:
    body = ast.parse(path.read_text(encoding="utf-8")).body
    return frozenset(node.name for node in body if isinstance(node, ast.FunctionDef | ast.ClassDef))


def anchors(text: str) -> set[str]:
    """Anchors of the headings of a page, as the common renderers of Markdown make them."""
    titles = re.findall(r"^#+ (.*)$", FENCE.sub("", text), re.MULTILINE)
    return {re.sub(r"[^\w\- ]", "", title.lower()).replace(" ", "-") for title in titles}


def broken_links(text: str, folder: Path) -> list[str]:
    return [link for link in LINK.findall(FENCE.sub("", text)) if not leads(link, text, folder)]


def leads(link: str, text: str, folder: Path) -> bool:
    at, _, anchor = link.partition("#")
    if not (folder / at).exists():
        return False
    return not anchor or anchor in anchors((folder / at).read_text(encoding="utf-8") if at else text)


@pytest.mark.parametrize("page", PAGES)
def test_what_the_page_names_exists(page: str) -> None:
    found = mentions((ROOT / page).read_text(encoding="utf-8"))
    assert len(found) >= 20
    assert [word for word in found if not exists(word)] == []


@pytest.mark.parametrize("page", [*PAGES, "docs/design.md", "docs/changelog.md"])
def test_links_lead_somewhere(page: str) -> None:
    text = (ROOT / page).read_text(encoding="utf-8")
    assert LINK.search(text)
    assert broken_links(text, (ROOT / page).parent) == []


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("see `seqfault/nothing.py`", "seqfault/nothing.py"),
        ("guarded by `tests/test_docs_pages.py::test_nothing`", "tests/test_docs_pages.py::test_nothing"),
        ("guarded by `test_nothing_of_this_name`", "test_nothing_of_this_name"),
        ("```sh\npython -m tests.bench.nothing x\n```\n", "tests.bench.nothing"),
        ("`records.py` without its folder", "records.py"),
    ],
)
def test_a_name_that_is_wrong_is_noticed(text: str, word: str) -> None:
    assert [found for found in mentions(text) if not exists(found)] == [word]


def test_a_link_that_is_wrong_is_noticed() -> None:
    right = "# One\n[a](#one) [b](docs/method.md) [c](docs/method.md#faults)\n"
    wrong = "[d](nothing.md) [e](#two) [f](docs/method.md#no-such)\n"
    assert broken_links(right + wrong, ROOT) == ["nothing.md", "#two", "docs/method.md#no-such"]
