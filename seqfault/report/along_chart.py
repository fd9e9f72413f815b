"""A chart of a line scanned from end to end."""

from __future__ import annotations

import numpy as np

from seqfault.report.plotting import load_plotting, plain_text, saved
from seqfault.studies.along import Along

COLORS = ("#1f4e79", "#b3541e", "#3f7d3a", "#6a4c93", "#7a6a1f", "#8a2f4a", "#3b3b3b", "#4a90a4")
MARKS = "osD^vPX*"
DASHES = ("-", "--", ":")


def along_chart(title: str, scanned: Along, form: str) -> bytes:
    """Current into the fault over the line for each kind, and 3I0 at both ends of those to earth."""
    figure = load_plotting()(figsize=(8, 5.2), layout="constrained")
    axes = figure.subplots()
    scale = 100.0 if scanned.length is None else scanned.length / 1000
    x = scanned.fraction * scale
    for k, scan in enumerate(scanned.scans):
        color, mark = COLORS[k % len(COLORS)], MARKS[k % len(MARKS)]
        sizes = np.abs(scan.current).max(axis=0)
        axes.plot(x, sizes, DASHES[0], color=color, marker=mark, ms=4, label=f"{scan.kind}: into the fault")
        if not np.abs(scan.residual).any():
            continue
        for end, bus in enumerate(scanned.ends):
            seen = np.abs(scan.seen_residual[end])
            if seen.any():
                label = f"{scan.kind}: 3I0 at {bus}"
                axes.plot(x, seen, DASHES[1 + end], color=color, lw=1.2, label=label)
    unit = "per cent of the line" if scanned.length is None else "km"
    axes.set_xlabel(f"from {scanned.ends[0]} to {scanned.ends[1]}, {unit}")
    axes.set_ylabel("ampere")
    axes.set_ylim(bottom=0)
    axes.grid(True, lw=0.4)
    state = scanned.scans[0].solutions[0].state
    opened = f", breaker at {scanned.opened} open" if scanned.opened else ""
    heading = figure.suptitle(f"{title}\nfaults along {scanned.line}{opened}, state {state}".strip())
    legend = figure.legend(loc="outside lower center", ncols=2, fontsize="small")
    plain_text(heading, axes.xaxis.label, *legend.get_texts())
    return saved(figure, form)
