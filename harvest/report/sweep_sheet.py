"""What a sweep found, in a few lines and as JSON, and how far it is."""

from __future__ import annotations

import time
from typing import TYPE_CHECKING, Any

from harvest.model.case import DECLARATIONS, display
from harvest.quantities import format_quantity
from harvest.report.documents import plain
from harvest.report.layout import heading, wrapped
from harvest.report.tables import TEXT

if TYPE_CHECKING:
    from collections.abc import Callable

    from harvest.report.sweep_files import SweepFindings
    from harvest.report.tables import Table
    from harvest.study.sweep import SweepPlan


def axis_text(plan: SweepPlan, path: str) -> str:
    """What a field was given, in words."""
    axis, declaration = plan.axes[path], DECLARATIONS[path]
    if axis.labels:
        return ", ".join(axis.labels)
    ends = axis.between or (min(axis.values), max(axis.values))
    low, high = (display(float(end) if declaration.form != "integer" else int(end), declaration) for end in ends)
    return f"{low} to {high}, {'drawn between' if axis.between else f'{len(axis.values):,} values'}"


_WORDS = {
    False: ("there it is beyond a limit of the case", "within the limits of the case"),
    True: ("there a check fails", "without a failed check"),
}
"""What is said of combinations that are refused and of those that are kept, by whether all checks are made."""


def _best(plan: SweepPlan, name: str, best: dict[str, Any]) -> list[str]:
    """Net power of a row and where it lies."""
    lines = [f"{name}: {format_quantity(best['net_power'], 'power')} at"]
    for path, axis in plan.axes.items():
        value = best[path]
        lines.append(f"  {path} = {value if axis.labels else display(value, DECLARATIONS[path])}")
    return lines


def sweep_report(plan: SweepPlan, found: SweepFindings) -> str:
    """Counts, the combination with the most net power, and why others have no answer."""
    how = f"drawn by {plan.case.sweep.sequence} points" if plan.case.sweep and plan.sampled else "every one of the grid"
    lines = [
        f"{found.combinations:,} combinations, {how}; {found.valid:,} with an answer.",
        *(f"  {path}: {axis_text(plan, path)}" for path in plan.axes),
    ]
    if found.best:
        lines += ["", *_best(plan, "Most net power", found.best)]
        beyond, within = _WORDS[plan.full]
        within_too = found.best_within_limits
        if not within_too or any(within_too[path] != found.best[path] for path in plan.axes):
            lines.append(f"  {beyond}")
            if within_too:
                lines += ["", *_best(plan, f"Most net power {within}", within_too)]
        told = "the column failed_checks names what fails" if plan.full else "harvest estimate judges the other checks"
        count = f"{found.within_limits:,}" if found.within_limits else "None"
        lines += ["", f"{count} of {found.valid:,} combinations with an answer are {within}; {told}."]
    if found.reasons.sums:
        lines.append(heading("Without an answer"))
        lines += [wrapped(f"  {count:,}: ", text, rest="      ") for text, count in found.reasons.sums.items()]
    return "\n".join(lines)


def sweep_document(plan: SweepPlan, table: Table, found: SweepFindings, output: str | None) -> dict[str, Any]:
    """The same as a document, with the columns of the table."""
    document: dict[str, Any] = plain(
        {
            "output": output,
            "combinations": found.combinations,
            "valid": found.valid,
            "within_limits": found.within_limits,
            "reasons": found.reasons.sums,
            "best": found.best or None,
            "best_within_limits": found.best_within_limits or None,
            "columns": [
                {"name": column.name, "header": column.header, "meaning": column.meaning, "form": column.form}
                for column in table.columns
            ],
            "units": {column.name: column.unit for column in table.columns if column.form != TEXT and column.unit},
        }
    )
    return {**document, **{name: table.about[name] for name in ("title", "source", "case_hash", "command", "run")}}


def progress_teller(plan: SweepPlan, write: Callable[[str, bool], None]) -> Callable[[int, int], None]:
    """Make what tells the combinations done, the rate and the time left; `write` takes a line and if it is last."""
    begun: list[tuple[float, int]] = []

    def tell(done: int, chunks: int) -> None:
        combinations = min(done * plan.chunk_cases, plan.count)
        begun.append((time.monotonic(), combinations)) if not begun else None
        seconds, here = time.monotonic() - begun[0][0], combinations - begun[0][1]
        line = f"{combinations:,} of {plan.count:,} combinations"
        if here and seconds:
            rate = here / seconds
            line += f", {rate:,.0f} a second, {_duration((plan.count - combinations) / rate)} left"
        write(f"\r{line:78}", done == chunks)

    return tell


def _duration(seconds: float) -> str:
    if seconds < 90:
        return f"{seconds:.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 5400 else f"{seconds / 3600:.1f} h"
