"""What can go wrong with a design, for a person."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from harvest.model.case import Case
from harvest.quantities import format_quantity
from harvest.report.layout import heading, pairs, table, wrapped
from harvest.report.terminal import title

if TYPE_CHECKING:
    from harvest.study.what_if import Expansion, FailedModule, Fouling, PartLoads, Standstill, WhatIf

MOST_SHOWN = 8
ALIKE = 1e-3
FAILURES = {
    "open": ("One module broken (open): its string carries nothing, the others go on", "broken"),
    "shorted": ("One module shorted: its string goes on without it", "shorted"),
}


def _q(value: float, kind: str, digits: int = 3) -> str:
    return format_quantity(value, kind, digits) if math.isfinite(value) else "-"


def _t(kelvin: float) -> str:
    return f"{round(kelvin - 273.15, 1) + 0.0:.1f} degC" if math.isfinite(kelvin) else "-"


def _percent(share: float) -> str:
    return f"{100 * share:.2f} %" if math.isfinite(share) else "-"


def _failure(found: FailedModule) -> list[str]:
    shown = np.unique(np.linspace(0, len(found.row) - 1, MOST_SHOWN).round().astype(int))
    rows = [
        (
            f"{found.row[i]}",
            _q(found.power_lost[i], "power"),
            _percent(found.share_lost[i]),
            _percent(found.share_lost_at_fixed_temperatures[i]),
            _q(found.voltage[i], "voltage"),
            _q(found.string_current[i], "current"),
            _q(found.other_current[i], "current"),
            f"{found.hot_junction_rise[i]:.1f} K",
        )
        for i in shown
    ]
    head, word = FAILURES[found.kind]
    lines = [
        heading(head),
        *table(("row", "lost", "share", "network", "bus", "its string", "others", "hot junction"), rows),
    ]
    lost = found.power_lost
    if not np.isfinite(lost).any():
        return lines
    worst, best = int(np.nanargmax(lost)), int(np.nanargmin(lost))
    if lost[worst] - lost[best] <= ALIKE * lost[worst]:
        return [*lines, wrapped("  ", f"A module {word} costs the same in every row.")]
    text = (
        f"Worst is a module {word} in row {found.row[worst]}, {_q(lost[worst], 'power')} "
        f"({_percent(found.share_lost[worst])}); best in row {found.row[best]}, {_q(lost[best], 'power')} "
        f"({_percent(found.share_lost[best])})."
    )
    return [*lines, wrapped("  ", text)]


def _fouling(found: Fouling | None) -> list[str]:
    if found is None:
        return []
    shown = np.unique(np.linspace(0, len(found.time) - 1, MOST_SHOWN).round().astype(int))
    rows = [
        (
            f"{found.time[i] / 3600:.0f} h",
            _q(found.hot_fouling[i], "areal thermal resistance"),
            _q(found.cold_fouling[i], "areal thermal resistance"),
            _q(found.net_power[i], "power"),
        )
        for i in shown
    ]
    end = found.time[-1] / 3600
    lost = [
        (
            f"{100 * loss:.0f} % of net power lost",
            f"after {hours:.0f} h" if math.isfinite(hours) else f"not within {end:.0f} h",
        )
        for loss, hours in zip(found.losses, found.hours, strict=True)
    ]
    if not found.net_power[0] > 0:
        lost = [("net power", "none to lose: not above zero with clean surfaces")]
    return [
        heading("Fouling from clean surfaces on"),
        *table(("time", "hot fouling", "cold fouling", "net power"), rows),
        *pairs(lost),
        wrapped("  ", f"{found.law}. Narrowed passages and their pressure drop are left out."),
    ]


def _part_loads(found: PartLoads) -> list[str]:
    lines = [heading("Less of the hot stream, and its dew points at the wall")]
    loads = range(len(found.flow_share))
    rows = [
        (
            f"{100 * found.flow_share[i]:.0f} %",
            f"{100 * found.temperature_share[i]:.0f} %",
            _t(found.hot_inlet_temperature[i]),
            _t(found.hot_outlet_temperature[i]),
            _q(found.net_power[i], "power"),
            _t(found.gas_wall_temperature[0, i]),
            _t(found.gas_wall_temperature[-1, i]),
            _t(found.water_dew_point[i]),
            f"{found.wet_rows[i]:.0f}" if math.isfinite(found.water_dew_point[i]) else "-",
            _t(found.acid_dew_point[i]),
            f"{found.acid_rows[i]:.0f}" if math.isfinite(found.acid_dew_point[i]) else "-",
        )
        for i in loads
        if found.problem[i] == ""
    ]
    header = ("flow", "warmth", "in", "out", "net", "first wall", "last wall", "water dew", "rows", "acid dew", "rows")
    lines += table(header, rows)
    lines += [
        wrapped("  ", f"{100 * found.flow_share[i]:.0f} % has no answer: {found.problem[i]}")
        for i in loads
        if found.problem[i] != ""
    ]
    return [
        *lines,
        wrapped("  ", "Walls as the hot stream wets them, first and last row; rows: how many lie below the dew point."),
        wrapped(
            "  ",
            "warmth: the hot inlet's excess over the surroundings, an input, no result; unless asked with --part-load "
            "it is invented: of an engine's shape for a gas, held for a liquid.",
        ),
    ]


def _standstill(found: tuple[Standstill, ...]) -> list[str]:
    if not found:
        return []
    lines = []
    for each in found:
        margin = each.coldest_ambient - each.freezing
        words = f"{margin:.0f} K of margin" if margin > 0 else "it freezes: drain it, warm it or take more glycol"
        lines.append(
            (
                f"{each.side} side",
                f"{each.fluid} freezes at {_t(each.freezing)}; surroundings at {_t(each.coldest_ambient)}: {words}",
            )
        )
    return [heading("At standstill"), *pairs(lines)]


def _expansion(found: Expansion) -> list[str]:
    return [
        heading("Expansion and clamping"),
        *pairs(
            [
                ("hot plates", f"{found.hot_plate}, {_t(found.hot_temperature)} on average"),
                ("cold plates", f"{found.cold_plate}, {_t(found.cold_temperature)} on average"),
                ("along the flow", f"hot plates outgrow cold ones by {1e3 * found.along:.2f} mm from assembly on"),
                ("across", f"by {1e3 * found.across:.2f} mm; coefficients from memory"),
                (
                    "clamping",
                    f"{_q(found.clamping_force_of_module, 'force')} on a module, "
                    f"{_q(found.clamping_force_of_layer, 'force')} on a layer",
                ),
            ]
        ),
    ]


def what_if_report(case: Case, found: WhatIf) -> str:
    """The report of what can go wrong, each with its number."""
    answer = found.estimate
    top = title(case)
    coolant = next(check for check in answer.checks if check.name == "hot face without coolant")
    boiling = [check.text for check in answer.checks if check.name == "cold boiling without flow"]
    lines = [
        top,
        "=" * len(top),
        "",
        f"What can go wrong, against a largest power of {_q(found.healthy_power, 'power', 4)}.",
        heading("Load or coolant lost"),
        *pairs(
            [
                (
                    "load",
                    f"hottest face {_t(answer.hottest_face_temperature)}, without current "
                    f"{_t(answer.open_circuit_face_temperature)}; "
                    f"terminals at {_q(answer.open_circuit_voltage, 'voltage')}",
                ),
                ("coolant", " ".join([coolant.text, *boiling])),
            ]
        ),
        *_failure(found.opened),
        *_failure(found.shorted),
        wrapped(
            "  ",
            "At the load of largest power after the failure. share: temperatures settled; network: temperatures held; "
            "hot junction: the most that one of the string rises. Where several modules of the string stand in a row, "
            "they are taken to share their temperatures, and so the warmth of a shorted one, which flatters the share: "
            "the truth then lies nearer to the network's.",
        ),
        *_fouling(found.fouling),
        *_part_loads(found.part_loads),
        *_standstill(found.standstill),
        *_expansion(found.expansion),
    ]
    return "\n".join(lines)
