"""The answer to where it goes: page, JSON or CSV, on standard output or in a file."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable, Iterable, Sequence
from itertools import chain
from typing import TYPE_CHECKING, Any, NamedTuple

from seqfault.cli.run import say
from seqfault.errors import RequestError, quoted

if TYPE_CHECKING:
    from seqfault.faults.network import Network
    from seqfault.report.data import Quantity, QuantityColumn
    from seqfault.report.tables import Page


class Answer(NamedTuple):
    """One answer in its three forms, each made only when asked for."""

    page: Callable[[], Page]
    tree: Callable[[], dict[str, Any]]
    rows: Callable[[], Iterable[Quantity | QuantityColumn]]
    warnings: Sequence[str] = ()
    state: str = ""


def form_wanted(options: argparse.Namespace) -> str:
    """table, json or csv. Raises ``RequestError`` for a file that cannot or must not be written."""
    if options.output is None:
        return options.format or "table"
    from seqfault.report.files import check_target, form_of

    form = options.format or form_of(options.output)
    if form is None:
        name = quoted(options.output)
        raise RequestError(f"--output {name}: the suffix is not .json, .csv or .txt; add --format")
    check_target(options.output, options.overwrite, options.case)
    return str(form)


def plot_wanted(options: argparse.Namespace) -> str:
    """The format of the chart wanted, or nothing; what can be wrong with it is told before the work."""
    if options.plot is None:
        return ""
    from seqfault.report.files import check_target
    from seqfault.report.plotting import chart_form, load_plotting

    form = chart_form(options.plot)
    check_target(options.plot, options.overwrite, options.case, "--plot")
    load_plotting()
    return form


def deliver_plot(options: argparse.Namespace, content: bytes) -> None:
    """Write a chart to the file of ``--plot``."""
    from seqfault.report.files import write_whole

    write_whole(options.plot, content, options.overwrite, "--plot")
    say(f"wrote {options.plot}")


def deliver(options: argparse.Namespace, form: str, answers: Sequence[Answer]) -> int:
    """Write ``answers`` in ``form``; warnings go to standard error, and into JSON as well."""
    warnings = by_state([(answer.state, answer.warnings) for answer in answers])
    if form == "table":
        _pages(options, [answer.page() for answer in answers], warnings)
    else:
        from seqfault.report.files import as_csv, as_json

        content: Iterable[bytes]
        if form == "json":
            content = (as_json(_together([answer.tree() for answer in answers])),)
        else:
            kept = told(warnings) if options.output is not None else ()
            content = as_csv(chain((row for answer in answers for row in answer.rows()), kept))
        _write(options, content)
    if form != "json":
        for warning in warnings:
            say(f"warning: {warning}")
    return 0


def told(warnings: Sequence[str]) -> Iterable[Quantity]:
    """Warnings as rows, so that a file that is kept has them too."""
    from seqfault.report.data import Quantity

    return (Quantity("", "", "warning", "", text, "", None, "", "") for text in warnings)


def warnings_of(networks: Sequence[Network], more: Sequence[Sequence[str]] = ()) -> list[str]:
    """What the models warn of, and ``more`` of each; of several states each says which it is of."""
    extra = list(more) or [()] * len(networks)
    pairs = zip(networks, extra, strict=True)
    return by_state([(n.model.state, [*n.model.warnings, *texts]) for n, texts in pairs])


def by_state(own: Sequence[tuple[str, Sequence[str]]]) -> list[str]:
    """Warnings of several states, each once; one that not every state has says which it is of."""
    out: list[str] = []
    for state, texts in own:
        for text in texts:
            everywhere = not state or all(text in others for _, others in own)
            out.append(text if everywhere else f"state {state}: {text}")
    return list(dict.fromkeys(out))


def _together(trees: list[dict[str, Any]]) -> dict[str, Any]:
    """One answer as it is, several as a list under ``answers``."""
    if len(trees) == 1:
        return trees[0]
    shared = {key: trees[0][key] for key in ("format", "case")}
    rest = [{k: v for k, v in tree.items() if k not in shared} for tree in trees]
    return {**shared, "answers": rest}


def _pages(options: argparse.Namespace, pages: list[Page], warnings: Sequence[str]) -> None:
    from seqfault.report.terminal import page_text, show

    if options.output is not None:
        from seqfault.report.tables import Page, Sentences

        if warnings:  # a page that is kept has its warnings on it
            pages = [*pages, Page((Sentences("Warnings", tuple(warnings)),))]
        text = "\n\n".join(page_text(page, options.width) for page in pages)
        _write(options, (text.encode(),))
        return
    for number, page in enumerate(pages):
        if number:
            sys.stdout.write("\n\n")
        show(page, sys.stdout, options.width, options.color)
    sys.stdout.flush()  # before the warnings: an answer that cannot be written has none


def _write(options: argparse.Namespace, content: Iterable[bytes]) -> None:
    if options.output is not None:
        from seqfault.report.files import write_whole

        write_whole(options.output, content, options.overwrite)
        say(f"wrote {options.output}")
        return
    sys.stdout.flush()
    buffer = getattr(sys.stdout, "buffer", None)
    if buffer is None:
        sys.stdout.writelines(piece.decode() for piece in content)
    else:  # JSON and CSV are UTF-8 whatever the terminal speaks
        buffer.writelines(content)
        buffer.flush()
