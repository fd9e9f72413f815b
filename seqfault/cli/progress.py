"""A bar for long work, on a terminal alone."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager


@contextmanager
def bar(what: str, count: int) -> Iterator[Callable[[int], None] | None]:
    """A bar over ``count`` of ``what`` on standard error where that is a terminal; nothing in a pipe.

    It is moved on by a call, whatever the call passes.
    """
    if sys.stderr is None or not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn(what), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as progress:
        task = progress.add_task(what, total=count)
        yield lambda _: progress.advance(task)
