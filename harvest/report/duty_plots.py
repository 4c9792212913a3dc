"""Drawing of a design over a log: the duration curve of its net power, and its course."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from harvest.report.plots import BLUE, GREEN, VERMILION, entitle, new_figure

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from harvest.study.duty import DutyBalance

MOST_POINTS = 20_000
"""Readings of the course that are drawn; of a longer log evenly spaced ones."""


def duty_figure(title: str, found: DutyBalance) -> Figure:
    """Net power against the time that exceeds it, and generated, drive and net power over the log's time."""
    bins = found.log.is_bins
    figure = new_figure(8.0, 3.6 if bins else 6.6)
    panels = figure.subplots(1 if bins else 2, 1, squeeze=False)[:, 0]
    hours = found.exceeded_share * found.answered_time / 3600.0
    panels[0].step(hours, found.net_power, color=BLUE, where="pre", label="net")
    panels[0].set(
        xlabel="time that has at least this power [h]", ylabel="power [W]", ylim=(min(0.0, min(found.net_power)), None)
    )
    if not bins:
        log, results = found.log, found.rows.results
        order = np.argsort(log.time, kind="stable")
        order = order[np.isfinite(log.time[order]) & (log.duration[order] > 0)]
        order = order[:: -(-len(order) // MOST_POINTS)]
        if log.is_stamped:
            clock = log.time[order] + np.nan_to_num(log.offset[order])
            x, name = (clock * 1e6).astype(np.int64).astype("datetime64[us]"), "time of the log"
        else:
            x, name = log.time[order] / 3600.0, "time of the log [h]"
        drives = results["hot_drive_power"] + results["cold_drive_power"]
        for values, colour, style, label in (
            (results["generated_power"], VERMILION, "--", "generated"),
            (drives, GREEN, ":", "pumps and fans"),
            (results["net_power"], BLUE, "-", "net"),
        ):
            panels[1].step(x, values[order], color=colour, linestyle=style, where="post", linewidth=0.9, label=label)
        panels[1].set(xlabel=name, ylabel="power [W]")
        panels[1].tick_params(axis="x", rotation=20)
    for axes in panels:
        axes.grid(color="0.85", linewidth=0.6)
        axes.legend(frameon=False)
    entitle(figure, f"{title}: {found.net_energy / 3.6e6:.4g}\N{NO-BREAK SPACE}kWh net")
    return figure
