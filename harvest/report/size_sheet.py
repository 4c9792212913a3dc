"""The report of a sizing, the answer first."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.case import DECLARATIONS, Case, display
from harvest.model.checks import SHOCK_VOLTAGE
from harvest.model.study_sections import OBJECTIVES
from harvest.quantities import format_quantity, significant
from harvest.report.cost_sheet import cost_sentence
from harvest.report.duty_sheet import hours, kilowatt_hours, worth
from harvest.report.layout import WIDTH, heading, table, wrapped
from harvest.report.terminal import counted, stack_sentence, title, verdict
from harvest.study.limits import limit_path
from harvest.study.wirings import own_wiring

if TYPE_CHECKING:
    from collections.abc import Mapping

    from harvest.model.results import Estimate
    from harvest.physics.arrays import FloatArray
    from harvest.study.size import Arrangement, AtBound, BindingLimit, CostFront, SizedDuty, Sizing
    from harvest.study.wirings import Wiring

MOST_LINES = 14
BAR = 16
MANY_MODULES = 1000
ROW_BLOCKS = "electrical.row_blocks"
WITHOUT_LOAD = "hot face without load"
"""Check of a hot face when the load is lost, which a search looks at only where it has a limit of its own."""
WORTH_TELLING = 0.001
"""Share of the net power from which another wiring, or a wider window, is worth a sentence."""


def _w(value: float) -> str:
    return format_quantity(value, "power", 4) if math.isfinite(value) else "-"


def _by_fields(found: Arrangement) -> str:
    words = [f"{path} {display(value, DECLARATIONS[path])}" for path, value in found.fields.items()]
    return f", {', '.join(words)}" if words else ""


def _arranged(found: Arrangement) -> str:
    """Say one choice in a few words."""
    return (
        f"{counted(found.module_count, 'module')}, {counted(found.rows_count, 'row')} x "
        f"{counted(found.columns_count, 'column')} x {counted(found.layers_count, 'layer')}{_by_fields(found)}"
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
    header = ("modules", "arrangement", "generated", "drives", "net", "a module adds", "")
    return [heading("Best arrangement at each number of modules"), *table(header, rows), *_varied(curve.fields)]


def _varied(fields: Mapping[str, FloatArray]) -> list[str]:
    """Say what else differs between the lines of a table."""
    return [wrapped("  ", f"Each has its own {' and '.join(fields)}, told by --json.")] if fields else []


def _flatness(found: Sizing) -> list[str]:
    lines = []
    if found.fewest_within_1_percent is not None:
        lines.append(
            f"{_fewest(found.fewest_arrangement_within_1_percent)} come within 1 % of the most net power, "
            f"{_fewest(found.fewest_arrangement_within_5_percent)} within 5 %."
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
    elif found.objective == "net power" and found.arrangement.module_count >= MANY_MODULES:
        priced = (
            'or take size.objective = "cost per kilowatt-hour".' if found.front is not None else "or prices in [cost]."
        )
        lines.append(
            "That many modules are best only where modules cost nothing; state what one must bring by "
            f"size.least_net_watts_per_module, {priced}"
        )
    return [wrapped("", " ".join(lines))]


def _fewest(found: Arrangement | None) -> str:
    """Say the fewest modules with how they stand."""
    assert found is not None
    return f"{found.module_count:,} modules ({found.rows_count} x {found.columns_count} x {found.layers_count})"


def _at_bounds(found: tuple[AtBound, ...]) -> list[str]:
    """Say at which ends of what was tried the best lies."""
    ends = [
        f"the {each.end} {each.field}, {display(each.value, DECLARATIONS[each.field])}"
        for each in found
        if each.field != ROW_BLOCKS
    ]
    notes = [f"the best lies at {'; '.join(ends)}; a wider search may find a better one."] if ends else []
    return notes + [
        f"the best has {each.value:g} row blocks, the most that are tried; more may be better: list more in "
        'electrical.row_blocks, with size.wiring = "as given".'
        for each in found
        if each.field == ROW_BLOCKS
    ]


def _beyond_without_load(best: Estimate) -> list[str]:
    """Say how to keep a sizing from what only the checks look at."""
    if not any(check.name == WITHOUT_LOAD and check.status == "fail" for check in best.checks):
        return []
    return [
        "limits.hot_face_temperature_without_load keeps a sizing below a hot face temperature when the load is lost."
    ]


def _limit(found: BindingLimit) -> str:
    name = found.limit if " " in found.limit else limit_path(found.limit)
    change = "more" if found.net_power_gain >= 0 else "less"
    return wrapped(
        f"  {name}: ",
        f"without it {_arranged(found.without)}, {_w(found.without.net_power)} net, "
        f"{_w(abs(found.net_power_gain))} {change}",
        rest="      ",
    )


def _blocks(wiring: Wiring) -> str:
    lengths = wiring.row_blocks
    return "1" if len(lengths) == 1 else f"{len(lengths)}: {'+'.join(map(str, lengths))}"


def _in_series(wiring: Wiring) -> str:
    least, most = wiring.modules_in_series
    return f"{most}" if least == most else f"{least} or {most}"


def _v(value: float) -> str:
    return format_quantity(value, "voltage") if math.isfinite(value) else "-"


def _wirings(case: Case, found: Sizing) -> list[str]:
    """What other groupings of the best design's modules would give, one for each number of row blocks."""
    own = own_wiring(found.best_case, found.wirings)
    usable = [each for each in found.wirings if not each.problem]
    first: dict[int, Wiring] = {}
    for each in usable:
        first.setdefault(len(each.row_blocks), each)
    shown = [*first.values()] + [own] * (own not in first.values())
    window = case.electrical.converter_window
    header = ("strings", "in series", "across", "layers", "row blocks", "at load", "no load", "net", "lost", "")
    rows = [
        (
            f"{each.strings:,}",
            _in_series(each),
            f"{each.strings_across}",
            f"{each.layers_in_series}",
            _blocks(each),
            _v(each.voltage),
            _v(each.open_circuit_voltage),
            _w(each.net_power),
            f"{100 * each.loss:.1f} %" if math.isfinite(each.loss) else "-",
            ("chosen" if case.size is not None and case.size.wiring == "search" else "as given") * (each is own)
            + (f"  {each.problem}" if each.problem else ""),
        )
        for each in shown
    ]
    text = (
        f"{len(usable)} of {len(found.wirings)} groupings keep to every limit"
        + (f" with a converter from {_v(window[0])} to {_v(window[1])}" if window else "")
        + "; the best with each number of row blocks is told. Lost is what it generates less than every row with a "
        "load of its own." + (" All at the case's own streams, not over the log." if found.duty is not None else "")
    )
    lines = [heading("Wiring of the best design"), wrapped("  ", text), *table(header, rows)]
    if found.net_power_without_window is not None:
        lines.append(
            wrapped(
                "  ",
                f"The converter's window holds the voltage at {_v(own.voltage)}; without it this wiring would give "
                f"{_w(found.net_power_without_window)} net.",
            )
        )
    highest = window[1] if window else math.inf
    if own.open_circuit_voltage > highest and case.limits.maximum_open_circuit_voltage is None:
        lines.append(
            wrapped(
                "  ",
                f"Without load it stands at {_v(own.open_circuit_voltage)}, above the converter's {_v(highest)}; "
                "limits.maximum_open_circuit_voltage keeps a sizing below a voltage.",
            )
        )
    safe = min(SHOCK_VOLTAGE, highest)
    safer = next((each for each in usable if each.open_circuit_voltage <= safe), None)
    if own.open_circuit_voltage > safe and safer is not None and _gives_as_much(safer, own):
        lines.append(
            wrapped(
                "  ",
                f"{counted(safer.strings, 'string')} of {_in_series(safer)} in series (across "
                f"{safer.strings_across}, layers {safer.layers_in_series}, row blocks {_blocks(safer)}) give "
                f"{_w(safer.net_power)} too and stand at {_v(safer.open_circuit_voltage)} without load.",
            )
        )
    if usable and usable[0].net_power - own.net_power > WORTH_TELLING * abs(own.net_power):
        lines.append(wrapped("  ", 'Another wiring gives more: try size.wiring = "search".'))
    return lines


