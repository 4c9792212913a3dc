"""How many modules, and how arranged: every choice in the given bounds is solved, none is left to a local search."""

from __future__ import annotations

import copy
import dataclasses
import functools
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from harvest.errors import InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, Case
from harvest.model.case_fields import MOST_MODULES
from harvest.model.estimate import estimate
from harvest.model.reading import replace
from harvest.model.results import Estimate
from harvest.model.search import SEARCH_CELLS, Outcomes, search_batch
from harvest.physics.arrays import BoolArray, FloatArray, IntArray
from harvest.study.duty import DutyBalance, case_log, duty
from harvest.study.duty_log import DutyLog
from harvest.study.duty_search import DutyMeasure
from harvest.study.limits import asks_without_load, bounded_results, broken_limits, limit_path
from harvest.study.reasons import Reasons
from harvest.study.wirings import (
    MOST_BLOCKS,
    WIRING,
    Wiring,
    compared,
    even_blocks,
    groupings,
    own_wiring,
    wired,
    wirings,
)

MOST_CHOICES = 2_000_000
REFINED_POINTS = 5
REFINEMENTS = 6
"""Points along each field with a unit around the best, and how often their distance is halved."""
MOST_REFINED = 4
"""Fields that are refined together; REFINED_POINTS to this power are solved each time."""
MOST_WITHOUT_ESTIMATE = 20
"""Best choices in turn that may lack a full estimate before the search gives up."""

FINALISTS = 5
"""Best choices over a log's bins that are answered at each of its readings."""
YEARLY_ENERGY = "yearly energy"

COUNTS = ("stack.rows", "stack.columns", "stack.layers")
BLOCKS = "row blocks"
"""Name under which a choice keeps the number of its row blocks, where the wiring is searched."""
KEPT = ("net_power", "building_cost", "cost_per_net_watt", "cost_per_kilowatt_hour")
"""Results of every choice that objectives and the front of cost look at."""

Progress = Callable[[int, int], None]
Search = Callable[[Batch], Outcomes]


@dataclass(frozen=True)
class Arrangement:
    """One choice with what it gives; `fields` are the SI values of the further fields that were varied."""

    module_count: int
    rows_count: int
    columns_count: int
    layers_count: int
    net_power: float
    building_cost: float
    strings_across: int
    layers_in_series: int
    row_blocks: tuple[int, ...] | None
    fields: dict[str, float]


@dataclass(frozen=True)
class SizeCurve:
    """The arrangement with the most net power at each number of modules, ascending; arrays (counts,).

    `marginal_power` [W] is what a module adds between this count and the one before on the upper hull of the curve;
    `fields` are the SI values of the further fields that were varied.
    """

    module_count: IntArray
    rows_count: IntArray
    columns_count: IntArray
    layers_count: IntArray
    generated_power: FloatArray
    drive_power: FloatArray
    net_power: FloatArray
    marginal_power: FloatArray
    fields: dict[str, FloatArray] = field(default_factory=dict)


@dataclass(frozen=True)
class CostFront:
    """Choices with net power of which none is both cheaper and stronger; arrays, rising in cost."""

    building_cost: FloatArray
    net_power: FloatArray
    module_count: IntArray
    rows_count: IntArray
    columns_count: IntArray
    layers_count: IntArray
    fields: dict[str, FloatArray] = field(default_factory=dict)


@dataclass(frozen=True)
class BindingLimit:
    """A limit that keeps the best from being better, with the best that leaving it out would bring."""

    limit: str
    without: Arrangement
    net_power_gain: float


@dataclass(frozen=True)
class AtBound:
    """An axis at whose end the best lies, so that a wider search may find a better one."""

    field: str
    end: str
    value: float


@dataclass(frozen=True)
class SizedDuty:
    """The best over a log: its balance, and how the search went.

    The search took `bins` in place of the log's `conditions`; `binned_net_power` [W] is the mean that they give,
    `finalists` so many choices were answered at every reading.
    """

    balance: DutyBalance
    conditions: int
    bins: int
    binned_net_power: float
    finalists: int


