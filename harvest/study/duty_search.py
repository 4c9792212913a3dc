"""A sizing over a log: few conditions that stand for it, and what each choice gives over them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from harvest.errors import NoAnswerError
from harvest.model.batch import Batch, StreamBatch
from harvest.model.case import Case
from harvest.model.costs import costs
from harvest.model.design import Faults, stream_fluid
from harvest.model.search import Outcomes
from harvest.physics.arrays import BoolArray, FloatArray, IntArray, ObjectArray
from harvest.study.duty import NO_ANSWER, ON, Course, duty_year, logged_batch, switched_answers
from harvest.study.duty_log import DutyLog
from harvest.study.limits import LIMITS, bounded_results

MOST_BINS = 32
"""Conditions that stand for a longer log in a search; its extremes are added."""
CASES_TOGETHER = 100_000
"""Choices times bins that are kept at a time."""
MEANS = ("generated_power", "converted_power", "hot_drive_power", "cold_drive_power", "net_power")


@dataclass(frozen=True, eq=False)
class DutyMeasure:
    """What choices are measured by over a log.

    `values` in SI by field and `standing` sides of the bins, `share` of the time of each, zero where it only stands for
    an extreme that limits must bear; `year` [s] is what a mean power is multiplied by for a year's energy.
    """

    base: Case
    values: Mapping[str, FloatArray]
    standing: Mapping[str, BoolArray]
    share: FloatArray
    year: float

    @classmethod
    def of(cls, case: Case, log: DutyLog) -> DutyMeasure:
        """Bins of a log; conditions outside what the fluids are served for are left out, as no choice has an answer.

        Raises NoAnswerError where none is left.
        """
        course = Course.of(log)
        if not len(course.duration):
            raise NoAnswerError(log.without_reading)
        batch, standing = logged_batch(case, course.values)
        still = standing["hot"] | standing["cold"]
        problem = fluid_problem(batch)
        kept = np.flatnonzero(still | (problem == ""))
        if not len(kept):
            raise NoAnswerError(f"no reading of the log has an answer\n{problem[0]}")
        time, flowing = course.duration[kept], ~still[kept]
        columns = np.array([batch.number(path)[kept] for path in course.values])
        bins, share = binned(columns, time, standing["hot"][kept] + 2 * standing["cold"][kept])
        answered = float(time.sum())
        return cls(
            base=batch.base,
            values={path: bins[0][row] for row, path in enumerate(course.values)},
            standing={"hot": bins[1] % 2 == 1, "cold": bins[1] >= 2},
            share=share,
            year=duty_year(case, answered, answered, float(time[flowing].sum()))["yearly_net_energy"],
        )

    def search(self, batch: Batch) -> Outcomes:
        """Mean powers over the log of each choice, and the worst of each bounded result while it is on, (cases,).

        A choice without an answer in one bin has none at all.
        """
        step = max(1, CASES_TOGETHER // len(self.share))
        parts = [
            self._part(batch.take(np.arange(first, min(first + step, batch.cases))))
            for first in range(0, batch.cases, step)
        ]
        return Outcomes(
            {name: np.concatenate([part.scalars[name] for part in parts]) for name in parts[0].scalars},
            np.concatenate([part.problem for part in parts]),
        )

    def _part(self, batch: Batch) -> Outcomes:
        choices, bins = batch.cases, len(self.share)
        varied = {
            **{path: np.repeat(each, bins) for path, each in batch.varied.items()},
            **{path: np.tile(each, choices) for path, each in self.values.items()},
        }
        standing = {side: np.tile(each, choices) for side, each in self.standing.items()}
        answer = switched_answers(Batch(batch.base, choices * bins, varied), standing)
        results = {name: each.reshape(choices, bins) for name, each in answer.results.items()}
        state, problem = answer.state.reshape(choices, bins), answer.problem.reshape(choices, bins)
        on = state == ON
        means = {name: (results[name] * self.share).sum(axis=1) for name in MEANS}
        peaks = {name: np.where(on, results[name], 0.0).max(axis=1) for name in MEANS}
        # [cost] counts with the time in which the streams flow; a log may be scaled by another
        yearly = means["net_power"] * self.year / batch.base.site.yearly_operation
        priced = costs(batch, {**peaks, "net_power": yearly})
        with np.errstate(divide="ignore", invalid="ignore"):
            priced["cost_per_net_watt"] = priced["building_cost"] / np.maximum(means["net_power"], 0.0)
        worst = {name: _worst(batch.base, name, results[name], on) for name in bounded_results(batch.base)}
        lost = state == NO_ANSWER
        first: ObjectArray = problem[np.arange(choices), np.argmax(lost, axis=1)]
        return Outcomes({**means, **priced, **worst}, np.where(lost.any(axis=1), first, ""))


def fluid_problem(batch: StreamBatch) -> ObjectArray:
    """Why no design can answer the streams of a batch, "" where one may, (cases,)."""
    faults = Faults(batch.cases)
    for side in ("hot", "cold"):
        if getattr(batch.base, side).fluid != "reservoir":
            stream_fluid(batch, side, faults)
    return faults.text


def _worst(case: Case, name: str, values: FloatArray, on: BoolArray) -> FloatArray:
    """Value of a bounded result that is nearest to its limit, or furthest beyond, NaN where never on; (choices,)."""
    highest, lowest = np.where(on, values, -np.inf).max(axis=1), np.where(on, values, np.inf).min(axis=1)
    if name == "voltage":
        window = case.electrical.converter_window
        above = window is not None and highest > window[1]
        worst = np.where(above, highest, lowest)
    else:
        signs = {sign for result, sign in LIMITS.values() if result == name}
        worst = lowest if -1.0 in signs else highest
    return np.where(on.any(axis=1), worst, np.nan)


def binned(columns: FloatArray, time: FloatArray, kind: IntArray) -> tuple[tuple[FloatArray, IntArray], FloatArray]:
    """Few conditions that stand for many: their values (columns, bins) and kind, and the share of time of each.

    Parameters: `columns` (columns, conditions); `time` of each; `kind`, of which the zeros are told apart by their
    values and others only by their kind. The part with the largest variance times time is divided at its mean, along
    the column that varies most in units of its standard deviation, until there are `MOST_BINS`; a bin has the means of
    its part. Extremes of each column are added without time. Few conditions are kept as they are.
    """
    share = time / time.sum()
    if len(time) <= MOST_BINS:
        return (columns, kind), share
    middle = (columns * share).sum(axis=1, keepdims=True)
    deviation = np.sqrt(((columns - middle) ** 2 * share).sum(axis=1, keepdims=True))
    scaled = (columns - middle) / np.where(deviation > 0, deviation, 1.0)
    parts = [np.flatnonzero(kind == each) for each in np.unique(kind)]

    def spread(part: IntArray) -> FloatArray:
        if kind[part[0]] != 0:
            return np.zeros(len(columns))
        weight = share[part]
        mean = (scaled[:, part] * weight).sum(axis=1, keepdims=True) / weight.sum()
        return np.asarray(((scaled[:, part] - mean) ** 2 * weight).sum(axis=1))

    spreads = [spread(part) for part in parts]
    while len(parts) < MOST_BINS:
        place = int(np.argmax([each.max() for each in spreads]))
        if spreads[place].max() <= 0:
            break
        part, row = parts[place], int(np.argmax(spreads[place]))
        mean = (scaled[row, part] * share[part]).sum() / share[part].sum()
        halves = [part[scaled[row, part] <= mean], part[scaled[row, part] > mean]]
        if not all(map(len, halves)):
            break
        parts[place : place + 1] = halves
        spreads[place : place + 1] = map(spread, halves)
    flowing = np.flatnonzero(kind == 0)
    ends = (
        np.unique([flowing[np.argmax(sign * row[flowing])] for row in columns for sign in (1, -1)])
        if len(flowing)
        else flowing
    )
    values = [(columns[:, part] * share[part]).sum(axis=1) / share[part].sum() for part in parts]
    bins = np.column_stack([*values, columns[:, ends]])
    kinds = np.concatenate([[kind[part[0]] for part in parts], kind[ends]]).astype(np.int64)
    return (bins, kinds), np.concatenate([[share[part].sum() for part in parts], np.zeros(len(ends))])