def _gives_as_much(one: Wiring, other: Wiring) -> bool:
    """Whether a wiring gives another's net power but for what is not worth telling."""
    return one.net_power >= other.net_power - WORTH_TELLING * abs(other.net_power)


def _front(front: CostFront, currency: str) -> list[str]:
    rows = [
        (
            f"{front.building_cost[i]:,.0f}",
            _w(front.net_power[i]),
            significant(front.building_cost[i] / front.net_power[i], 4),
            f"{front.module_count[i]:,}",
            f"{front.rows_count[i]} x {front.columns_count[i]} x {front.layers_count[i]}",
        )
        for i in _shown(len(front.building_cost), [])
    ]
    head = f"cost [{currency or 'currency'}]"
    return [
        heading("Net power against cost: nothing is both cheaper and stronger"),
        *table((head, "net", "cost per watt", "modules", "rows x columns x layers"), rows),
        *_varied(front.fields),
    ]


def _at_its_streams(case: Case, found: Sizing) -> list[str]:
    """Net power and costs of the best at the streams of the case."""
    return [
        f"Net power {_w(found.best.net_power)} of {_w(found.best.generated_power)} generated.",
        *([wrapped("", cost_sentence(case, found.best))] if case.cost is not None else []),
    ]


def _over_log(case: Case, found: SizedDuty) -> str:
    """What the best gives over the log."""
    balance = found.balance
    off = sum(balance.time_off.values())
    return (
        f"Net {kilowatt_hours(balance.yearly_net_energy)} in a year{worth(case, balance)}. The log gives "
        f"{kilowatt_hours(balance.net_energy)} in {hours(balance.answered_time)} ({balance.log.label}), of which "
        f"it is off for {hours(off)}. Powers of arrangements below are means over the log; the wiring and the checks "
        "are told at the case's own streams."
    )


