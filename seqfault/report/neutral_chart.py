"""A chart of earth faults over the ohms of a neutral."""

from __future__ import annotations

import numpy as np

from seqfault.report.numbers import figures
from seqfault.report.plotting import load_plotting, plain_text, saved
from seqfault.studies.neutral import NeutralReport
from seqfault.studies.neutral_sweep import Sweep, sweep
from seqfault.studies.neutral_target import Target

SMOOTH = 160
CURRENT, SOUND = "#1f4e79", "#b3541e"
PICKUP = "#3f7d3a"


def neutral_chart(report: NeutralReport, swept: Sweep, target: Target | None, form: str) -> bytes:
    """Current to earth and sound-phase voltage over the ohms of the neutral, as a file of ``form``.

    The greatest over kinds and states, on a logarithmic axis; what stands and what the target asks
    for are marked, solid and open are lines at the edges, and so are the pickups of earth-fault relays.
    """
    figure = load_plotting()(figsize=(7.5, 5.0), layout="constrained")
    neutral = report.neutral
    inside = np.abs(swept.ohms[(swept.ohms != 0) & np.isfinite(swept.ohms)])
    ohms = np.geomspace(inside.min(), inside.max(), SMOOTH)
    smooth = sweep(neutral, ohms * neutral.direction, swept.duration)
    left = figure.subplots()
    right = left.twinx()
    drawn = [
        *left.plot(ohms, smooth.earth.value, color=CURRENT, label="current to earth, 3I0"),
        *right.plot(ohms, smooth.sound.value, color=SOUND, ls="--", label="sound phase"),
    ]
    ends = sweep(neutral, np.array([0, complex(np.inf)]), swept.duration)
    for value, word in zip(ends.earth.value, ("solid", "open"), strict=True):
        drawn.append(left.axhline(value, color=CURRENT, lw=0.6, ls=":"))
        drawn[-1].set_label(f"{word}: {figures(value)} A")
    for view in neutral.relays:
        drawn.append(left.axhline(view.pickup, color=PICKUP, lw=0.9, ls="-."))
        drawn[-1].set_label(f"pickup of {view.name}: {figures(view.pickup)} A")
    standing = {s.ohms[0] for s in report.standing}
    marks = [(z, "stands", "o") for z in standing if z.real == 0 or z.imag == 0]
    if target is not None and np.isfinite(target.ohms):
        marks.append((target.ohms * neutral.direction, "target", "D"))
    for z, word, shape in marks:
        one = sweep(neutral, np.array([z]), swept.duration)
        drawn += left.plot(
            [abs(z)],
            one.earth.value,
            shape,
            color=CURRENT,
            label=f"{word}: {figures(abs(z), 4)} ohm, {figures(one.earth.value[0])} A",
        )
        right.plot([abs(z)], one.sound.value, shape, color=SOUND)
    left.set(xscale="log", yscale="log" if smooth.earth.value.min() > 0 else "linear")
    left.set_xlabel(f"ohms of the {neutral.device} {neutral.name}")
    left.set_ylabel("current to earth at " + neutral.place + ", A", color=CURRENT)
    right.set_ylabel("sound phase, times the phase voltage before", color=SOUND)
    left.grid(True, which="major", lw=0.4)
    states = "state " + report.standing[0].state.name
    if len(report.standing) > 1:
        states = f"the greatest of {len(report.standing)} states"
    title = report.standing[0].state.network.model.title
    heading = figure.suptitle(f"{title}\nearth faults at {neutral.place}, {states}".strip())
    for axis in (left.xaxis, left.yaxis, right.yaxis):
        axis.set_major_formatter(lambda value, _: f"{value:g}")
    legend = figure.legend(handles=drawn, loc="outside lower center", ncols=3, fontsize="small")
    plain_text(heading, left.xaxis.label, left.yaxis.label, *legend.get_texts())
    return saved(figure, form)