@dataclass(frozen=True)
class Sizing:
    """The best design of all choices, and how the choice stands among the others."""

    objective: str
    wiring: str
    best: Estimate
    arrangement: Arrangement
    best_case: Case = field(compare=False)
    curve: SizeCurve = field(default_factory=lambda: _no_curve())
    most_net_power: float = np.nan
    fewest_within_1_percent: int | None = None
    fewest_within_5_percent: int | None = None
    fewest_arrangement_within_1_percent: Arrangement | None = None
    fewest_arrangement_within_5_percent: Arrangement | None = None
    last_module_power: float = np.nan
    least_net_watts_per_module: float | None = None
    worthwhile: Arrangement | None = None
    choices_tried: int = 0
    choices_refined: int = 0
    choices_invalid: dict[str, int] = field(default_factory=dict)
    choices_beyond_limits: dict[str, int] = field(default_factory=dict)
    choices_within_limits: int = 0
    binding_limits: tuple[BindingLimit, ...] = ()
    limits_together: BindingLimit | None = None
    at_bounds: tuple[AtBound, ...] = ()
    net_power_without_window: float | None = None
    front: CostFront | None = None
    duty: SizedDuty | None = None

    @functools.cached_property
    def wirings(self) -> tuple[Wiring, ...]:
        """Every wiring of the best where something bounds a voltage or wiring was searched; solved when asked for."""
        electrical, limits = self.best_case.electrical, self.best_case.limits
        bounded = electrical.converter_window is not None or limits.maximum_open_circuit_voltage is not None
        return wirings(self.best_case) if bounded or self.wiring == "search" else ()


