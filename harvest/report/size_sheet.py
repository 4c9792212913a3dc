"""The report of a sizing, the answer first."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.case import DECLARATIONS, Case, display
from harvest.model.study_sections import OBJECTIVES
from harvest.quantities import format_quantity
from harvest.report.cost_sheet import cost_sentence
from harvest.report.layout import WIDTH, heading, table, wrapped
from harvest.report.terminal import stack_sentence, title, verdict

if TYPE_CHECKING:
    from harvest.study.size import Arrangement, BindingLimit, CostFront, Sizing

MOST_LINES = 14
BAR = 16
MANY_MODULES = 1000


def _w(value: float) -> str:
    return format_quantity(value, "power", 4) if math.isfinite(value) else "-"


def _by_fields(found: Arrangement) -> str:
    words = [f"{path} {display(value, DECLARATIONS[path])}" for path, value in found.fields.items()]
    return f", {', '.join(words)}" if words else ""


def _arranged(found: Arrangement) -> str:
    """Say one choice in a few words."""
    return (
        f"{found.module_count:,} modules, {found.rows_count} rows x {found.columns_count} columns x "
        f"{found.layers_count} layers{_by_fields(found)}"
    )


def _shown(count: int, wanted: list[int]) -> list[int]:
    """Some places of a long table, its ends and the wanted ones among them."""
    spread = np.linspace(0, count - 1, min(count, MOST_LINES)).round().astype(int).tolist()
    return sorted({*spread, *wanted})


def _curve(found: Sizing) -> list[str]:
    curve = found.curve
    marked = {
        count: mark
        for count, mark in (
            (found.fewest_within_5_percent, "fewest within 5 %"),
            (found.fewest_within_1_percent, "fewest within 1 %"),
            (found.worthwhile.module_count if found.worthwhile else None, "last worth its place"),
            (found.arrangement.module_count, "best"),
        )
        if count is not None
    }
    wanted = [int(np.searchsorted(curve.module_count, count)) for count in marked]
    highest = max(float(curve.net_power.max()), 0.0)
    rows = []
    for i in _shown(len(curve.module_count), wanted):
        share = max(float(curve.net_power[i]), 0.0) / highest if highest else 0.0
        rows.append(
            (
                f"{curve.module_count[i]:,}",
                f"{curve.rows_count[i]} x {curve.columns_count[i]} x {curve.layers_count[i]}",
                _w(curve.generated_power[i]),
                _w(curve.drive_power[i]),
                _w(curve.net_power[i]),
                _w(curve.marginal_power[i]),
                f"{'#' * round(BAR * share):{BAR}}  {marked.get(int(curve.module_count[i]), ''):17}",
            )
        )
    header = ("modules", "arrangement", "generated", "drives", "net", "per module", "")
    return [heading("Best arrangement at each number of modules"), *table(header, rows)]


def _flatness(found: Sizing) -> list[str]:
    lines = []
    if found.fewest_within_1_percent is not None:
        lines.append(
            f"{found.fewest_within_1_percent:,} modules come within 1 % of the most net power, "
            f"{found.fewest_within_5_percent:,} within 5 %."
        )
    lines.append(f"The last module of the best adds {_w(found.last_module_power)}.")
    worth = found.least_net_watts_per_module
    if worth is not None:
        lines.append(
            f"Below {_w(worth)} a module is not worth its place: the sensible design has "
            f"{_arranged(found.worthwhile)}, with {_w(found.worthwhile.net_power)} net."
            if found.worthwhile is not None
            else f"No module is worth {_w(worth)} here."
        )
    elif found.arrangement.module_count >= MANY_MODULES:
        lines.append(
            "That many modules are best only where modules cost nothing; state what one must bring by "
            "size.least_net_watts_per_module, or prices in [cost]."
        )
    return [wrapped("", " ".join(lines))]


def _limit(found: BindingLimit) -> str:
    name = found.limit if " " in found.limit else f"limits.{found.limit}"
    change = "more" if found.net_power_gain >= 0 else "less"
    return wrapped(
        f"  {name}: ",
        f"without it {_arranged(found.without)}, {_w(found.without.net_power)} net, "
        f"{_w(abs(found.net_power_gain))} {change}",
        rest="      ",
    )


def _front(front: CostFront, currency: str) -> list[str]:
    rows = [
        (
            f"{front.building_cost[i]:,.0f}",
            _w(front.net_power[i]),
            f"{front.building_cost[i] / front.net_power[i]:.4g}" if front.net_power[i] > 0 else "-",
            f"{front.module_count[i]:,}",
            f"{front.rows_count[i]} x {front.columns_count[i]} x {front.layers_count[i]}",
        )
        for i in _shown(len(front.building_cost), [])
    ]
    head = f"cost [{currency or 'currency'}]"
    return [
        heading("Net power against cost: nothing is both cheaper and stronger"),
        *table((head, "net", "cost per watt", "modules", "rows x columns x layers"), rows),
    ]


def size_report(case: Case, found: Sizing) -> str:
    """The report of a sizing."""
    name = title(case)
    lines = [
        name,
        "=" * min(len(name), WIDTH),
        "",
        wrapped("", f"Best for {OBJECTIVES[found.objective].partition(';')[0]}: {_arranged(found.arrangement)}."),
        f"Net power {_w(found.best.net_power)} of {_w(found.best.generated_power)} generated.",
        *([wrapped("", cost_sentence(case, found.best))] if case.cost is not None else []),
        *_flatness(found),
        wrapped("", stack_sentence(found.best_case, found.best) + "."),
        wrapped("", verdict(found.best)),
    ]
    if found.net_power_without_window is not None:
        lines.append(
            wrapped(
                "Note: ",
                f"the converter's window holds the voltage at {format_quantity(found.best.voltage, 'voltage')}; "
                f"without it this design would give {_w(found.net_power_without_window)} net. Try other wiring by "
                '"electrical.strings_across" and "electrical.layers_in_series" in [size].',
            )
        )
    for each in found.at_bounds:
        lines.append(
            wrapped(
                "Note: ",
                f"the best lies at the {each.end} {each.field} that was tried, "
                f"{display(each.value, DECLARATIONS[each.field])}; a wider search may find a better one.",
            )
        )
    lines += _curve(found)
    if found.front is not None:
        lines += _front(found.front, found.best.currency)
    lines.append(heading("Limits"))
    lines += [_limit(each) for each in found.binding_limits]
    if found.limits_together is not None:
        lines.append(_limit(found.limits_together))
    if not found.binding_limits and found.limits_together is None:
        lines.append("  None keeps the best from being better.")
    lines.append(heading("Choices"))
    refined = f", and {found.choices_refined:,} more around the best" if found.choices_refined else ""
    lines.append(f"  {found.choices_tried:,} tried{refined}")
    lines += [f"  {count:,} beyond limits.{name}" for name, count in found.choices_beyond_limits.items()]
    lines += [wrapped(f"  {count:,} without an answer: ", text) for text, count in found.choices_invalid.items()]
    return "\n".join(lines)
