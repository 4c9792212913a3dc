"""A log of the streams over time: read, put in order, how long each reading holds, and what was done with bad ones."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np

from harvest.errors import CaseError
from harvest.model.case import DECLARATIONS, Case, display, limits_text
from harvest.model.case_fields import Declaration
from harvest.physics.arrays import BoolArray, FloatArray, IntArray, ObjectArray
from harvest.study.measurement_table import TEXT, MeasurementTable, read_measurement_table
from harvest.study.time_stamps import may_be_changed, read_time_stamps, stamp_text

LARGEST_LOG = 2**27
MOST_READINGS = 1_200_000
"""Two years of minutes."""
LONGEST_STEPS = 3.0
"""Usual steps for which a reading may hold at most, unless the case says how long."""
HOUR = 3600.0
LONGEST_TIME = 1e6 * HOUR
"""More than a century; a longer one is a slip of the unit or of the decimals."""
MOST_SAID = 20
"""Notes of one kind that are told one by one; the others are counted."""

FLOWS = tuple(f"{side}.{flow}" for side in ("hot", "cold") for flow in ("mass_flow", "volume_flow", "fuel_flow"))
"""Fields that may be zero in a log: the stream stands."""
SIDES = ("hot.", "cold.", "site.", "electrical.")
FIXED = ("site.ambient_pressure", "electrical.blocking_diode_drop")
"""Numbers that a case is made of when it is read, so that they are the same in every reading."""
INSTEAD = {
    "ambient_pressure": ", and log the absolute hot.pressure and cold.pressure",
    "standard_volume_flow": ", and log the mass_flow",
}
"""What to log in place of such fields, by the last part of their names."""

NOTES = {
    "unreadable": "left out",
    "out of range": "left out",
    "incomplete": "left out",
    "same time": "left out, the first counts",
    "out of order": "put in its place by its time",
    "repeated hour": "left out, as the clock's zone is not known; state duty.time_zone, and it counts",
    "clock changed": "counted in real time",
    "clock perhaps changed": "counted as the clock shows; state duty.time_zone, and the time is the real one",
    "long gap": "not covered beyond one usual step",
    "no value": "its time is not covered",
}
"""Kinds of notes on a log, with what is done."""
HARMLESS = ("clock changed",)


class LogNote(NamedTuple):
    """What is odd about a reading, on which line, of which kind of `NOTES`."""

    line: int
    kind: str
    text: str

    @property
    def sentence(self) -> str:
        """What is odd, and what was done."""
        return f"{self.text}: {NOTES[self.kind]}"


@dataclass(frozen=True, eq=False)
class DutyLog:
    """Readings of a log in the order of its lines, (readings,) each.

    `values` in SI by field; `duration` [s] for which each holds, 0 where it is left out; `time` [s] since 1970 or
    since the log's own zero, NaN in a table of bins; `offset` [s] of the clock from UTC, NaN where not known.
    `problem` says why a reading is left out or its time not covered, `used` whether it counts. `gap_time` [s] lies
    beyond what the readings hold, `held_cells` were empty and have the value before.
    """

    label: str
    lines: IntArray
    time: FloatArray
    offset: FloatArray
    duration: FloatArray
    values: dict[str, FloatArray]
    problem: ObjectArray
    notes: tuple[LogNote, ...]
    ignored: tuple[str, ...]
    gap_time: float
    usual_step: float
    held_cells: int
    is_stamped: bool

    def stamp(self, reading: int) -> str:
        """Time of a reading as text, "" where it has none."""
        if self.is_stamped:
            return stamp_text(float(self.time[reading]), float(self.offset[reading]))
        return "" if np.isnan(self.time[reading]) else f"{self.time[reading] / HOUR:.6g} h"

    @property
    def without_reading(self) -> str:
        """Why nothing can be answered where no reading is left."""
        notes = [f"{self.label}:{note.line}: {note.sentence}" for note in self.notes]
        said = f"{self.label}: no reading is left that has a value of every column and lasts a time"
        return "\n".join([said, *_shortened(notes)])

    @property
    def is_bins(self) -> bool:
        """Whether it is a table of conditions with their hours, in no order."""
        return not np.isfinite(self.usual_step)

    @property
    def used(self) -> BoolArray:
        """Readings that have a value of every column, (readings,)."""
        return np.asarray(self.problem == "")


def logged_fields() -> dict[str, Declaration]:
    """Fields that a log may give, by path: numbers of the two streams, the surroundings and the load."""
    return {
        path: declaration
        for path, declaration in DECLARATIONS.items()
        if declaration.form == "quantity"
        and path.startswith(SIDES)
        and ".duct." not in path
        and not declaration.descriptive
        and path not in FIXED
    }


def read_duty_log(case: Case, source: str | Path, *, strict: bool = False) -> DutyLog:
    """Read a log, a CSV file or the text of one, of fields of `case` against time.

    Columns are named by the fields, with their units: `hot.inlet_temperature [degC]`. One column gives the time: `time`
    with ISO 8601 stamps, `time [h]`, or `hours [h]` in a table of bins. A reading holds until the next one, the last
    for the usual (median) step; an empty cell keeps the column's last value; neither longer than `duty.longest_hold`.
    A flow of zero is a stream that stands. With `strict` every note on the log is a fault.
    Raises CaseError for the file as a whole, InputError for an unknown time zone.
    """
    fields = logged_fields()
    columns = {"time": (TEXT, "duration"), "hours": ("duration",), **{p: (d.kind,) for p, d in fields.items()}}
    table = read_measurement_table(
        source, columns, (), MOST_READINGS, largest=LARGEST_LOG, ambient_pressure=case.site.ambient_pressure
    )
    _raise_header_faults(table)
    reading = _Reading(case, table)
    for fault in table.faulty:
        reading.leave_out(fault.reading, "unreadable", fault.text)
    reading.judge_ranges({path: fields[path] for path in table.values if path in fields})
    log = reading.bins() if "hours" in table.kinds else reading.course()
    if strict and (bad := [note for note in log.notes if note.kind not in HARMLESS]):
        raise CaseError(reading.said(bad))
    return log


def _raise_header_faults(table: MeasurementTable) -> None:
    """Refuse a log without time or without a field, or with fields that do not change over time."""
    fixed = [name for name in (each.partition("[")[0].strip() for each in table.ignored) if name in DECLARATIONS]
    if fixed:
        said = "cannot change in a log; leave the column out"
        raise CaseError([f"{table.label}: {name}: {said}{INSTEAD.get(name.partition('.')[2], '')}" for name in fixed])
    times = [name for name in ("time", "hours") if name in table.kinds]
    if len(times) != 1:
        said = "missing; write time, time [h], or hours [h] in a table of bins" if not times else "stands beside hours"
        raise CaseError([f"{table.label}: time: {said}"])
    for side in ("hot", "cold"):
        several = [path for path in FLOWS if path in table.kinds and path.startswith(side)]
        if len(several) > 1:
            raise CaseError([f"{table.label}: {' and '.join(several)} are one flow; leave one column of them"])
    if len(table.kinds) < 2:
        raise CaseError(
            [
                f"{table.label}: no column is a field of the case that may change; write for example "
                f"hot.inlet_temperature [degC]; may change: {', '.join(logged_fields())}"
            ]
        )


def _shortened(said: list[str]) -> list[str]:
    more = [f"and {len(said) - MOST_SAID} more like these"] if len(said) > MOST_SAID else []
    return [*said[:MOST_SAID], *more]


def usual_step(time: FloatArray) -> float:
    """Median step [s] between the different times of a log, whether their readings are good or not."""
    steps = np.diff(np.unique(time[np.isfinite(time)]))
    return float(np.median(steps)) if len(steps) else np.nan


class _Reading:
    """A log on its way from the table: what is left out, and why."""

    def __init__(self, case: Case, table: MeasurementTable) -> None:
        self.case, self.table = case, table
        self.values = {path: values.copy() for path, values in table.values.items() if path not in ("time", "hours")}
        self.problem: ObjectArray = np.full(len(table.lines), "", dtype=object)
        self.notes: list[LogNote] = []

    def note(self, reading: int, kind: str, text: str) -> None:
        self.notes.append(LogNote(int(self.table.lines[reading]), kind, text))

    def leave_out(self, reading: int, kind: str, text: str) -> None:
        self.note(reading, kind, text)
        self.problem[reading] = self.problem[reading] or text

    def said(self, notes: Sequence[LogNote]) -> list[str]:
        """Notes as faults, the first of them; decimal commas are one, with what to do about them."""
        commas = {fault.text for fault in self.table.faulty if fault.is_comma}
        others = [f"{self.table.label}:{note.line}: {note.text}" for note in notes if note.text not in commas]
        return _shortened([*(self.table.cell_faults[:1] if commas else []), *others])

    def judge_ranges(self, fields: dict[str, Declaration]) -> None:
        """Leave out readings with a number that its field cannot have; a flow may be zero."""
        for path, declaration in fields.items():
            numbers = self.values[path]
            low, high = declaration.minimum, declaration.maximum
            wrong = (numbers < (-np.inf if low is None else low)) | (numbers > (np.inf if high is None else high))
            if declaration.above is not None:
                wrong |= numbers < declaration.above
                wrong |= (numbers == declaration.above) & (path not in FLOWS)
            allowed = limits_text(declaration)
            if path in FLOWS:
                allowed = f"0 where the stream stands, or {allowed}"
            for reading in np.flatnonzero(wrong).tolist():
                if self.problem[reading].startswith(path):
                    continue
                shown = display(float(numbers[reading]), declaration)
                self.leave_out(reading, "out of range", f"{path}: {shown} is not possible; give {allowed}")

    def bins(self) -> DutyLog:
        """A table of conditions with their hours."""
        hours = self.table.values["hours"]
        for name, numbers in {"hours": hours, **self.values}.items():
            for reading in np.flatnonzero(np.isnan(numbers) & (self.problem == "")).tolist():
                self.leave_out(reading, "incomplete", f"{name}: empty; a bin needs every value")
        for reading in np.flatnonzero(hours < 0).tolist():
            self.leave_out(reading, "out of range", f"hours: {hours[reading] / HOUR:g} h is below zero")
        for reading in np.flatnonzero(hours > LONGEST_TIME).tolist():
            said = f"hours: {hours[reading] / HOUR:g} h is more than {LONGEST_TIME / HOUR:,.0f} h"
            self.leave_out(reading, "out of range", said)
        duration = np.where(self.problem == "", hours, 0.0)
        nothing = np.full(len(hours), np.nan)
        lost = float(np.nansum(np.where((self.problem == "") | (hours > LONGEST_TIME), 0.0, np.maximum(hours, 0.0))))
        return self.log(nothing, nothing, duration, lost)

    def course(self) -> DutyLog:
        """Readings at times, put in order."""
        stamped = self.table.kinds["time"] == TEXT
        if stamped:
            read = read_time_stamps(self.table.texts["time"], self.case.duty.time_zone)
            for reading, text in read.faults:
                if not self.problem[reading]:
                    self.leave_out(reading, "unreadable", text)
            time, offset, repeated = read.seconds, read.offset, read.repeated
        else:
            time = self.table.values["time"].copy()
            for reading in np.flatnonzero(np.abs(time) > LONGEST_TIME).tolist():
                said = f"time: {time[reading] / HOUR:g} h is beyond {LONGEST_TIME / HOUR:,.0f} h"
                self.leave_out(reading, "out of range", said)
                time[reading] = np.nan
            offset, repeated = np.full(len(time), np.nan), np.zeros(len(time), dtype=bool)
        for reading in np.flatnonzero(np.isnan(time) & (self.problem == "")).tolist():
            self.leave_out(reading, "unreadable", "time: empty")
        order = self.in_order(time, stamped and bool(np.isnan(offset).all()))
        if len(order) < 2:
            raise CaseError(
                [
                    f"{self.table.label}: {len(order)} of its readings can be used and have a time of their own; at "
                    "least two are needed, or hours [h] in a table of bins",
                    *self.said(self.notes),
                ]
            )
        steps = np.diff(time[order])
        usual = usual_step(time)
        given = self.case.duty.longest_hold
        longest = LONGEST_STEPS * usual if given is None else given
        self.judge_clock(time, offset, repeated, order, usual, stamped)
        held = self.hold_cells(time, order, longest)
        duration = np.zeros(len(time))
        gaps = np.flatnonzero(steps > longest * (1.0 + 1e-9))
        holds = np.append(steps, min(usual, longest))
        holds[gaps] = min(usual, longest)
        duration[order] = holds
        for place in gaps.tolist():
            said = f"the next reading is {steps[place] / HOUR:.6g} h later"
            self.note(int(order[place]), "long gap", said)
        gap_time = float((steps[gaps] - holds[gaps]).sum())
        return self.log(time, offset, duration, gap_time, usual_step=usual, held_cells=held, is_stamped=stamped)

    def in_order(self, time: FloatArray, is_clock: bool) -> IntArray:
        """Readings that count, in the order of their times; none stands at the time of another."""
        used = np.flatnonzero(self.problem == "")
        if len(used) > 1 and np.median(np.diff(time[used])) < 0:
            self.note(int(used[0]), "out of order", "time: the log runs backwards")
            used = used[::-1]
        if is_clock:
            self.leave_out_repeated_hours(time, used)
            used = used[self.problem[used] == ""]
        late = time[used] < np.maximum.accumulate(time[used])
        for reading in used[late].tolist():
            self.note(reading, "out of order", "time: earlier than a reading before it")
        order: IntArray = used[np.argsort(time[used], kind="stable")]
        again = np.diff(time[order], prepend=-np.inf) == 0
        firsts = np.maximum.accumulate(np.where(again, 0, np.arange(len(order))))
        for place in np.flatnonzero(again).tolist():
            line = self.table.lines[order[firsts[place]]]
            self.leave_out(int(order[place]), "same time", f"time: the same as on line {line}")
        return np.asarray(order[~again])

    def leave_out_repeated_hours(self, time: FloatArray, used: IntArray) -> None:
        """Leave out what a clock of unknown zone shows again where it seems to be put back by an hour."""
        clock = time[used]
        usual = usual_step(time)
        if not usual <= HOUR:
            return
        back = np.abs(np.diff(clock) - (usual - HOUR)) < 1.0
        for place in np.flatnonzero(back & may_be_changed(clock[1:])).tolist():
            after = place + 1 + np.flatnonzero(clock[place + 1 :] > clock[place])
            end = int(after[0]) if len(after) else len(clock)
            for reading in used[place + 1 : end].tolist():
                said = "time: the clock shows this hour again, as at the end of daylight-saving time"
                self.leave_out(reading, "repeated hour", said)

    def judge_clock(
        self, time: FloatArray, offset: FloatArray, repeated: BoolArray, order: IntArray, usual: float, stamped: bool
    ) -> None:
        """Note where the clock was changed, or seems to have been."""
        if not stamped:
            return
        clock = offset[order]
        known = np.isfinite(clock[:-1]) & np.isfinite(clock[1:])
        for place in np.flatnonzero(known & (np.diff(clock) != 0)).tolist():
            change = clock[place + 1] - clock[place]
            ahead = "forward" if change > 0 else "back"
            twice = " and shows an hour again" if repeated[order[place + 1]] and change < 0 else ""
            said = f"the clock was put {ahead} by {abs(change) / HOUR:g} h{twice}"
            self.note(int(order[place + 1]), "clock changed", said)
        if known.any():
            return
        every, first = np.unique(time, return_index=True)
        longer = (np.abs(np.diff(every) - usual - HOUR) < 1.0) & (usual <= HOUR) & may_be_changed(every[1:])
        for place in np.flatnonzero(longer).tolist():
            said = "a step longer by an hour, as at the start of daylight-saving time"
            self.note(int(first[place + 1]), "clock perhaps changed", said)

    def hold_cells(self, time: FloatArray, order: IntArray, longest: float) -> int:
        """Give empty cells the last value of their column, for a time; returns how many."""
        held = 0
        places = np.arange(len(order))
        for path, numbers in self.values.items():
            column = numbers[order]
            last = np.maximum.accumulate(np.where(np.isfinite(column), places, -1))
            age = time[order] - time[order][last]
            stale = (last < 0) | (age > longest * (1.0 + 1e-9))
            empty = np.isnan(column)
            held += int((empty & ~stale).sum())
            numbers[order] = np.where(stale, np.nan, column[last])
            for place in np.flatnonzero(empty & stale).tolist():
                said = f"{path}: empty, and no value before" if last[place] < 0 else f"{path}: empty for too long"
                self.leave_out(int(order[place]), "no value", said)
        return held

    def log(self, time: FloatArray, offset: FloatArray, duration: FloatArray, gap_time: float, **more: Any) -> DutyLog:
        """The log as it was read; what is not given in `more` is that of a table of bins."""
        return DutyLog(
            label=self.table.label,
            lines=self.table.lines,
            time=time,
            offset=offset,
            duration=duration,
            values=self.values,
            problem=self.problem,
            notes=tuple(sorted(self.notes)),
            ignored=self.table.ignored,
            gap_time=gap_time,
            **{"usual_step": np.nan, "held_cells": 0, "is_stamped": False, **more},
        )