def _is_loss(found: SizedDuty) -> bool:
    return found.balance.net_energy <= 0


def _bins(found: SizedDuty) -> str:
    """How the log was searched."""
    if found.bins == found.conditions:
        return f"Every choice was answered in each of the log's {found.conditions:,} conditions."
    mean = found.balance.mean_net_power
    apart = abs(found.binned_net_power / mean - 1.0) if mean else 0.0
    finalists = "best was" if found.finalists == 1 else f"{found.finalists} best were"
    return (
        f"The search took {found.bins} bins for the log's {found.conditions:,} conditions, and the {finalists} "
        f"answered in each of them: the bins gave {_w(found.binned_net_power)} on average and the log gives "
        f"{_w(mean)}, {100 * apart:.2g} % apart."
    )


def size_report(case: Case, found: Sizing) -> str:
    """The report of a sizing."""
    name = title(case)
    lines = [
        name,
        "=" * min(len(name), WIDTH),
        "",
        wrapped("", f"Best for {OBJECTIVES[found.objective].partition(';')[0]}: {_arranged(found.arrangement)}."),
        *(
            _at_its_streams(case, found)
            if found.duty is None
            else [
                wrapped("", _over_log(case, found.duty)),
                *(["Not worth it: no choice gives more over the log than it takes."] * _is_loss(found.duty)),
                wrapped("", _bins(found.duty)),
            ]
        ),
        *_flatness(found),
        wrapped("", stack_sentence(found.best_case, found.best) + "."),
        wrapped("", verdict(found.best)),
    ]
    lines += [wrapped("Note: ", text) for text in (*_at_bounds(found.at_bounds), *_beyond_without_load(found.best))]
    lines += _curve(found)
    if found.front is not None and len(found.front.net_power):
        lines += _front(found.front, found.best.currency)
    if found.wirings:
        lines += _wirings(case, found)
    lines.append(heading("Limits"))
    lines += [_limit(each) for each in found.binding_limits]
    if found.limits_together is not None:
        lines.append(_limit(found.limits_together))
    if not found.binding_limits and found.limits_together is None:
        lines.append("  None keeps the best from being better.")
    lines.append(heading("Choices"))
    refined = f", and {found.choices_refined:,} more around the best" if found.choices_refined else ""
    wired = ", each wiring counted" if found.wiring == "search" else ""
    lines.append(f"  {found.choices_tried:,} tried{wired}{refined}")
    if found.choices_beyond_limits:
        lines.append(f"  {found.choices_within_limits:,} of those tried keep to every limit; one may break several")
    lines += [f"  {count:,} beyond {limit_path(name)}" for name, count in found.choices_beyond_limits.items()]
    lines += [wrapped(f"  {count:,} without an answer: ", text) for text, count in found.choices_invalid.items()]
    return "\n".join(lines)
