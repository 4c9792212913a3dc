"""The report of a design over a log of its streams, as text, the answer first."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import TYPE_CHECKING

from harvest.model.case import Case
from harvest.model.study_sections import DUTY_DRIVES
from harvest.quantities import KINDS, format_quantity, significant
from harvest.report.layout import WIDTH, heading, pairs, table, wrapped
from harvest.report.terminal import counted, title
from harvest.study.duty import NO_FLOW, STATES, YEAR
from harvest.study.duty_log import LONGEST_STEPS, NOTES
from harvest.study.limits import limit_path

if TYPE_CHECKING:
    from harvest.study.duty import DutyBalance, Extreme
    from harvest.study.duty_log import DutyLog

SHARES = (0.0, 0.05, 0.25, 0.5, 0.75, 0.95, 1.0)
MOST_NOTES = 5
"""Notes of one kind that the report tells one by one."""


def hours(time: float) -> str:
    """A time [s] in hours, or in minutes where it is short."""
    value = time / KINDS["duration"].units["h"]
    if 0 < value < 0.1:
        return f"{significant(time / KINDS['duration'].units['min'], 3)} min"
    return f"{value:,.0f} h" if value >= 1e4 else f"{significant(value, 4)} h"


def kilowatt_hours(energy: float) -> str:
    """An energy [J] in kilowatt-hours."""
    value = energy / KINDS["energy"].units["kWh"]
    return f"{value:,.0f} kWh" if abs(value) >= 1e4 else f"{significant(value, 4)} kWh"


def _w(value: float) -> str:
    return format_quantity(value, "power", 4) if math.isfinite(value) else "-"


def duty_report(case: Case, found: DutyBalance) -> str:
    """The report of a design over a log."""
    name = title(case)
    off = sum(found.time_off.values())
    odd = bool(found.log.notes)
    unanswered = sum(found.time_without_answer.values())
    lines = [
        name,
        "=" * min(len(name), WIDTH),
        "",
        wrapped(
            "",
            f"Net {kilowatt_hours(found.net_energy)} in {hours(found.answered_time)}, {_w(found.mean_net_power)} on "
            f"average; in a year {kilowatt_hours(found.yearly_net_energy)}{worth(case, found)}.",
        ),
        wrapped(
            "",
            f"On {hours(found.time_on)}, off {hours(off)}; no answer {hours(unanswered)}, not covered by the log "
            f"{hours(found.time_not_covered)}.",
        ),
        *([f"The log has {counted(len(found.log.notes), 'odd reading')}; what was done stands below."] * odd),
        heading("Energy"),
        *pairs(
            [
                ("generated", kilowatt_hours(found.generated_energy)),
                ("after converter", kilowatt_hours(found.converted_energy)),
                ("hot drive", kilowatt_hours(found.hot_drive_energy)),
                ("cold drive", kilowatt_hours(found.cold_drive_energy)),
                ("auxiliaries", kilowatt_hours(found.auxiliary_energy)),
                ("standby", kilowatt_hours(found.standby_energy)),
                ("net", kilowatt_hours(found.net_energy)),
            ]
        ),
        heading("Time"),
        wrapped("  ", f"on: {hours(found.time_on)}"),
        *(wrapped(f"  off {hours(time)}: ", reason) for reason, time in found.time_off.items()),
        *(wrapped(f"  no answer {hours(time)}: ", reason) for reason, time in found.time_without_answer.items()),
        *([f"  not covered by the log: {hours(found.time_not_covered)}"] if found.time_not_covered else []),
        heading("Net power against time"),
        *table([f"{100 * share:.0f} %" for share in SHARES], [[_w(_exceeded(found, share)) for share in SHARES]]),
        "  of the time with an answer at least this",
        heading("Highest while on"),
        *_extremes(found),
        heading("Limits"),
        *_limits(found),
        heading("Log"),
        *_log(found.log, found),
        heading("Rules"),
        *(wrapped("  ", rule) for rule in _rules(case, found)),
    ]
    return "\n".join(lines)


def worth(case: Case, found: DutyBalance) -> str:
    """What a year's energy is worth and when it has paid the stack, as the end of a sentence; "" without prices."""
    text = ""
    if math.isfinite(found.yearly_value):
        text += f", worth {significant(found.yearly_value, 4)} {found.currency}"
    if math.isfinite(found.payback_years) and case.cost is not None:
        text += (
            f"; it costs {found.building_cost:,.0f} {found.currency}, paid back in "
            f"{significant(found.payback_years, 3)} years"
        )
        text += " without interest" * (case.cost.discount_rate > 0)
        text += f", longer than the {case.cost.years:g} years of use" * (found.payback_years > case.cost.years)
    elif math.isinf(found.payback_years):
        text += f"; it costs {found.building_cost:,.0f} {found.currency} and is never paid back"
    return text


