"""Figures of the setting study as words: currents, times, ratios, resistances."""

from __future__ import annotations

import math
from collections.abc import Callable

from seqfault.report.numbers import figures


def size(value: float | None, unit: str) -> str:
    """``82.7 A``; ``to be set`` for none, ``no bound`` where infinite."""
    if value is None:
        return "to be set"
    if math.isnan(value):
        return "-"
    return "no bound" if math.isinf(value) else f"{figures(value)} {unit}"


def setting(value: float | None, unit: str) -> str:
    """A setting with the figures it has, ``42.5 A``."""
    if value is None:
        return "to be set"
    return f"{float(f'{value:.5g}'):.15g} {unit}".strip()


def no_less(value: float, unit: str) -> str:
    """Three figures, rounded up: what a setting is to be at least."""
    return _rounded(value, unit, math.ceil)


def no_more(value: float, unit: str) -> str:
    """Three figures, rounded down: what a setting is to be at most."""
    return _rounded(value, unit, math.floor)


def _rounded(value: float, unit: str, towards: Callable[[float], int]) -> str:
    step = 10.0 ** (math.floor(math.log10(value)) - 2)
    return f"{float(f'{towards(round(value / step, 9)) * step:.3g}'):g} {unit}"


def seconds(value: float) -> str:
    """``0.298 s``; ``rests`` where infinite."""
    if math.isnan(value):
        return "-"
    if math.isinf(value):
        return "never" if value > 0 else "none"
    return f"{value:.3f} s"


def over(ratio: float, demand: float) -> str:
    """``8.27, 2``: a ratio and what is wanted of it."""
    if math.isnan(ratio):
        return f"-, {demand:g}"
    return f"{'any' if math.isinf(ratio) else figures(ratio)}, {demand:g}"


def ohms_up_to(value: float) -> str:
    """A greatest resistance."""
    if math.isnan(value):
        return "none"
    return "any" if math.isinf(value) else figures(value)


def plain(value: float | str | None) -> float | str | None:
    """A value of a table of rows: nothing for what is not known, words for what has no end."""
    if not isinstance(value, float) or math.isfinite(value):
        return value
    return None if math.isnan(value) else "unlimited" if value > 0 else "none"
