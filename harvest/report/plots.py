"""Drawings by matplotlib: the same bytes for the same input, legible without colour."""

from __future__ import annotations

import io
import textwrap
from pathlib import Path
from typing import TYPE_CHECKING, Any

from harvest.errors import InputError, MissingExtraError
from harvest.model.module_curve import ModuleCurve
from harvest.report.files import write_whole

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from harvest.study.bench_record import BenchFit
    from harvest.study.heat_pump_record import HeatPumpFit
    from harvest.study.size import Sizing

SUFFIXES = (".svg", ".png", ".pdf")
# the Okabe-Ito colours, each with a line style of its own
BLUE, VERMILION, GREEN = "#0072B2", "#D55E00", "#009E73"


TITLE_WIDTH = 11.0
"""Letters of a title that fit on an inch."""


def new_figure(width: float, height: float) -> Figure:
    """Return an empty figure [inch]; raises MissingExtraError without matplotlib."""
    try:
        import matplotlib as mpl
        from matplotlib.figure import Figure
    except ImportError:
        raise MissingExtraError(
            'a plot needs matplotlib, which is not installed; install it with pip install "harvest[plot]"'
        ) from None
    settings: dict[Any, Any] = {"svg.hashsalt": "harvest", "svg.fonttype": "none", "font.family": "DejaVu Sans"}
    mpl.rcParams.update({**settings, "font.size": 9})
    return Figure(figsize=(width, height), layout="constrained")


def entitle(figure: Figure, text: str) -> None:
    """Write the title over a figure, in lines that are not cut off and without reading it as a formula."""
    widest = int(TITLE_WIDTH * figure.get_figwidth())
    figure.suptitle(textwrap.fill(text, widest), fontsize=10, parse_math=False)


def plot_suffix(path: Path) -> str:
    """Format of a plot's file; raises InputError for another suffix."""
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        raise InputError(f"{path}: a plot ends in {', '.join(SUFFIXES)}")
    return suffix


def can_plot(path: Path) -> None:
    """Raise, before anything long begins, what would keep a plot from being written."""
    plot_suffix(path)
    new_figure(1.0, 1.0)


def write_figure(path: Path, figure: Figure) -> None:
    """Write a figure whole, in the format of the suffix; raises InputError for another suffix."""
    suffix = plot_suffix(path)
    metadata: dict[str, Any] = {".svg": {"Date": None}, ".pdf": {"CreationDate": None}, ".png": {}}[suffix]
    content = io.BytesIO()
    figure.savefig(content, format=suffix[1:], metadata=metadata, dpi=150)
    write_whole(path, content.getvalue())


def size_figure(title: str, found: Sizing) -> Figure:
    """Generated, drive and net power of the best arrangement against the number of modules; the front of cost."""
    front = found.front
    figure = new_figure(8.0, 4.0 if front is None else 7.0)
    panels = figure.subplots(1 if front is None else 2, 1, squeeze=False)[:, 0]
    curve = found.curve
    for values, colour, style, name in (
        (curve.generated_power, VERMILION, "--", "generated"),
        (curve.drive_power, GREEN, ":", "pumps and fans"),
        (curve.net_power, BLUE, "-", "net"),
    ):
        panels[0].plot(curve.module_count, values, color=colour, linestyle=style, label=name)
    best = found.arrangement
    panels[0].plot(best.module_count, best.net_power, "o", color="black", fillstyle="none", label="best")
    mean = "" if found.duty is None else "mean "
    panels[0].set(xlabel="modules", ylabel=f"{mean}power [W]")
    if front is not None:
        panels[1].step(front.building_cost, front.net_power, color=BLUE, where="post", label="front")
        panels[1].plot(best.building_cost, best.net_power, "o", color="black", fillstyle="none", label="best")
        panels[1].set(xlabel=f"cost of building [{found.best.currency or 'currency'}]", ylabel=f"{mean}net power [W]")
    for axes in panels:
        axes.grid(color="0.85", linewidth=0.6)
        axes.legend(frameon=False)
    entitle(figure, f"{title}: best arrangement at each number of modules")
    return figure