class _Axes:
    """What is varied: values by path, rows first so that neighbours in the order have alike numbers of rows."""

    def __init__(self, case: Case) -> None:
        size = case.size
        if size is None:
            raise InputError("size: the section [size] is missing; write it with rows = { from = 1, to = 40 } and more")
        self.size = size
        given = (size.rows, size.columns, size.layers)
        stated = (case.stack.rows, case.stack.columns, case.stack.layers)
        self.values: dict[str, FloatArray] = {
            path: np.array(axis or (one,), dtype=float) for path, axis, one in zip(COUNTS, given, stated, strict=True)
        }
        self.values.update({path: np.array(axis) for path, axis in (size.fields or {}).items()})
        self.shape = tuple(len(axis) for axis in self.values.values())
        self.choices = int(np.prod(self.shape, dtype=float))
        self.wirings = self._most_wirings() if size.wiring == "search" else 1
        if self.choices * self.wirings > MOST_CHOICES:
            each = f" with up to {self.wirings} wirings each" if self.wirings > 1 else ""
            raise InputError(
                f"size: {self.choices:,} choices{each}; at most {MOST_CHOICES:,} are tried, so use longer steps"
            )
        if len(self.continuous) > MOST_REFINED:
            raise InputError(
                f"size: {len(self.continuous)} fields with a unit are varied; at most {MOST_REFINED} can be refined"
            )

    def _most_wirings(self) -> int:
        """Wirings that an arrangement can have at most."""
        columns, layers = (np.unique(self.values[path]).astype(int).tolist() for path in COUNTS[1:])
        return MOST_BLOCKS * max(len(groupings(across, high)) for across in columns for high in layers)

    def at_values(self, fixed: dict[str, FloatArray]) -> _Axes:
        """The same axes, some of them with other values."""
        other = copy.copy(self)
        other.values = {**self.values, **fixed}
        other.shape = tuple(len(axis) for axis in other.values.values())
        other.choices = int(np.prod(other.shape, dtype=float))
        return other

    @property
    def continuous(self) -> tuple[str, ...]:
        """Fields with a unit and more than one value, which can be refined."""
        return tuple(
            path for path, axis in self.values.items() if len(axis) > 1 and DECLARATIONS[path].form == "quantity"
        )

    def chunks(self, segments: int) -> Iterator[IntArray]:
        """Places of the choices, a bearable number at a time."""
        rows, inner = self.values["stack.rows"], self.choices // self.shape[0]
        cells = SEARCH_CELLS / (segments * self.wirings)
        first = 0
        while first < self.choices:
            after = first + max(1, int(cells / rows[first // inner]))
            most = rows[min(after, self.choices) // inner if after < self.choices else -1]
            after = min(first + max(1, int(cells / most)), self.choices)
            yield np.arange(first, after)
            first = after

    def at(self, places: IntArray) -> dict[str, FloatArray]:
        """Values of choices by path, (places,)."""
        indices = np.unravel_index(places, self.shape)
        return {path: axis[index] for (path, axis), index in zip(self.values.items(), indices, strict=True)}


class _Tally:
    """What is kept of every choice: a few numbers, however many rows were solved."""

    def __init__(self, case: Case, search: Search) -> None:
        self.case = case
        self.search = search
        self.parts: list[dict[str, FloatArray]] = []
        self.kept = sorted({*KEPT, *bounded_results(case)})
        self.searches_wiring = case.size is not None and case.size.wiring == "search"
        self.reasons = Reasons[int]()
        self.choices = 0

    def add(self, values: dict[str, FloatArray], *, counted: bool = True) -> None:
        """Solve choices and keep their numbers; with `counted` their faults are counted too."""
        counts = values["stack.rows"] * values["stack.columns"] * values["stack.layers"]
        bearable = counts <= MOST_MODULES
        if not bearable.all():
            if counted:
                self.reasons.add("stack.rows: too many modules to be solved", int((~bearable).sum()))
                self.choices += int((~bearable).sum())
            if bearable.any():
                self.add({path: each[bearable] for path, each in values.items()}, counted=counted)
            return
        if self.searches_wiring and BLOCKS not in values:
            for part in wired(values, BLOCKS):
                self.add(part, counted=counted)
            return
        for blocks, which in self.structures(values):
            part = {path: each[which] for path, each in values.items()}
            base = dataclasses.replace(
                self.case, electrical=dataclasses.replace(self.case.electrical, row_blocks=blocks)
            )
            batch = Batch(base, len(part["stack.rows"]), {path: each for path, each in part.items() if path != BLOCKS})
            found = self.search(batch)
            if counted:
                self.choices += batch.cases
                for problem in found.problem[found.problem != ""]:
                    self.reasons.add(problem, 1)
            self.keep(part, found)

    def structures(self, values: dict[str, FloatArray]) -> Iterator[tuple[tuple[int, ...] | None, BoolArray]]:
        """Row blocks and where choices have them, for a batch has one structure."""
        rows = values["stack.rows"]
        counts = values.get(BLOCKS)
        if counts is None and self.case.electrical.row_blocks is None:
            yield None, np.ones(len(rows), dtype=bool)
            return
        single = np.zeros(len(rows), dtype=bool) if counts is None else counts == 1
        if single.any():
            yield None, single
        several = np.column_stack([rows, rows if counts is None else counts])
        for each in np.unique(several[~single], axis=0):
            count = None if counts is None else int(each[1])
            yield row_blocks(self.case, int(each[0]), count), ~single & (several == each).all(axis=1)

    def keep(self, values: dict[str, FloatArray], found: Outcomes) -> None:
        """Keep the choices that have an answer."""
        valid = found.problem == ""
        scalars = found.scalars
        part = {
            **values,
            "module_count": values["stack.rows"] * values["stack.columns"] * values["stack.layers"],
            "generated_power": scalars["generated_power"],
            "drive_power": scalars["hot_drive_power"] + scalars["cold_drive_power"],
            **{name: scalars[name] for name in self.kept},
        }
        self.parts.append({name: np.asarray(each)[valid] for name, each in part.items()})

    def all(self) -> _Found:
        """Every choice with an answer so far."""
        names = self.parts[0] if self.parts else {}
        numbers = {name: np.concatenate([part[name] for part in self.parts]) for name in names}
        return _Found(self.case, numbers, broken_limits(self.case, numbers) if numbers else {})


@dataclass(frozen=True)
class _Found:
    """Choices with an answer: numbers by name and which limits they break, (found,)."""

    case: Case
    numbers: dict[str, FloatArray]
    beyond: dict[str, BoolArray]

    def allowed(self, without: tuple[str, ...] = ()) -> BoolArray:
        """Choices within the limits, some of them left out."""
        inside = np.ones(len(self.numbers["net_power"]), dtype=bool)
        for name, wrong in self.beyond.items():
            if name not in without:
                inside &= ~wrong
        return inside

    def order(self, among: BoolArray) -> IntArray:
        """Places of choices that meet the objective, the best first; of equals the one with fewer modules."""
        size = self.case.size
        assert size is not None
        net, count = self.numbers["net_power"], self.numbers["module_count"]
        if size.objective == "fewest modules":
            reached = among & (net >= float(size.target_net_power or 0.0))
            keys: tuple[FloatArray, ...] = (-net, count)
        elif size.objective in ("net power", YEARLY_ENERGY):
            reached, keys = among, (count, -net)
        else:
            reached, keys = among & (net > 0), (count, self.numbers[size.objective.replace(" ", "_").replace("-", "_")])
        places = np.flatnonzero(reached)
        return places[np.lexsort(tuple(key[places] for key in keys))]

    def arrangement(self, place: int) -> Arrangement:
        """One choice as it is reported."""
        numbers = {name: float(each[place]) for name, each in self.numbers.items()}
        fields = {path: numbers[path] for path in (self.case.size.fields or {} if self.case.size else {})}
        rows, columns, layers = (int(numbers[path]) for path in COUNTS)
        electrical = self.case.electrical
        count = int(numbers[BLOCKS]) if BLOCKS in numbers else None
        return Arrangement(
            module_count=int(numbers["module_count"]),
            rows_count=rows,
            columns_count=columns,
            layers_count=layers,
            net_power=numbers["net_power"],
            building_cost=numbers["building_cost"],
            strings_across=int(numbers.get(WIRING[0], electrical.strings_across)),
            layers_in_series=int(numbers.get(WIRING[1], electrical.layers_in_series)),
            row_blocks=row_blocks(self.case, rows, count),
            fields=fields,
        )

    def values(self, place: int, axes: _Axes) -> dict[str, float]:
        """What one choice varies, its wiring too where that was searched."""
        paths = (*axes.values, *((*WIRING, BLOCKS) if BLOCKS in self.numbers else ()))
        return {path: float(self.numbers[path][place]) for path in paths}

    def with_wiring(self, place: int, wiring: Wiring) -> int:
        """Place of the same arrangement with another wiring; the place itself where it was not searched."""
        same = self.allowed()
        for name in (*COUNTS, *(self.case.size.fields or {} if self.case.size else {})):
            same &= self.numbers[name] == self.numbers[name][place]
        wanted = (wiring.strings_across, wiring.layers_in_series, len(wiring.row_blocks))
        for name, value in zip((*WIRING, BLOCKS), wanted, strict=True):
            same &= self.numbers[name] == value
        found = np.flatnonzero(same)
        return int(found[0]) if len(found) else place


def _no_curve() -> SizeCurve:
    whole, real = np.empty(0, dtype=np.int64), np.empty(0)
    return SizeCurve(whole, whole, whole, whole, real, real, real, real)


def _whole(found: _Found, name: str, places: IntArray) -> IntArray:
    return found.numbers[name][places].astype(np.int64)


def _fields(found: _Found, places: IntArray) -> dict[str, FloatArray]:
    """Further fields that were varied, by path, (places,)."""
    varied = found.case.size.fields or {} if found.case.size else {}
    return {path: found.numbers[path][places] for path in varied}


def _curve(found: _Found, among: BoolArray) -> tuple[SizeCurve, IntArray]:
    """Strongest choice at each number of modules, and their places."""
    places = np.flatnonzero(among)
    net, count = found.numbers["net_power"][places], found.numbers["module_count"][places]
    order = np.lexsort((-net, count))
    counts, first = np.unique(count[order], return_index=True)
    chosen = places[order[first]]
    net = found.numbers["net_power"][chosen]
    rows, columns, layers = (_whole(found, path, chosen) for path in COUNTS)
    curve = SizeCurve(
        counts.astype(np.int64),
        rows,
        columns,
        layers,
        found.numbers["generated_power"][chosen],
        found.numbers["drive_power"][chosen],
        net,
        marginal_power(counts, net),
        _fields(found, chosen),
    )
    return curve, chosen


def marginal_power(counts: FloatArray, net_power: FloatArray) -> FloatArray:
    """Slope of the upper concave hull of net power [W] over module counts, from no module on, (counts,).

    The hull leaves out counts that arrange badly, such as large primes, so that its slope never rises.
    """
    corners = [(0.0, 0.0)]
    for point in zip(counts, net_power, strict=True):
        while len(corners) > 1:
            (x1, y1), (x2, y2) = corners[-2:]
            if (y2 - y1) * (point[0] - x2) > (point[1] - y2) * (x2 - x1):
                break
            corners.pop()
        corners.append((float(point[0]), float(point[1])))
    x, y = np.array(corners).T
    slopes = np.diff(y) / np.diff(x)
    return np.asarray(slopes[np.searchsorted(x, counts, side="left") - 1])


def _front(found: _Found, among: BoolArray) -> CostFront | None:
    """Choices with net power that nothing beats in both cost and net power; None without prices."""
    if found.case.cost is None:
        return None
    places = np.flatnonzero(among & (found.numbers["net_power"] > 0))
    cost, net = found.numbers["building_cost"][places], found.numbers["net_power"][places]
    order = np.lexsort((-net, cost))
    before = np.concatenate([[-np.inf], np.maximum.accumulate(net[order])])[: len(order)]
    chosen = places[order[net[order] > before]]
    rows, columns, layers = (_whole(found, path, chosen) for path in COUNTS)
    return CostFront(
        found.numbers["building_cost"][chosen],
        found.numbers["net_power"][chosen],
        _whole(found, "module_count", chosen),
        rows,
        columns,
        layers,
        _fields(found, chosen),
    )


def _refine(tally: _Tally, axes: _Axes) -> int:
    """Halve the distance of fields with a unit around the best, then try all counts at the refined values."""
    fields = axes.continuous
    if not fields:
        return 0
    tried = 0
    step = {path: float(np.diff(axes.values[path]).max()) for path in fields}
    for turn in range(REFINEMENTS):
        found = tally.all()
        order = found.order(found.allowed())
        if not len(order):
            return tried
        best = found.values(int(order[0]), axes)
        around = []
        for path in fields:
            ends = axes.values[path][[0, -1]]
            points = best[path] + step[path] * np.linspace(-1.0, 1.0, REFINED_POINTS)
            around.append(np.unique(np.clip(points, *ends)))
            step[path] = 0.5 * step[path]
        mesh = [each.ravel() for each in np.meshgrid(*around, indexing="ij")]
        refined = {path: np.full(len(mesh[0]), value) for path, value in best.items()}
        refined.update(dict(zip(fields, mesh, strict=True)))
        tally.add(refined, counted=False)
        tried += len(mesh[0])
        if turn == REFINEMENTS // 2 or turn == REFINEMENTS - 1:
            tried += _counts_again(tally, axes, fields)
    return tried


def _counts_again(tally: _Tally, axes: _Axes, fields: tuple[str, ...]) -> int:
    """Try everything that has no unit at the best values of the fields that have one."""
    found = tally.all()
    place = found.order(found.allowed())[0]
    whole = axes.at_values({path: found.numbers[path][[place]] for path in fields})
    for places in whole.chunks(tally.case.stack.segments):
        tally.add(whole.at(places), counted=False)
    return whole.choices


def _at_bounds(axes: _Axes, chosen: dict[str, float]) -> tuple[AtBound, ...]:
    """Axes at whose end the best lies; below one of a whole number there is nothing."""
    found = []
    for path, axis in axes.values.items():
        value = chosen[path]
        if len(axis) < 2:
            continue
        if value >= axis[-1]:
            found.append(AtBound(path, "highest", value))
        elif value <= axis[0] and not (DECLARATIONS[path].form == "integer" and value <= 1):
            found.append(AtBound(path, "lowest", value))
    if chosen.get(BLOCKS) == MOST_BLOCKS < chosen["stack.rows"]:
        found.append(AtBound("electrical.row_blocks", "highest", float(MOST_BLOCKS)))
    return tuple(found)


def _binding(found: _Found, order: IntArray) -> tuple[tuple[BindingLimit, ...], BindingLimit | None]:
    """Limits without which another choice would be best; and all together, where no single one does it."""
    best = found.arrangement(int(order[0]))

    def without(name: str, left_out: tuple[str, ...]) -> BindingLimit | None:
        place = int(found.order(found.allowed(left_out))[0])
        if found.allowed()[place]:
            return None
        other = found.arrangement(place)
        return BindingLimit(name, other, other.net_power - best.net_power)

    single = tuple(each for name in found.beyond if (each := without(name, (name,))) is not None)
    return single, None if single else without("all limits together", tuple(found.beyond))


def for_yearly_energy(case: Case) -> Case:
    """The case with the objective "yearly energy"; raises InputError where it asks for a goal of its own."""
    objective = case.size.objective if case.size is not None else YEARLY_ENERGY
    if objective not in ("net power", YEARLY_ENERGY):
        raise InputError(
            f'size.objective: "{objective}" is not looked for over a log; set it to "{YEARLY_ENERGY}", or give no log'
        )
    return replace(case, {"size.objective": YEARLY_ENERGY})


def size(case: Case, progress: Progress | None = None, *, log: DutyLog | str | Path | None = None) -> Sizing:
    """Solve every choice in [size] and find the best that keeps to [limits].

    Parameters: `case` with a section [size]; `progress`, called with choices done and choices in all; `log` for the
    objective "yearly energy", by default the case's own: then powers are means over the log, and limits hold in every
    condition in which a choice is on. Raises InputError for what concerns all choices, NoAnswerError where no choice
    has an answer within the limits.
    """
    axes = _Axes(case)
    wanted = axes.size
    over = case_log(case, log) if wanted.objective == YEARLY_ENERGY else None
    measure = DutyMeasure.of(case, over) if over is not None else None
    if measure is None:
        tally = _Tally(case, lambda batch: search_batch(batch, without_load=asks_without_load(case)))
    else:
        tally = _Tally(measure.base, measure.search)
    for places in axes.chunks(case.stack.segments):
        tally.add(axes.at(places))
        if progress is not None:
            progress(int(places[-1]) + 1, axes.choices)
    found = tally.all()
    if not found.numbers or not len(found.numbers["net_power"]):
        raise NoAnswerError("\n".join(["no choice has an answer", *_said(tally)]))
    beyond = {name: int(wrong.sum()) for name, wrong in found.beyond.items() if wrong.any()}
    within_limits = int(found.allowed().sum())
    refined = _refine(tally, axes)
    found = tally.all()
    order = found.order(found.allowed())
    if not len(order):
        raise NoAnswerError("\n".join(_none_meets(found, beyond, tally)))
    sized = None
    if over is not None and measure is not None:
        order, sized = _over_whole_log(case, over, measure, found, order, axes)
    for place in order[:MOST_WITHOUT_ESTIMATE]:
        chosen = found.values(int(place), axes)
        searched = BLOCKS in chosen and measure is None
        wired_alike = found.with_wiring(int(place), wirings(designed(case, chosen))[0]) if searched else place
        chosen = found.values(int(wired_alike), axes)
        best_case = designed(case, chosen)
        best = estimate(best_case)
        if best.valid:
            break
        tally.reasons.add(best.problem, 1)
        found.numbers["net_power"][wired_alike] = -np.inf
    else:
        raise NoAnswerError(f"the best choices have no estimate: {best.problem}")
    order = order[np.flatnonzero(order == place)[0] :]
    allowed = found.allowed() & np.isfinite(found.numbers["net_power"])
    curve, of_curve = _curve(found, allowed)
    most = float(curve.net_power.max())
    arrangement = found.arrangement(int(wired_alike))
    single, together = _binding(found, order)
    within = {share: _fewest(found, curve, of_curve, (1.0 - share) * most) for share in (0.01, 0.05)}
    return Sizing(
        objective=wanted.objective,
        wiring=wanted.wiring,
        best=best,
        arrangement=arrangement,
        best_case=best_case,
        curve=curve,
        most_net_power=most,
        fewest_within_1_percent=within[0.01].module_count if within[0.01] else None,
        fewest_within_5_percent=within[0.05].module_count if within[0.05] else None,
        fewest_arrangement_within_1_percent=within[0.01],
        fewest_arrangement_within_5_percent=within[0.05],
        last_module_power=float(curve.marginal_power[np.searchsorted(curve.module_count, arrangement.module_count)]),
        least_net_watts_per_module=wanted.least_net_watts_per_module,
        worthwhile=_worthwhile(found, allowed, wanted.least_net_watts_per_module),
        choices_tried=tally.choices,
        choices_refined=refined,
        choices_invalid=tally.reasons.sums,
        choices_beyond_limits=beyond,
        choices_within_limits=within_limits,
        binding_limits=single,
        limits_together=together,
        at_bounds=_at_bounds(axes, chosen),
        net_power_without_window=_without_window(best_case, best),
        front=_front(found, allowed),
        duty=sized,
    )


def _over_whole_log(
    case: Case, log: DutyLog, measure: DutyMeasure, found: _Found, order: IntArray, axes: _Axes
) -> tuple[IntArray, SizedDuty]:
    """Order of choices with the first ones answered at every reading, the best of them first, and that one's balance.

    Choices that break a limit at a reading are struck out. Raises NoAnswerError where all that were answered do.
    """
    balances: dict[int, DutyBalance] = {}
    binned = found.numbers["net_power"].copy()

    def answer(place: int) -> None:
        balance = duty(designed(case, found.values(place, axes)), log)
        if any(balance.time_beyond_limits.values()):
            found.numbers["net_power"][place] = -np.inf
            return
        balances[place] = balance
        for name, value in _means(balance).items():
            found.numbers[name][place] = value

    answered = 0
    for place in order[:MOST_WITHOUT_ESTIMATE].tolist():
        answered += 1
        answer(place)
        if len(balances) == FINALISTS:
            break
    if not balances:
        raise NoAnswerError(f"the {answered} best choices break a limit at a reading of the log")
    finalists = len(balances)
    best = max(balances, key=lambda place: balances[place].mean_net_power)
    chosen = found.values(best, axes)
    if BLOCKS in chosen:
        alike = found.with_wiring(best, _alike_wiring(designed(case, chosen)))
        if alike not in balances:
            answer(alike)
        if alike in balances and compared(balances[alike].mean_net_power) >= compared(balances[best].mean_net_power):
            best = alike
    struck = np.isneginf(found.numbers["net_power"][order])
    rest = order[~struck & (order != best)]
    sized = SizedDuty(balances[best], balances[best].conditions, len(measure.share), float(binned[best]), finalists)
    return np.concatenate([[best], rest]), sized


def _alike_wiring(case: Case) -> Wiring:
    """Of the wirings that give a design's net power at its own streams, the one to be preferred."""
    every = wirings(case)
    own = own_wiring(case, every)
    return next((each for each in every if compared(each.net_power) == compared(own.net_power)), own)


def _means(balance: DutyBalance) -> dict[str, float]:
    """Results of a choice at every reading, in place of those over the bins."""
    drives = balance.hot_drive_energy + balance.cold_drive_energy
    return {
        "net_power": balance.mean_net_power,
        "generated_power": balance.generated_energy / balance.answered_time,
        "drive_power": drives / balance.answered_time,
        "building_cost": balance.building_cost,
    }


def _without_window(case: Case, best: Estimate) -> float | None:
    """Net power of the best if the converter's window did not hold its voltage [W]; None where it does not."""
    window = case.electrical.converter_window
    if window is None or best.voltage not in window:
        return None
    electrical = dataclasses.replace(case.electrical, converter_window=None)
    found = search_batch(Batch(dataclasses.replace(case, electrical=electrical)))
    return float(found.scalars["net_power"][0])


def _said(tally: _Tally) -> list[str]:
    return [f"{_choices(count)}: {text}" for text, count in tally.reasons.sums.items()]


def _choices(count: int) -> str:
    return f"{count:,} choice{'s' * (count != 1)}"


def _none_meets(found: _Found, beyond: dict[str, int], tally: _Tally) -> list[str]:
    """Why no choice is left."""
    lines = [f"no choice keeps to the limits; with an answer: {_choices(len(found.numbers['net_power']))}"]
    if found.allowed().any():
        lines = [f"no choice meets the objective; the most net power within the limits is {_most(found):.6g} W"]
    return [*lines, *(f"{_choices(count)}: beyond {limit_path(name)}" for name, count in beyond.items()), *_said(tally)]


def _most(found: _Found) -> float:
    return float(found.numbers["net_power"][found.allowed()].max())


def _fewest(found: _Found, curve: SizeCurve, of_curve: IntArray, net_power: float) -> Arrangement | None:
    """Arrangement of fewest modules that gives a net power [W]; None where the most there is is a loss."""
    enough = np.flatnonzero(curve.net_power >= net_power)
    return found.arrangement(int(of_curve[enough[0]])) if net_power > 0 and len(enough) else None


def _worthwhile(found: _Found, among: BoolArray, worth: float | None) -> Arrangement | None:
    """Choice up to which every further module adds at least its worth [W]; None if not even the first do."""
    if worth is None:
        return None
    surplus = np.where(among, found.numbers["net_power"] - worth * found.numbers["module_count"], -np.inf)
    place = int(np.argmax(surplus))
    return found.arrangement(place) if surplus[place] > 0 else None


def row_blocks(case: Case, rows: int, count: int | None = None) -> tuple[int, ...] | None:
    """Row blocks of a stack with other rows, as even as can be, short ones first.

    So many as `count`; unless given, as few as leave none longer than the longest of the case.
    """
    given = case.electrical.row_blocks
    if count is not None:
        return even_blocks(rows, count) if count > 1 or given is not None else None
    if given is None or rows == case.stack.rows:
        return given
    return even_blocks(rows, -(-rows // max(given)))


def designed(case: Case, values: dict[str, float]) -> Case:
    """Case of one choice, without [size], as it would be read from a file."""
    whole: dict[str, Any] = {
        path: int(value) if DECLARATIONS[path].form == "integer" else value
        for path, value in values.items()
        if path != BLOCKS
    }
    blocks = row_blocks(case, whole["stack.rows"], int(values[BLOCKS]) if BLOCKS in values else None)
    if blocks is not None:
        whole["electrical.row_blocks"] = blocks
    bare = dataclasses.replace(case, given={name: each for name, each in case.given.items() if name != "size"})
    return replace(bare, whole)
