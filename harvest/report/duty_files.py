"""The table of a duty: one row for each reading of the log, whether it counts or not."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from harvest.model.case import DECLARATIONS, Case
from harvest.model.results import OF_SEARCHES, SCALARS
from harvest.quantities import unit_of
from harvest.report.tables import FLAG, TEXT, WHOLE, Column, Table, write_table
from harvest.study.duty import STATES, DutyBalance

RESULTS: dict[str, Any] = {
    **SCALARS,
    **OF_SEARCHES,
    "auxiliary_power": {"kind": "power", "meaning": "Power of the auxiliaries."},
    "standby_power": {"kind": "power", "meaning": "Power that the converter takes always."},
}
"""Kind and meaning of each result."""


def duty_table(case: Case, found: DutyBalance, command: str = "") -> tuple[Table, dict[str, Any]]:
    """Table of a duty and its columns: time, inputs, results, whether there is an answer, and why not."""
    log, rows = found.log, found.rows
    columns: dict[Column, Any] = {
        Column("line", "Line of the log.", form=WHOLE): log.lines,
        Column("time", "Time from which the reading holds.", form=TEXT): np.array(
            [log.stamp(reading) for reading in range(len(log.lines))], dtype=object
        ),
        Column("duration", "Time for which the reading holds.", "s"): log.duration,
    }
    for path, values in log.values.items():
        columns[Column(path, DECLARATIONS[path].meaning, unit_of(DECLARATIONS[path].kind))] = values
    columns[Column("state", "What the reading means for the stack.", form=TEXT)] = np.array(STATES, dtype=object)[
        rows.state
    ]
    for name, values in rows.results.items():
        columns[Column(name, RESULTS[name]["meaning"], unit_of(RESULTS[name]["kind"]))] = values
    columns[Column("valid", "Whether the reading has an answer.", form=FLAG)] = rows.problem == ""
    columns[Column("problem", "Why the reading has no answer.", form=TEXT)] = rows.problem
    about = {
        "title": case.title,
        "source": f"harvest {found.version}",
        "case_hash": found.case_hash,
        "log": log.label,
        "command": command,
    }
    named = {column.name: values for column, values in columns.items()}
    return Table(tuple(columns), len(log.lines), about, index="reading"), named


def write_duty(path: Path, case: Case, found: DutyBalance, command: str) -> None:
    """Write the table of a duty in the format of the suffix; raises InputError where that cannot be."""
    write_table(path, *duty_table(case, found, command))
