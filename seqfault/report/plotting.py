"""What every chart shares: matplotlib, which only charts import (the extra ``plot``), and its files."""

from __future__ import annotations

import io
import os
from typing import Any

from seqfault.errors import RequestError, quoted

FORMATS = ("svg", "png", "pdf")


def chart_form(path: str) -> str:
    """The format that the suffix of ``path`` asks for. Raises ``RequestError`` for any but ``FORMATS``."""
    form = os.path.splitext(path)[1].lower().lstrip(".")
    if form not in FORMATS:
        raise RequestError(f"--plot {quoted(path)}: the suffix is one of .svg, .png, .pdf")
    return form


def load_plotting() -> Any:
    """The class of figures. Raises ``RequestError`` where matplotlib is not installed."""
    try:
        import matplotlib
        from matplotlib.figure import Figure
    except ImportError:
        raise RequestError(
            "--plot: matplotlib is not installed; install it with  pip install 'seqfault[plot]'"
        ) from None
    matplotlib.rcParams["svg.hashsalt"] = "seqfault"  # the same figure twice is the same file
    return Figure


def plain_text(*texts: Any) -> None:
    """Let a $ in a name be a $."""
    for text in texts:
        text.set_parse_math(False)


def saved(figure: Any, form: str) -> bytes:
    """The figure as a file of ``form``."""
    out = io.BytesIO()
    figure.savefig(out, format=form, metadata={"Date": None} if form == "svg" else None)
    return out.getvalue()