def _exceeded(found: DutyBalance, share: float) -> float:
    return float(found.net_power[round(share * (len(found.net_power) - 1))])


def _extremes(found: DutyBalance) -> list[str]:
    def said(extreme: Extreme | None, kind: str) -> str:
        if extreme is None:
            return "-"
        at = f" at {extreme.time}" if extreme.time else ""
        return f"{format_quantity(extreme.value, kind)}{at} (line {extreme.line})"

    return pairs(
        [
            ("net power", said(found.most_net_power, "power")),
            ("hot face", said(found.hottest_face_temperature, "temperature")),
            ("hot junction", said(found.hottest_junction_temperature, "temperature")),
        ]
    )


def _limits(found: DutyBalance) -> list[str]:
    kept = [limit_path(name) for name, time in found.time_beyond_limits.items() if not time]
    lines = [
        f"  {limit_path(name)}: beyond it for {hours(time)}" for name, time in found.time_beyond_limits.items() if time
    ]
    if kept:
        lines.append(wrapped("  ", f"kept all the time: {', '.join(kept)}"))
    return lines or ["  The case states none."]


def _log(log: DutyLog, found: DutyBalance) -> list[str]:
    step = "a table of bins" if log.is_bins else f"usual step {hours(log.usual_step)}"
    lines = [
        wrapped(
            "  ",
            f"{log.label}: {counted(len(log.lines), 'reading')}, {found.readings_used:,} used, "
            f"{found.conditions:,} different; {step}.",
        )
    ]
    if log.held_cells:
        lines.append(wrapped("  ", f"Empty cells that have the value before them: {log.held_cells:,}."))
    if log.ignored:
        lines.append(wrapped("  ", f"Columns that mean nothing here: {', '.join(log.ignored)}."))
    for kind, done in NOTES.items():
        notes = [note for note in log.notes if note.kind == kind]
        if notes:
            lines.append(wrapped("  ", f"{kind}, {counted(len(notes), 'time')}: {done}"))
            lines += [wrapped(f"    line {note.line}: ", note.text, rest="      ") for note in notes[:MOST_NOTES]]
            if len(notes) > MOST_NOTES:
                lines.append(f"    and {len(notes) - MOST_NOTES:,} more, the last on line {notes[-1].line}")
    return lines


def _rules(case: Case, found: DutyBalance) -> Iterable[str]:
    """What was assumed about time, drives and the year."""
    if not found.log.is_bins:
        given = case.duty.longest_hold
        longest = hours(LONGEST_STEPS * found.log.usual_step if given is None else given)
        yield (
            f"A reading, and the value before an empty cell, holds until the next one, {longest} at most; the last "
            "holds for the usual step."
        )
    yield (
        f"{DUTY_DRIVES[found.drives][0].upper()}{DUTY_DRIVES[found.drives][1:]}. The converter takes its standby power "
        "all the time."
    )
    stated = "site.yearly_operation" not in case.assumed
    flowing = found.answered_time - found.time_off.get(STATES[NO_FLOW], 0.0)
    if stated and not flowing:
        yield "The streams never flow together in this log, so that site.yearly_operation tells nothing of a year."
    source = "the time in which the streams flow" if stated and flowing else "the time with an answer"
    yield f"The year has {hours(found.yearly_time)} like {source}, {hours(found.yearly_from_time)}."
    if found.log.is_bins and found.covered_time > YEAR:
        yield f"The bins have {hours(found.covered_time)} together, more than a year: is that meant?"
