"""Drawings of how sure a case is: the distribution of its net power, and what each input does to it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.report.doubt_sheet import LITTLE
from harvest.report.plots import BLUE, VERMILION, entitle, new_figure

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from harvest.study.doubt import Doubt, UncertainInput

BINS = 40
MOST_BARS = 10


def doubt_figure(title: str, found: Doubt) -> Figure:
    """Histogram of net power with its percentiles and zero; swing of net power by each input with its index."""
    bars = shown_inputs(found)
    figure = new_figure(8.0, 4.0 + 0.28 * len(bars))
    above, below = figure.subplots(2, 1, height_ratios=(3.0, 1.0 + 0.28 * len(bars)))
    draw_distribution(above, found)
    draw_swings(below, found)
    entitle(figure, f"{title}: how sure the net power is")
    return figure


def shown_inputs(found: Doubt) -> tuple[UncertainInput, ...]:
    """Inputs that have a bar: those that matter, and the first in any case."""
    return tuple(each for each in found.inputs[:MOST_BARS] if each.first_order >= LITTLE) or found.inputs[:1]


def draw_distribution(axes: Any, found: Doubt) -> None:
    """Draw the sampled net powers with P10, P50 and P90, the case as it stands, and zero."""
    net = found.results["net_power"]
    shares = np.full(found.valid, 100.0 / found.valid)
    axes.hist(found.net_power_sample, BINS, weights=shares, color="0.85", edgecolor="0.45", linewidth=0.5)
    for value, style, name in ((net.p10, "--", "P10"), (net.p50, "-", "P50"), (net.p90, "-.", "P90")):
        axes.axvline(value, color=BLUE, linestyle=style, label=f"{name} {value:.3g} W")
    axes.plot(net.nominal, 0.0, "D", color="black", clip_on=False, label=f"as it stands {net.nominal:.3g} W")
    lowest, highest = axes.get_xlim()
    if lowest <= 0.0 or lowest < 0.5 * highest:  # far from zero, showing it would hide the band
        axes.axvline(0.0, color="black", linewidth=1.2, linestyle=":", label="zero")
    axes.set(xlabel="net power [W]", ylabel="share of cases [%]")
    axes.legend(frameon=False, ncols=3, loc="lower center", bbox_to_anchor=(0.5, 1.0), fontsize=8)
    axes.grid(axis="y", color="0.9", linewidth=0.6)


def draw_swings(axes: Any, found: Doubt) -> None:
    """Draw, for the inputs that matter most, net power with each alone at its P10 and P90, and its index."""
    net = found.results["net_power"].nominal
    bars = shown_inputs(found)
    places = np.arange(len(bars))[::-1]
    for side, colour, hatch, name in (
        ("net_power_at_p10", VERMILION, "///", "input at its P10"),
        ("net_power_at_p90", BLUE, "", "input at its P90"),
    ):
        lengths = [getattr(each, side) - net for each in bars]
        axes.barh(places, lengths, 0.7, net, color=colour, hatch=hatch, edgecolor="white", linewidth=0.5, label=name)
    axes.axvline(net, color="black", linewidth=0.8)
    axes.set_yticks(places, [f"{each.field}  {each.tolerance.replace('+-', chr(177))}" for each in bars], fontsize=8)
    for place, each in zip(places, bars, strict=True):
        axes.annotate(
            f"{100.0 * max(each.first_order, 0.0):.0f} %", (1.01, place), xycoords=("axes fraction", "data"),
            va="center", fontsize=8, annotation_clip=False,
        )  # fmt: skip
    axes.annotate("share", (1.01, 1.02), xycoords="axes fraction", fontsize=8, annotation_clip=False)
    axes.set(xlabel="net power with this input alone changed [W]")
    axes.legend(frameon=False, ncols=2, loc="lower center", bbox_to_anchor=(0.5, 1.0), fontsize=8)
    axes.grid(axis="x", color="0.9", linewidth=0.6)
