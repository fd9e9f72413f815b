"""Time-current curves of relays on logarithmic axes, with the currents they see."""

from __future__ import annotations

import math
import textwrap
from typing import Any

import numpy as np

from seqfault.model.elements import Floats
from seqfault.report.numbers import figures, kilovolt
from seqfault.report.plotting import load_plotting, plain_text, saved
from seqfault.studies.curve_zone import Curves, Drawn, Mark
from seqfault.studies.relays import operate_times

SHORTEST, LONGEST = 0.01, 100.0
"""s, ends of the axis of time; what is shorter is drawn at the lower one."""
POINTS = 240
LEGEND = 54
"""Characters a line of the legend."""
STYLES = ("-", "--", "-.", ":")
COLORS = ("#1f4e79", "#b3541e", "#3f7d3a", "#7a3b7d", "#8a6d00", "#4a4a4a")
MARKS = "osD^v<>p*h"


def curve_chart(curves: Curves, title: str, what: str, form: str) -> bytes:
    """The chart of ``curves`` as a file of ``form``; ``what`` the marked currents are of."""
    entries = sum(1 + len(each.marks) for each in curves.drawn)
    figure = load_plotting()(figsize=(7.5, 5.2 + 0.15 * entries), layout="constrained")
    axes = figure.subplots()
    low, high = _ends(curves)
    handles = []
    for k, alike in enumerate(_alike(curves)):
        color, style = COLORS[k % len(COLORS)], STYLES[k % len(STYLES)]
        (line,) = axes.plot(*_curve(alike[0], high), lw=1.4, color=color, ls=style, label=_label(alike))
        handles.append(line)
        for each in alike:
            for mark in each.marks:
                handles.append(_marked(axes, mark, MARKS[k % len(MARKS)], color, each))
    axes.set(xscale="log", yscale="log", xlim=(low, high), ylim=(SHORTEST, LONGEST))
    referred = any(each.scale != 1 for each in curves.drawn)
    at = kilovolt(curves.voltage)
    axes.set_xlabel(f"what each relay measures, primary ampere {'referred to' if referred else 'at'} {at}")
    axes.set_ylabel(f"operate time, s (shorter than {SHORTEST:g} s drawn there)")
    axes.grid(True, which="major", lw=0.5)
    axes.grid(True, which="minor", lw=0.2)
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_formatter(lambda value, _: f"{value:g}")
        axis.set_minor_formatter(lambda value, _: f"{value:g}" if f"{value:e}"[0] in "25" else "")
    axes.tick_params(which="minor", labelsize="x-small")
    lines = [line for text in (title, what) for line in textwrap.wrap(text, 80)]
    heading = figure.suptitle("\n".join(lines), fontsize="medium")
    legend = figure.legend(handles=handles, loc="outside lower center", ncols=2, fontsize="small")
    texts = [heading, axes.xaxis.label, axes.yaxis.label, *legend.get_texts()]
    if curves.left_out:
        said = "Not drawn: " + "; ".join(curves.left_out)
        texts.append(axes.set_title("\n".join(textwrap.wrap(said, 95)), fontsize="small", loc="left"))
    plain_text(*texts)
    return saved(figure, form)


def _ends(curves: Curves) -> tuple[float, float]:
    """Ends (A) of the axis of current."""
    pickups = [each.scale * float(each.relay.pickup.primary or 0) for each in curves.drawn]
    seen = [mark.current for each in curves.drawn for mark in each.marks]
    return 0.6 * min([*pickups, *seen]), 1.6 * max([*(4 * pickup for pickup in pickups), *seen])


def _curve(each: Drawn, high: float) -> tuple[Floats, Floats]:
    """Currents (A at the chart's voltage) and times (s) of a relay from its pickup on."""
    pickup = float(each.relay.pickup.primary or 0)
    most = max(high / each.scale, 2 * pickup)
    own = pickup * (1 + np.geomspace(1e-6, most / pickup - 1, POINTS))
    fast = None if each.relay.fast is None else each.relay.fast.primary
    if fast is not None and fast < most:  # both sides of the step
        own = np.sort(np.concatenate([own, [fast, fast * (1 + 1e-9)]]))
    times = operate_times(each.relay, own)
    if each.relay.curve == "definite":  # from above down to its delay
        own, times = np.concatenate([own[:1], own]), np.concatenate([[10 * LONGEST], times])
    return own * each.scale, np.maximum(times, SHORTEST)


def _alike(curves: Curves) -> list[list[Drawn]]:
    """Relays with the same curve together: one line is enough."""
    together: dict[object, list[Drawn]] = {}
    for each in curves.drawn:
        r = each.relay
        stages = (r.pickup, r.curve, r.multiplier, r.delay, r.minimum_time, r.fast, r.fast_delay)
        together.setdefault((*stages, each.scale), []).append(each)
    return list(together.values())


def _label(alike: list[Drawn]) -> str:
    each = alike[0]
    relay, names = each.relay, ", ".join(one.relay.name for one in alike)
    setting = f"{relay.delay:g} s" if relay.curve == "definite" else f"{relay.curve} × {relay.multiplier:g}"
    text = f"{names}: {figures(relay.pickup.primary or 0)} A, {setting}"
    return _wrapped(text if each.scale == 1 else f"{text}, own amperes times {each.scale:.4g}")


def _wrapped(text: str) -> str:
    return textwrap.fill(text, LEGEND, subsequent_indent="   ")


def _marked(axes: Any, mark: Mark, shape: str, color: str, each: Drawn) -> Any:
    """A point on the curve, or on the lower edge where the relay rests, and a line down from it."""
    rests = not math.isfinite(mark.time)
    time = SHORTEST if rests else max(mark.time, SHORTEST)
    axes.plot([mark.current] * 2, [SHORTEST, time], color=color, lw=0.6, ls=":")
    own = f"{figures(mark.current / each.scale)} A"
    when = "rests" if rests else f"{mark.time:.3f} s"
    text = _wrapped(f"  {each.relay.name} sees {own}: {when}" + (f", {mark.text}" if mark.text else ""))
    (point,) = axes.plot(
        [mark.current],
        [time],
        shape,
        color=color,
        mfc="none" if rests else color,
        clip_on=False,
        label=text,
    )
    return point