def module_figure(title: str, curve: ModuleCurve, fit: BenchFit | HeatPumpFit | None = None) -> Figure:
    """Voltage, power, efficiency and heat against current, figure of merit over temperature, residuals of a fit."""
    figure = new_figure(8.0, 6.2 if fit is None else 9.0)
    panels = figure.subplots(2 if fit is None else 3, 2)
    (over_current, of_efficiency), (of_heat, of_merit) = panels[:2]
    if fit is not None:
        from harvest.study.bench_record import BenchFit

        if isinstance(fit, BenchFit):
            _draw_residuals(panels[2], fit)
        else:
            _draw_course(panels[2], fit)
    over_current.plot(curve.current, curve.voltage, color=BLUE, label="voltage")
    over_current.set(xlabel="current [A]", ylabel="voltage [V]")
    of_power = over_current.twinx()
    of_power.plot(curve.current, curve.power, color=VERMILION, linestyle="--", label="power")
    of_power.set(ylabel="power [W]")
    for point, mark, name in ((curve.matched, "o", "matched"), (curve.maximum_power, "D", "most power")):
        of_power.plot(point.current, point.power, mark, color="black", markersize=5, fillstyle="none", label=name)
    lines = [*over_current.get_lines(), *of_power.get_lines()]
    over_current.legend(lines, [str(line.get_label()) for line in lines], loc="lower center", frameon=False)
    of_efficiency.plot(curve.current, 100 * curve.efficiency, color=GREEN, linestyle="-.")
    best = curve.best_efficiency
    of_efficiency.plot(best.current, 100 * best.efficiency, "s", color="black", fillstyle="none", label="best")
    of_efficiency.legend(frameon=False)
    of_efficiency.set(xlabel="current [A]", ylabel="efficiency [%]")
    of_heat.plot(curve.current, curve.heat_flow, color=BLUE, linestyle=":")
    of_heat.set(xlabel="current [A]", ylabel="heat into the hot face [W]")
    of_merit.plot(curve.temperatures - 273.15, curve.merit_curve, color=VERMILION)
    of_merit.set(xlabel="temperature [degC]", ylabel="figure of merit Z T [-]", ylim=(0.0, None))
    for axes in (over_current, of_efficiency, of_heat, of_merit):
        axes.grid(color="0.85", linewidth=0.6)
        axes.spines[["top"]].set_visible(False)
    hot, cold = curve.hot_face_temperature - 273.15, curve.cold_face_temperature - 273.15
    entitle(figure, f"{title}: faces at {hot:.0f} and {cold:.0f} degC")
    return figure


def _draw_residuals(panels: Any, fit: BenchFit) -> None:
    """Residuals of voltages and of heats over their scatter, outliers crossed, at the edge where they are beyond."""
    for axes, wanted in zip(panels, ("voltage", "heat"), strict=True):
        of_kind = [i for i, name in enumerate(fit.quantities) if wanted in name]
        lines = [int(fit.lines[i]) for i in of_kind]
        residuals = [float(fit.residuals[i]) for i in of_kind]
        colours = [BLUE if fit.used[i] else VERMILION for i in of_kind]
        # outliers far away stand at the edge with their number, so that they do not flatten the others
        edge = 1.4 * max([abs(float(fit.residuals[i])) for i in of_kind if fit.used[i]], default=0.0) or 1.0
        axes.set_ylim(-1.1 * edge, 1.1 * edge)
        for line, residual, colour, index in zip(lines, residuals, colours, of_kind, strict=True):
            shown = min(max(residual, -edge), edge)
            axes.plot(line, shown, "o" if fit.used[index] else "x", color=colour, markersize=4)
            if shown != residual:
                axes.annotate(
                    f"{residual:+.0f}", (line, shown), (4, 0), textcoords="offset points", va="center", color=colour
                )
        axes.axhline(0.0, color="black", linewidth=0.8)
        axes.set(xlabel="line of the record", ylabel=f"{wanted} residual over scatter [-]")
        axes.grid(color="0.85", linewidth=0.6)


def _draw_course(panels: Any, fit: HeatPumpFit) -> None:
    """Heats over time and the coefficient of performance with its standard error."""
    heats, performance = panels
    minutes = fit.time / 60.0
    heats.plot(minutes, fit.pumped_heat, color=BLUE, label="pumped")
    heats.plot(minutes, fit.delivered_heat, color=VERMILION, linestyle="--", label="delivered")
    heats.plot(minutes, fit.electrical_power, color=GREEN, linestyle=":", label="electric")
    heats.set(xlabel="time [min]", ylabel="heat flow, power [W]")
    heats.legend(frameon=False)
    pumps = fit.pumps
    ratio, error = fit.coefficient_of_performance[pumps], fit.coefficient_of_performance_error[pumps]
    performance.errorbar(minutes[pumps], ratio, error, fmt="o", color=BLUE, markersize=3)
    performance.set(xlabel="time [min]", ylabel="coefficient of performance [-]", ylim=(0.0, None))
    for axes in (heats, performance):
        axes.grid(color="0.85", linewidth=0.6)
