"""The map of a sweep: net power over one or two numbers, with the design and the limits of the case drawn in."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from harvest.errors import InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, Case, display, value_at
from harvest.model.search import search_batch
from harvest.physics.arrays import FloatArray
from harvest.quantities import format_quantity, unit_of
from harvest.report.plots import BLUE, GREEN, VERMILION, entitle, new_figure
from harvest.study.limits import LIMITS, limit_of
from harvest.study.sweep import SweepPlan, is_structure

if TYPE_CHECKING:
    from matplotlib.figure import Figure

MOST_PANELS = 6
LETTERS_OF_TITLE = 90
LEVELS = 11
# further Okabe-Ito colours, for curves of several choices
COLOURS = (BLUE, VERMILION, GREEN, "#CC79A7", "#E69F00", "#56B4E9")
STYLES = ("-", "--", "-.", ":", (0, (5, 1)), (0, (3, 1, 1, 1)))
LIMIT_STYLES = ("-", "--", "-.", ":")
SHOWN: dict[str, tuple[str, float, float]] = {
    "temperature": ("degC", 1.0, -273.15),
    "length": ("mm", 1e3, 0.0),
    "pressure": ("kPa", 1e-3, 0.0),
    "volume flow": ("m^3/h", 3600.0, 0.0),
}
"""Units in which axes are drawn where the SI unit is not what a person reads: unit, factor, what is added."""


@dataclass(frozen=True)
class Limit:
    """A limit of the case, with the result it bounds over the grid."""

    label: str
    value: float
    sign: float
    result: FloatArray


def plotted_results(plan: SweepPlan) -> tuple[str, ...]:
    """Names of the results that the plot of a sweep needs; raises InputError for what cannot be drawn."""
    if plan.sampled:
        raise InputError("--plot: a sample has no grid to draw; give points instead of sample")
    across = _drawn_axes(plan)
    if not 1 <= len(across) <= 2:
        raise InputError(
            f"--plot: draws net power over one or two numbers, and {len(across)} are varied; give the others one value"
        )
    panels = np.prod([len(axis.values) for path, axis in plan.axes.items() if path not in across], dtype=int)
    if panels > MOST_PANELS:
        raise InputError(f"--plot: {panels:,} combinations of choices; at most {MOST_PANELS} can be drawn")
    return ("net_power", *dict.fromkeys(result for result, _ in _limits(plan).values()))


def _drawn_axes(plan: SweepPlan) -> list[str]:
    """Numbers with more than one value."""
    return [path for path, axis in plan.axes.items() if not is_structure(path, axis) and len(axis.values) > 1]


def _limits(plan: SweepPlan) -> dict[str, tuple[str, float]]:
    """Limits that the case has, with the results they bound, where the sweep has them."""
    cases = [base for base in plan.bases if isinstance(base, Case)]
    return {
        name: bound
        for name, bound in LIMITS.items()
        if bound[0] in plan.results and any(np.isfinite(limit_of(case, name)) for case in cases)
    }


def sweep_figure(plan: SweepPlan, kept: dict[str, FloatArray]) -> Figure:
    """Curves over one number, or maps over two; `kept` holds the results of `plotted_results`, (combinations,)."""
    across = _drawn_axes(plan)
    if not np.isfinite(kept["net_power"]).any():
        raise NoAnswerError("--plot: no combination has an answer, so there is nothing to draw")
    groups = [path for path in plan.axes if path not in across]
    order = [list(plan.axes).index(path) for path in (*groups, *across)]
    lengths = tuple(len(plan.axes[path].values) for path in across)
    by_group = {
        name: values.reshape(plan.shape).transpose(order).reshape(-1, *lengths) for name, values in kept.items()
    }
    names = _group_names(plan, groups)
    draw = _curves if len(across) == 1 else _maps
    figure = draw(plan, across, by_group, names)
    entitle(figure, f"{plan.case.title}: net power")
    return figure


def _group_names(plan: SweepPlan, groups: list[str]) -> list[tuple[str, bool]]:
    """Name of each combination of choices, and whether it is that of the case."""
    found = []
    for place in np.ndindex(*(len(plan.axes[path].values) for path in groups)):
        words, own = [], True
        for path, index in zip(groups, place, strict=True):
            axis = plan.axes[path]
            value = axis.values[index]
            words.append(axis.labels[index] if axis.labels else f"{path} = {display(value, DECLARATIONS[path])}")
            own = own and axis.values[index] == value_at(plan.case, path)
        found.append((", ".join(words), own))
    return found


def _as_drawn(path: str, values: Any) -> Any:
    _, factor, added = SHOWN.get(DECLARATIONS[path].kind, ("", 1.0, 0.0))
    return np.asarray(values, dtype=float) * factor + added


def _axis_label(path: str) -> str:
    declaration = DECLARATIONS[path]
    if declaration.form == "integer":
        return path
    return f"{path} [{SHOWN.get(declaration.kind, (unit_of(declaration.kind),))[0]}]"


def _limits_of(plan: SweepPlan, values: dict[str, FloatArray], group: int) -> Iterator[Limit]:
    """Limits of a combination of choices; a module brings its own."""
    case = plan.bases[group]
    for name, (result, sign) in _limits(plan).items():
        if isinstance(case, Case) and np.isfinite(limit := limit_of(case, name)):
            words = f"{name.replace('_', ' ')} {format_quantity(limit, DECLARATIONS[f'limits.{name}'].kind)}"
            yield Limit(words, limit, sign, values[result][group])


def _design(plan: SweepPlan, across: list[str]) -> tuple[list[float], float] | None:
    """Where the case itself lies within the axes, and its net power; None where it has no place or no answer."""
    place = [value_at(plan.case, path) for path in across]
    for path, each in zip(across, place, strict=True):
        if not isinstance(each, int | float) or not min(plan.axes[path].values) <= each <= max(plan.axes[path].values):
            return None
    net = float(search_batch(Batch(plan.case)).scalars["net_power"][0])
    drawn = [float(_as_drawn(path, each)) for path, each in zip(across, place, strict=True)]
    return (drawn, net) if np.isfinite(net) else None


def _curves(plan: SweepPlan, across: list[str], values: dict[str, FloatArray], names: list[tuple[str, bool]]) -> Figure:
    figure = new_figure(8.0, 4.4)
    axes = figure.subplots()
    places = _as_drawn(across[0], plan.axes[across[0]].values)
    order = np.argsort(places)
    for group, (name, _) in enumerate(names):
        net, colour = values["net_power"][group], COLOURS[group]
        beyond, broken = np.zeros(len(places), dtype=bool), []
        for limit in _limits_of(plan, values, group):
            over = limit.sign * limit.result > limit.sign * limit.value
            beyond |= over
            broken += [limit.label] if over.any() else []
            for crossing in _crossings(places[order], limit.result[order] - limit.value):
                axes.axvline(crossing, color=colour, linewidth=0.8, linestyle=":")
                axes.annotate(
                    limit.label, (crossing, 0.02), (2, 0), xycoords=("data", "axes fraction"),
                    textcoords="offset points", rotation=90, fontsize=7, color=colour,
                )  # fmt: skip
        axes.plot(places[order], net[order], color=colour, linestyle=STYLES[group], label=name or "net power")
        if beyond.any():
            axes.plot(places[beyond], net[beyond], "x", color=colour, markersize=4, label=_beyond(name, broken))
    if (point := _design(plan, across)) is not None:
        axes.plot(*point[0], point[1], "o", color="black", fillstyle="none", label="the case")
    axes.set(xlabel=_axis_label(across[0]), ylabel="net power [W]")
    axes.grid(color="0.85", linewidth=0.6)
    axes.legend(frameon=False, fontsize=8)
    return figure


def _beyond(name: str, limits: list[str]) -> str:
    words = f"beyond {', '.join(limits)}"
    return f"{name}, {words}" if name else words


def _crossings(places: FloatArray, excess: FloatArray) -> list[float]:
    """Where a result reaches its limit, by straight lines between neighbours."""
    below, above = excess[:-1], excess[1:]
    with np.errstate(all="ignore"):
        at = np.flatnonzero(np.isfinite(below) & np.isfinite(above) & (np.sign(below) != np.sign(above)))
    return [float(np.interp(0.0, *_rising(excess[[i, i + 1]], places[[i, i + 1]]))) for i in at]


def _rising(first: FloatArray, second: FloatArray) -> tuple[FloatArray, FloatArray]:
    order = np.argsort(first)
    return first[order], second[order]


def _maps(plan: SweepPlan, across: list[str], values: dict[str, FloatArray], names: list[tuple[str, bool]]) -> Figure:
    from matplotlib.ticker import MaxNLocator

    columns = min(len(names), 2)
    rows = -(-len(names) // columns)
    figure = new_figure(4.0 + 3.5 * columns, 1.0 + 3.6 * rows)
    panels = figure.subplots(rows, columns, squeeze=False).ravel()
    x, y = (_as_drawn(path, plan.axes[path].values) for path in across)
    x_order, y_order = np.argsort(x), np.argsort(y)

    def ordered(result: FloatArray) -> Any:
        return np.ma.masked_invalid(result[np.ix_(x_order, y_order)].T)

    net = values["net_power"]
    lowest, highest = float(np.nanmin(net)), float(np.nanmax(net))
    levels = MaxNLocator(LEVELS).tick_values(lowest, highest if highest > lowest else lowest + 1.0)
    point = _design(plan, across)
    filled: Any = None
    for axes, group, (name, own) in zip(panels, range(len(names)), names, strict=False):
        filled = axes.contourf(x[x_order], y[y_order], ordered(net[group]), levels, cmap="cividis")
        shown = []
        for limit, style in zip(_limits_of(plan, values, group), LIMIT_STYLES * 3, strict=False):
            excess = limit.sign * (ordered(limit.result) - limit.value)
            if excess.max() is np.ma.masked or excess.max() <= 0.0:
                continue
            axes.contourf(x[x_order], y[y_order], excess, [0.0, np.inf], colors="none", hatches=["///"])
            everywhere = excess.min() > 0.0
            if not everywhere:
                axes.contour(x[x_order], y[y_order], excess, [0.0], colors=VERMILION, linestyles=[style])
            label = f"beyond {limit.label} everywhere" if everywhere else limit.label
            shown += axes.plot([], [], color=VERMILION, linestyle="none" if everywhere else style, label=label)
        if point is not None and own:
            shown += axes.plot(*point[0], "o", color="white", markeredgecolor="black", label="the case")
        axes.set(xlabel=_axis_label(across[0]), ylabel=_axis_label(across[1]))
        axes.set_title(textwrap.fill(name, LETTERS_OF_TITLE // 2), fontsize=9, parse_math=False)
        if shown:
            axes.legend(handles=shown, fontsize=7, loc="best")
    for axes in panels[len(names) :]:
        axes.set_visible(False)
    figure.colorbar(filled, ax=list(panels[: len(names)]), label="net power [W]")
    return figure
