"""What a design gives over a log of its streams: energy, hours on and off, the worst temperatures, a year's worth."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from harvest.errors import InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import Case, case_hash
from harvest.model.costs import building_cost
from harvest.model.reading import replace
from harvest.model.search import SEARCH_CELLS, drive_power_without_heat, search_batch
from harvest.model.study_sections import ALWAYS_ON
from harvest.physics.arrays import BoolArray, FloatArray, IntArray, ObjectArray
from harvest.study.duty_log import FLOWS, DutyLog, read_duty_log
from harvest.study.limits import asks_without_load, bounded_results, broken_limits
from harvest.study.reasons import Reasons
from harvest.version import VERSION

YEAR = 8760.0 * 3600.0
NO_POWER = 1e-9
"""What is left of a solution without current [W]."""
CURVE_POINTS = 101

ON, NO_FLOW, NOT_HOTTER, NOT_WORTH_IT, NO_ANSWER, NOT_COVERED = range(6)
STATES = (
    "on",
    "a stream stands",
    "the hot stream is not hotter than the cold one",
    "the stack gives nothing, or less than its drives would take",
    "no answer",
    "not covered by the log",
)
"""What a reading means for the stack, in the order of the constants above."""
OFF = (NO_FLOW, NOT_HOTTER, NOT_WORTH_IT)

POWERS = (
    "generated_power",
    "converted_power",
    "hot_drive_power",
    "cold_drive_power",
    "auxiliary_power",
    "standby_power",
    "net_power",
)
CONDITIONS = (
    "hottest_face_temperature",
    "hottest_junction_temperature",
    "warmest_cold_face_temperature",
    "hot_outlet_temperature",
    "cold_outlet_temperature",
    "hot_pressure_drop",
    "cold_pressure_drop",
)
"""Results that are told of each reading while the stack is on."""

Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Extreme:
    """A value that is the highest of the log, with the line and the time of the first reading that has it."""

    value: float
    line: int
    time: str


@dataclass(frozen=True, eq=False)
class DutyRows:
    """What each reading gives, (readings,): `state` by its place in `STATES`, `results` in SI by name, NaN without."""

    state: IntArray
    results: dict[str, FloatArray]
    problem: ObjectArray


@dataclass(frozen=True)
class DutyBalance:
    """What a design gives over a log; energies [J] and times [s] in SI.

    `time_on` and `time_off`, by reason, have an answer, `time_without_answer` has none, by reason, and
    `time_not_covered` lies in gaps of the log; the energies are of the first two. `net_power` [W] is exceeded for
    `exceeded_share` of the time with an answer. `yearly_net_energy` scales the net energy from `yearly_from_time` to
    `yearly_time`.
    """

    drives: str
    covered_time: float
    time_on: float
    time_off: dict[str, float]
    time_without_answer: dict[str, float]
    time_not_covered: float
    generated_energy: float
    converted_energy: float
    hot_drive_energy: float
    cold_drive_energy: float
    auxiliary_energy: float
    standby_energy: float
    net_energy: float
    mean_net_power: float
    exceeded_share: FloatArray
    net_power: FloatArray
    most_net_power: Extreme | None
    hottest_face_temperature: Extreme | None
    hottest_junction_temperature: Extreme | None
    time_beyond_limits: dict[str, float]
    yearly_net_energy: float
    yearly_time: float
    yearly_from_time: float
    yearly_value: float
    building_cost: float
    payback_years: float
    currency: str
    readings: int
    readings_used: int
    conditions: int
    version: str
    case_hash: str
    log: DutyLog = field(compare=False, repr=False)
    rows: DutyRows = field(compare=False, repr=False)

    @property
    def answered_time(self) -> float:
        """Time with an answer, on or off [s]."""
        return self.time_on + sum(self.time_off.values())


def duty(
    case: Case, log: DutyLog | str | Path | None = None, *, strict: bool = False, progress: Progress | None = None
) -> DutyBalance:
    """Answer a design at every reading of a log and add up.

    Parameters: `case`, whose section [duty] says what the drives do; `log`, a CSV file, the text of one, or what
    `read_duty_log` gave, by default the case's own; `strict`, refuse a log with bad readings; `progress`, called with
    conditions solved and conditions in all. Raises InputError and CaseError for the log, NoAnswerError where no reading
    has an answer.
    """
    log = case_log(case, log, strict=strict)
    course = Course.of(log)
    if not len(course.duration):
        raise NoAnswerError(log.without_reading)
    return _balance(case, log, course, answers(case, course.values, progress))


def case_log(case: Case, log: DutyLog | str | Path | None = None, *, strict: bool = False) -> DutyLog:
    """A log as it was given, read where it is a file or text; by default the one that the case names."""
    if isinstance(log, DutyLog):
        return log
    if log is None and case.duty.log is None:
        raise InputError('duty.log: is missing; write [duty] and log = "log.csv", or give the log beside the case')
    return read_duty_log(case, log or case.folder / str(case.duty.log), strict=strict)


@dataclass(frozen=True, eq=False)
class Course:
    """The distinct conditions of a log, in an order that does not depend on the log's.

    `values` in SI by field, (conditions,); `duration` [s] of each; `of_reading` (readings,), -1 where one is not used;
    `first` (conditions,) the first reading of each.
    """

    values: dict[str, FloatArray]
    duration: FloatArray
    of_reading: IntArray
    first: IntArray

    @classmethod
    def of(cls, log: DutyLog) -> Course:
        """Conditions of the readings that are used."""
        used = np.flatnonzero(log.used & (log.duration > 0))
        of_reading = np.full(len(log.lines), -1)
        if not len(used):
            nothing = np.empty(0, dtype=np.int64)
            return cls({path: np.empty(0) for path in log.values}, np.empty(0), of_reading, nothing)
        columns = [values[used] for values in log.values.values()]
        order = np.lexsort((log.duration[used], *columns))
        fresh = np.zeros(len(used), dtype=bool)
        fresh[0] = True
        for column in columns:
            fresh[1:] |= np.diff(column[order]) != 0
        starts = np.flatnonzero(fresh)
        of_reading[used[order]] = np.cumsum(fresh) - 1
        return cls(
            {path: values[used][order[starts]] for path, values in log.values.items()},
            np.add.reduceat(log.duration[used][order], starts),
            of_reading,
            np.minimum.reduceat(used[order], starts),
        )


@dataclass(frozen=True, eq=False)
class Answers:
    """What a design gives at conditions, (conditions,) each: `results` in SI by name, NaN where there is no answer.

    `state` by its place in `STATES`; `problem` says why there is no answer. Temperatures and pressures are those while
    the stack is on.
    """

    results: dict[str, FloatArray]
    state: IntArray
    problem: ObjectArray


def answers(case: Case, values: Mapping[str, FloatArray], progress: Progress | None = None) -> Answers:
    """Answer a design at conditions and switch its drives as the case says.

    Parameters: `case`; `values` in SI by field, (conditions,), where a flow of zero is a stream that stands.
    """
    return switched_answers(*logged_batch(case, values), progress)


def switched_answers(batch: Batch, standing: Mapping[str, BoolArray], progress: Progress | None = None) -> Answers:
    """Answer a batch and switch its drives as its base says.

    Parameters: `batch`, with some flow above zero where a side is `standing` (cases,), by "hot" and "cold".
    """
    base = batch.base
    still = standing["hot"] | standing["cold"]
    colder = ~still & (batch.number("hot.inlet_temperature") <= batch.number("cold.inlet_temperature"))
    always = base.duty.drives == ALWAYS_ON
    without_load = asks_without_load(base)
    state = np.where(still, NO_FLOW, np.where(colder, NOT_HOTTER, ON))
    found = {name: np.zeros(batch.cases) for name in {*POWERS, *CONDITIONS, *bounded_results(base)}}
    problem: ObjectArray = np.full(batch.cases, "", dtype=object)
    solved = np.flatnonzero(~still & (~colder | always))
    chunk = max(1, int(SEARCH_CELLS / (batch.number("stack.rows").max() * base.stack.segments)))
    for first in range(0, len(solved), chunk):
        which = solved[first : first + chunk]
        answer = search_batch(batch.take(which), without_load=without_load)
        problem[which] = answer.problem
        for name in found.keys() & answer.scalars.keys():
            found[name][which] = answer.scalars[name]
        if progress is not None:
            progress(first + len(which), len(solved))
    if always:
        for side, other in (("hot", "cold"), ("cold", "hot")):
            which = np.flatnonzero(standing[other] & ~standing[side])
            if len(which):
                found[f"{side}_drive_power"][which], problem[which] = drive_power_without_heat(batch.take(which), side)
    state = np.where(problem == "", state, NO_ANSWER)
    return Answers(_switched(batch, found, state, always), state, problem)


def logged_batch(case: Case, values: Mapping[str, FloatArray]) -> tuple[Batch, dict[str, BoolArray]]:
    """Batch of conditions with the log's fields in place of their alternatives, and where each side stands.

    Where a stream stands the batch has some other flow, so that nothing is asked of a flow of zero.
    """
    typical = {path: float(numbers.max()) if path in FLOWS else float(numbers[0]) for path, numbers in values.items()}
    typical = {path: number if number > 0 or path not in FLOWS else 1.0 for path, number in typical.items()}
    base = replace(case, typical)
    flowing = {
        path: np.where(numbers > 0, numbers, typical[path]) if path in FLOWS else numbers
        for path, numbers in values.items()
    }
    batch = Batch(base, len(next(iter(values.values()))), flowing)
    return batch, {side: _stands(values, side, batch.cases) for side in ("hot", "cold")}


def _stands(values: Mapping[str, FloatArray], side: str, count: int) -> BoolArray:
    """Where a flow of a side is zero, (conditions,)."""
    stands = np.zeros(count, dtype=bool)
    for path in values.keys() & set(FLOWS):
        if path.startswith(side):
            stands |= values[path] == 0
    return stands


def _switched(batch: Batch, found: dict[str, FloatArray], state: IntArray, always: bool) -> dict[str, FloatArray]:
    """Results with everything off where the stack is off; `state` becomes so where the stack is not worth its drives.

    Auxiliaries go with the drives; the converter takes its standby power always. Below its window it is off.
    """
    standby = batch.number("electrical.converter_standby_power", 0.0)
    auxiliary = batch.number("electrical.auxiliary_power", 0.0)
    drives = found["hot_drive_power"] + found["cold_drive_power"] + auxiliary
    nothing = found["converted_power"] <= NO_POWER
    if not always:
        state[(state == ON) & (nothing | (found["converted_power"] < drives))] = NOT_WORTH_IT
    elif batch.base.electrical.converter_window is not None:
        state[(state == ON) & nothing] = NOT_WORTH_IT
    on = state == ON
    results = {name: np.where(on, numbers, np.nan) for name, numbers in found.items()}
    for name in ("generated_power", "converted_power"):
        results[name] = np.where(on, found[name], 0.0)
    for name, power in (
        ("hot_drive_power", found["hot_drive_power"]),
        ("cold_drive_power", found["cold_drive_power"]),
        ("auxiliary_power", auxiliary),
    ):
        results[name] = np.where(on | always, power, 0.0)
    results["standby_power"] = standby
    taken = results["hot_drive_power"] + results["cold_drive_power"] + results["auxiliary_power"] + standby
    results["net_power"] = np.where(on, found["net_power"], results["converted_power"] - taken)
    return {name: np.where(state == NO_ANSWER, np.nan, numbers) for name, numbers in results.items()}


def _balance(case: Case, log: DutyLog, course: Course, answer: Answers) -> DutyBalance:
    """Add up what a design gives."""
    time, results, state = course.duration, answer.results, answer.state
    told = state != NO_ANSWER
    on = state == ON
    if not told.any():
        raise NoAnswerError("\n".join(["no reading of the log has an answer", *grouped_time(answer.problem, time)]))
    energy = {name: float((results[name] * time)[told].sum()) for name in POWERS}
    answered = float(time[told].sum())
    shares = np.linspace(0.0, 1.0, CURVE_POINTS)

    def extreme(name: str) -> Extreme | None:
        if not on.any():
            return None
        place = int(np.argmax(np.where(on, results[name], -np.inf)))
        reading = int(course.first[place])
        return Extreme(float(results[name][place]), int(log.lines[reading]), log.stamp(reading))

    year = duty_year(case, energy["net_power"], answered, float(time[told & (state != NO_FLOW)].sum()))
    return DutyBalance(
        drives=case.duty.drives,
        covered_time=float(time.sum()),
        time_on=float(time[on].sum()),
        time_off={STATES[each]: float(time[state == each].sum()) for each in OFF if (state == each).any()},
        time_without_answer=grouped_time(answer.problem, time),
        time_not_covered=log.gap_time + float(log.duration[~log.used].sum()),
        generated_energy=energy["generated_power"],
        converted_energy=energy["converted_power"],
        hot_drive_energy=energy["hot_drive_power"],
        cold_drive_energy=energy["cold_drive_power"],
        auxiliary_energy=energy["auxiliary_power"],
        standby_energy=energy["standby_power"],
        net_energy=energy["net_power"],
        mean_net_power=energy["net_power"] / answered,
        exceeded_share=shares,
        net_power=exceeded(results["net_power"][told], time[told], shares),
        most_net_power=extreme("net_power"),
        hottest_face_temperature=extreme("hottest_face_temperature"),
        hottest_junction_temperature=extreme("hottest_junction_temperature"),
        time_beyond_limits={
            name: float(time[on & wrong].sum()) for name, wrong in broken_limits(case, results).items()
        },
        yearly_net_energy=year["yearly_net_energy"],
        yearly_time=year["yearly_time"],
        yearly_from_time=year["yearly_from_time"],
        **_prices(case, {name: np.where(on, results[name], 0.0).max(keepdims=True) for name in POWERS}, year),
        readings=len(log.lines),
        readings_used=int((course.of_reading >= 0).sum()),
        conditions=len(time),
        version=VERSION,
        case_hash=case_hash(case),
        log=log,
        rows=_rows(log, course, answer),
    )


def exceeded(power: FloatArray, time: FloatArray, shares: FloatArray) -> FloatArray:
    """Power that is exceeded or just given for a share of the time, (shares,): a duration curve, falling.

    Parameters: `power` and the `time` at each, (conditions,); `shares` from 0, where it is the most, to 1.
    """
    order = np.argsort(-power, kind="stable")
    passed = np.cumsum(time[order])
    places = np.searchsorted(passed, shares * passed[-1] * (1.0 - 1e-12), side="left")
    return np.asarray(power[order][np.minimum(places, len(order) - 1)])


def grouped_time(problem: ObjectArray, time: FloatArray) -> dict[str, float]:
    """Time by the reason why there is no answer; reasons that differ in numbers only are one."""
    found = Reasons[float]()
    for place in np.flatnonzero(problem != ""):
        found.add(problem[place], float(time[place]))
    return found.sums


def duty_year(case: Case, net_energy: float, answered: float, flowing: float) -> dict[str, float]:
    """Net energy of a year [J]: a year like the log, or one with the stated time in which the streams flow."""
    stated = "site.yearly_operation" not in case.assumed and flowing > 0
    year, source = (case.site.yearly_operation, flowing) if stated else (YEAR, answered)
    return {"yearly_net_energy": net_energy * year / source, "yearly_time": year, "yearly_from_time": source}


def _prices(case: Case, most: Mapping[str, FloatArray], year: Mapping[str, float]) -> dict[str, Any]:
    """Worth of a year's energy, cost of building for the `most` of each power [W], and years until it is paid."""
    price = case.site.electricity_value
    value = np.nan if price is None else price.amount * year["yearly_net_energy"]
    cost = float(building_cost(Batch(case), most)[0])
    comparable = price is not None and case.cost is not None and price.currency == case.cost.currency
    with np.errstate(divide="ignore"):
        payback = np.divide(cost, np.maximum(value, 0.0)) if comparable else np.nan
    currency = case.cost.currency if case.cost is not None else price.currency if price is not None else ""
    return {"yearly_value": value, "building_cost": cost, "payback_years": float(payback), "currency": currency}


def _rows(log: DutyLog, course: Course, answer: Answers) -> DutyRows:
    """Answers by reading."""
    has = course.of_reading >= 0
    place = np.where(has, course.of_reading, 0)
    results = {name: np.where(has, answer.results[name][place], np.nan) for name in (*POWERS, *CONDITIONS)}
    problem = np.where(has, answer.problem[place], log.problem)
    return DutyRows(np.where(has, answer.state[place], NOT_COVERED), results, problem)
