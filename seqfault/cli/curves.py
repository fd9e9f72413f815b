"""The chart of time-current curves: what ``--plot`` and ``--plot-at`` ask for, and its file."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from seqfault.cli.run import say
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from seqfault.studies.curve_zone import Curves
    from seqfault.studies.settings_states import States


def check_curves(options: argparse.Namespace) -> str:
    """The format of the chart wanted, or nothing; what is wrong with it is told before the work."""
    from seqfault.cli.delivery import plot_wanted

    if options.plot_at is not None and options.plot is None:
        raise RequestError("--plot-at: it goes with --plot; add --plot FILE")
    if options.plot is not None and getattr(options, "scenario", "base") == "all":
        raise RequestError("--plot: a chart is of one state; name it with --scenario")
    return plot_wanted(options)


def write_curves(options: argparse.Namespace, form: str, curves: Curves, title: str, what: str) -> None:
    """Write the chart; what it leaves out is said on standard error too."""
    from seqfault.cli.delivery import deliver_plot
    from seqfault.report.curve_chart import curve_chart

    deliver_plot(options, curve_chart(curves, title, what, form))
    for text in curves.left_out:
        say(f"not drawn: {text}")


def draw_settings(options: argparse.Namespace, form: str, study: States) -> None:
    """Write the chart of the settings of ``study``, where one is asked for."""
    if not form:
        return
    from seqfault.studies.curve_zone import curves_of_sheet, voltage_of
    from seqfault.studies.settings_sheet import setting_sheet

    at = voltage_of(study.case, options.plot_at)
    curves = curves_of_sheet(study.case, setting_sheet(study), at)
    what = "the least current each must see, the greatest of what it protects"
    write_curves(options, form, curves, study.case.title, what)
