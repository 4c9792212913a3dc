"""Every combination of the values that fields are given, or an even sample of them: from axes to batches to columns."""

from __future__ import annotations

import dataclasses
import functools
import hashlib
import json
import math
import warnings
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from harvest.errors import CaseError, InputError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, Case, case_hash, selector_path, typed_at, value_at
from harvest.model.case_fields import SweepAxis
from harvest.model.case_rules import ALTERNATIVES
from harvest.model.case_text import toml_value
from harvest.model.checks import FAIL, WARN
from harvest.model.design import BETWEEN
from harvest.model.estimate import estimate_batch
from harvest.model.reading import NUMBERS, replace
from harvest.model.results import OF_SEARCHES, SCALARS
from harvest.model.search import SEARCHED, SEARCHED_WITHOUT_LOAD, search_batch
from harvest.model.study_sections import MOST_COMBINATIONS
from harvest.physics.arrays import BoolArray, FloatArray, IntArray, ObjectArray
from harvest.quantities import unit_of
from harvest.study.limits import asks_without_load, broken_limits
from harvest.version import VERSION

CHUNK_CELLS = 25_000
"""Rows times combinations that are solved at a time: few enough for the caches, and to share among processes."""
CHUNK_CASES = 5_000
MOST_STRUCTURES = 2_000
MOST_TRIED, MOST_COUNTS_TRIED = 64, 1_000
"""Combinations of numbers, spread over all, and then of counts alone, tried until a structure is a valid case."""
STRUCTURAL = frozenset(
    {
        "site.ambient_pressure",  # gauge pressures and defaults are made of it when a case is read
        "electrical.blocking_diode_drop",  # one diode in a batch sends all its cases another way to the same answer
        "stack.segments",
        "module.minimum_temperature",
        "module.maximum_temperature",
        "module.maximum_hot_face_temperature",
        "module.figure_of_merit",
    }
)
"""Numbers that belong to the base case of a batch, so that each value of them is a structure of its own."""

WARMEST_COLD_FACE = "warmest_cold_face_temperature"
RESULTS: dict[str, Any] = {
    **SCALARS,
    **OF_SEARCHES,
    "highest_open_circuit_voltage": {"kind": "voltage", "meaning": "Highest voltage of any string without load."},
}
"""Every result that a sweep may have, with its kind of unit and its meaning."""
COSTS = tuple(name for name in SCALARS if "cost" in name or "payback" in name)
CHECK_TEXTS = {
    "failed_checks": "Names of the checks that fail, with semicolons between them.",
    "warned_checks": "Names of the checks that warn, with semicolons between them.",
}


@dataclass(frozen=True)
class SweepPart:
    """Results of some combinations by name, (cases,): NaN where `problem` says why; `texts` name checks."""

    numbers: dict[str, FloatArray]
    texts: dict[str, ObjectArray]
    problem: ObjectArray


@dataclass(frozen=True)
class SweepPlan:
    """What a sweep solves. `bases` are the valid cases of each structure, or a text that says why there is none.

    Numbers vary within a batch; everything else, the structures, has a base case for every combination of values.
    """

    case: Case
    axes: dict[str, SweepAxis]
    full: bool
    bases: tuple[Case | str, ...]

    @property
    def sampled(self) -> bool:
        """Whether combinations are drawn, and not all solved."""
        return _section(self.case).sample is not None

    @property
    def shape(self) -> tuple[int, ...]:
        """Numbers of values along the axes of a grid."""
        return tuple(len(axis.values) for axis in self.axes.values())

    @property
    def count(self) -> int:
        """Number of combinations."""
        return _section(self.case).sample or math.prod(self.shape)

    @property
    def results(self) -> dict[str, Any]:
        """Names of the results with their kinds of unit and meanings: those without load and costs where asked for."""
        names = (*SCALARS, WARMEST_COLD_FACE) if self.full else SEARCHED
        if not self.full and asks_without_load(self.case):
            names += SEARCHED_WITHOUT_LOAD
        priced = any(isinstance(base, Case) and base.cost is not None for base in self.bases)
        return {name: RESULTS[name] for name in names if priced or name not in COSTS}

    @property
    def check_texts(self) -> dict[str, str]:
        """Names of the columns that name checks, with their meanings."""
        return CHECK_TEXTS if self.full else {}

    @functools.cached_property
    def chunk_cases(self) -> int:
        """Combinations that are solved at a time."""
        cells = math.prod(_largest(self.case, self.axes, path) for path in ("stack.rows", "stack.segments"))
        return int(max(1, min(CHUNK_CASES, CHUNK_CELLS // cells)))

    @property
    def chunks(self) -> int:
        """Number of chunks."""
        return -(-self.count // self.chunk_cases)

    def chunk(self, index: int) -> IntArray:
        """Places of the combinations of a chunk, in the order of the table."""
        first = index * self.chunk_cases
        return np.arange(first, min(first + self.chunk_cases, self.count))

    def at(self, places: IntArray) -> dict[str, Any]:
        """Values of combinations by field, (places,): SI numbers, or the places of structures on their axis."""
        if not self.sampled:
            indices: Sequence[IntArray] = np.unravel_index(places, self.shape)
            return {
                path: index if is_structure(path, axis) else np.array(axis.values, dtype=float)[index]
                for (path, axis), index in zip(self.axes.items(), indices, strict=True)
            }
        section = _section(self.case)
        points = _points(section.sequence, len(self.axes), self.count, section.seed)[places]
        return {path: _drawn(path, axis, points[:, i]) for i, (path, axis) in enumerate(self.axes.items())}

    def labels(self, path: str) -> ObjectArray:
        """Texts of an axis whose values are no single numbers, (values,)."""
        return np.array(self.axes[path].labels, dtype=object)

    def solved(self, places: IntArray) -> SweepPart:
        """Solve combinations; one without an answer is NaN and says why."""
        values = self.at(places)
        numbers = {name: np.full(len(places), np.nan) for name in self.results}
        texts = {name: np.full(len(places), "", dtype=object) for name in self.check_texts}
        problem = np.full(len(places), "", dtype=object)
        structure = _structure_of(self.axes, values, len(places))
        varied = {path: each for path, each in values.items() if not is_structure(path, self.axes[path])}
        for each in np.unique(structure):
            which, base = np.flatnonzero(structure == each), self.bases[each]
            if isinstance(base, str):
                problem[which] = base
                continue
            try:
                batch = Batch(base, len(which), {path: number[which] for path, number in varied.items()})
                found = _full(batch) if self.full else _lean(batch, asks_without_load(self.case))
            except InputError as error:
                problem[which] = str(error)
                continue
            problem[which] = found.problem
            for name, number in numbers.items():
                number[which] = found.numbers[name]
            for name, words in found.texts.items():
                texts[name][which] = words
        return SweepPart(numbers, texts, problem)

    def refused(self, places: IntArray, part: SweepPart) -> BoolArray:
        """Whether solved combinations are beyond a limit of their case or, where all are made, fail a check."""
        if self.full:
            return np.asarray(part.texts["failed_checks"] != "")
        refused = np.zeros(len(places), dtype=bool)
        structure = _structure_of(self.axes, self.at(places), len(places))
        for each in np.unique(structure):
            which, base = np.flatnonzero(structure == each), self.bases[each]
            if isinstance(base, Case):
                for broken in broken_limits(
                    base, {name: values[which] for name, values in part.numbers.items()}
                ).values():
                    refused[which] |= broken
        return refused

    def digest(self) -> str:
        """SHA-256 of everything that the table's values depend on."""
        section = _section(self.case)
        content = (
            VERSION,
            self.full,
            self.chunk_cases,
            [(path, repr(axis.values), axis.labels, axis.between) for path, axis in self.axes.items()],
            (section.sample, section.sequence, section.seed),
            [base if isinstance(base, str) else (case_hash(base), repr((base.cost, base.site))) for base in self.bases],
        )
        return hashlib.sha256(json.dumps(content).encode()).hexdigest()


def planned(case: Case, *, full: bool = False) -> SweepPlan:
    """Plan the sweep that [sweep] of a case asks for; `full` asks for all results and checks of an estimate.

    Raises InputError for what cannot be swept, or CaseError where no combination makes a valid case.
    """
    section = case.sweep
    if section is None or not section.fields:
        raise InputError(
            'sweep: nothing is varied; write [sweep] with fields in quotes, or --vary "hot.mass_flow=FROM:TO:POINTS"'
        )
    axes = section.fields
    for alternatives in ALTERNATIVES:
        if len(both := [path for path in alternatives if path in axes]) > 1:
            raise InputError(f"sweep.{both[1]}: says the same as {both[0]}, which is varied too; vary one of them")
    structures = {path: axis for path, axis in axes.items() if is_structure(path, axis)}
    for path, axis in structures.items():
        if axis.between:
            raise InputError(f"sweep.{path}: each value is a structure of its own; give points, or a list")
    count = math.prod(len(axis.values) for axis in structures.values())
    if count > MOST_STRUCTURES:
        raise InputError(
            f"sweep: {', '.join(structures)} make {count:,} structures; at most {MOST_STRUCTURES:,} are solved"
        )
    plan = SweepPlan(case, axes, full, ())
    if plan.count > MOST_COMBINATIONS:
        raise InputError(
            f"sweep: {plan.count:,} combinations; at most {MOST_COMBINATIONS:,} are solved; use fewer points or sample"
        )
    bases = tuple(_base(plan, dict(zip(structures, chosen, strict=True))) for chosen in _product(structures))
    if not any(isinstance(base, Case) for base in bases):
        raise CaseError(
            [f"sweep: no combination makes a valid case: {fault}" for fault in str(bases[0]).split(BETWEEN)]
        )
    return dataclasses.replace(plan, bases=bases)


def with_axes(
    case: Case,
    axes: Mapping[str, Any] | None = None,
    *,
    sample: int | None = None,
    sequence: str | None = None,
    seed: int | None = None,
    option: str | None = None,
) -> Case:
    """Return a case with further fields, or other values, in its [sweep].

    An axis is a list, an array of SI numbers, or a mapping with from, to and points or step. With `option`, what gave
    the axes is named in faults and they are as in a case file, where a number needs its unit. Raises CaseError.
    """
    settings = {"sample": sample, "sequence": sequence, "seed": seed}
    changes = {f"sweep.{path}": axis for path, axis in (axes or {}).items()}
    changes |= {f"sweep.{name}": value for name, value in settings.items() if value is not None}
    if not changes:
        return case
    return replace(case, changes, label=option or "case", as_written=option is not None)


def varied_field(text: str) -> tuple[str, Any]:
    """Read "FIELD=FROM:TO:POINTS", "FIELD=FROM:TO" or "FIELD=a, b, c" as a field and what [sweep] would hold.

    After the equals sign may also stand a list or table as in the case file. Raises InputError.
    """
    path, equals, given = (part.strip() for part in text.partition("="))
    if not equals or not path or not given:
        raise InputError(
            f'--vary {text!r}: is not FIELD=VALUES; write for example --vary "hot.mass_flow=0.05 kg/s:0.12 kg/s:8"'
        )
    whole = toml_value(given)
    if isinstance(whole, list | dict):
        return path, whole
    declaration = DECLARATIONS.get(path)
    ends = [part.strip() for part in given.split(":")]
    if len(ends) == 1 or declaration is None or declaration.form not in NUMBERS:
        return path, [toml_value(part.strip()) for part in given.split(",")]
    if len(ends) > 3 or not all(ends):
        raise InputError(f"--vary {text!r}: has {len(ends)} parts between colons; write FROM:TO:POINTS or FROM:TO")
    spaced = dict(zip(("from", "to", "points"), map(toml_value, ends), strict=False))
    return path, spaced


def is_structure(path: str, axis: SweepAxis) -> bool:
    """Whether the values of an axis are no numbers that vary within a batch."""
    return bool(axis.labels) or path in STRUCTURAL


def _section(case: Case) -> Any:
    assert case.sweep is not None
    return case.sweep


def _largest(case: Case, axes: Mapping[str, SweepAxis], path: str) -> float:
    axis = axes.get(path)
    return float(max(axis.between or axis.values) if axis else value_at(case, path))


def _product(structures: Mapping[str, SweepAxis]) -> Iterator[tuple[Any, ...]]:
    """Values of every structure, the last axis running fastest."""
    shape = tuple(len(axis.values) for axis in structures.values())
    for place in np.ndindex(shape):
        yield tuple(axis.values[index] for axis, index in zip(structures.values(), place, strict=True))


def _structure_of(axes: Mapping[str, SweepAxis], values: Mapping[str, Any], cases: int) -> IntArray:
    """Number of each combination's structure, (cases,)."""
    number = np.zeros(cases, dtype=np.int64)
    for path, axis in axes.items():
        if is_structure(path, axis):
            number = number * len(axis.values) + values[path].astype(np.int64)
    return number


@functools.lru_cache(2)
def _points(sequence: str, dimensions: int, count: int, seed: int) -> FloatArray:
    """Points of low discrepancy in the unit cube, (count, dimensions)."""
    from scipy.stats import qmc

    engine = (qmc.Sobol if sequence == "Sobol" else qmc.Halton)(dimensions, scramble=True, seed=seed)
    with warnings.catch_warnings():  # any number of Sobol points is still a sample, if not the most even one
        warnings.simplefilter("ignore", UserWarning)
        return np.asarray(engine.random(count), dtype=np.float64)


def _drawn(path: str, axis: SweepAxis, points: FloatArray) -> FloatArray:
    """Values of an axis at points between 0 and 1."""
    if axis.between is None:
        index = np.minimum((points * len(axis.values)).astype(np.int64), len(axis.values) - 1)
        return index if is_structure(path, axis) else np.array(axis.values, dtype=float)[index]
    low, high = axis.between
    if DECLARATIONS[path].form == "integer":
        return np.minimum(np.floor(low + points * (high - low + 1.0)), high)
    return low + points * (high - low)


def _base(plan: SweepPlan, structure: dict[str, Any]) -> Case | str:
    """Valid case of a structure, to which numbers are applied; or why there is none.

    Numbers that the case gives stay as they are unless they do not go with the structure, and then those of some
    combinations are tried, and last every combination of counts, which is what a structure most often hangs on.
    """
    case = plan.case
    numbers = [path for path, axis in plan.axes.items() if not is_structure(path, axis)]
    changes = {**dict.fromkeys(_without_use(plan, structure)), **structure}
    first = plan.at(np.zeros(1, dtype=np.int64))
    # a number that is not written in the case is written, so that it is judged whether it applies
    absent = {path: first[path][0] for path in numbers if typed_at(case.given, path) is None}
    spread = np.unique(np.linspace(0, plan.count - 1, MOST_TRIED).astype(np.int64))
    tried = plan.at(spread)
    said: list[str] = []
    # where the reason does not change with the numbers, more of them are of no use
    for candidates in (
        [absent, *({path: tried[path][place] for path in numbers} for place in range(len(spread)))],
        ({**absent, **counts} for counts in _counts(plan, numbers)),
    ):
        for chosen in candidates:
            try:
                base = replace(case, {**changes, **{path: _typed(path, each) for path, each in chosen.items()}})
            except CaseError as error:
                said.append(BETWEEN.join(fault.removeprefix("case: ") for fault in error.faults))
                if not numbers:
                    return said[0]
            else:
                return dataclasses.replace(base, sweep=None)
        if len(set(said)) == 1:
            return said[0]
    return f"none of {len(said):,} combinations tried makes a valid case, the first because of {said[0]}"


def _counts(plan: SweepPlan, numbers: Sequence[str]) -> Iterator[dict[str, float]]:
    """Combinations of the numbers that are whole, spread over all of them."""
    counts = {
        path: np.arange(axis.between[0], axis.between[1] + 1) if axis.between else np.array(axis.values)
        for path, axis in plan.axes.items()
        if path in numbers and DECLARATIONS[path].form == "integer"
    }
    if not counts:
        return
    shape = tuple(map(len, counts.values()))
    for place in np.unique(np.linspace(0, math.prod(shape) - 1, MOST_COUNTS_TRIED).astype(np.int64)):
        indices = np.unravel_index(place, shape)
        yield {path: values[index] for (path, values), index in zip(counts.items(), indices, strict=True)}


def _typed(path: str, value: float) -> float | int | str:
    """Write a number as a case takes it: one that may also be a curve stands with its unit."""
    declaration = DECLARATIONS[path]
    if declaration.form == "integer":
        return int(value)
    return float(value) if declaration.form != "curve" else f"{float(value)!r} {unit_of(declaration.kind)}"


def _without_use(plan: SweepPlan, structure: Mapping[str, Any]) -> list[str]:
    """Fields of the case that do not apply to a choice of the structure, so that they are left out."""
    found = []
    for path, declaration in DECLARATIONS.items():
        if declaration.applies is None or path in plan.axes:
            continue
        selector, allowed = declaration.applies
        chosen = structure.get(selector_path(path, selector), allowed[0])
        if chosen not in allowed and typed_at(plan.case.given, path) is not None:
            found.append(path)
    return found


def _lean(batch: Batch, without_load: bool) -> SweepPart:
    """Results at the case's own load, and some without any."""
    found = search_batch(batch, without_load=without_load)
    return SweepPart(found.scalars, {}, found.problem)


def _full(batch: Batch) -> SweepPart:
    """All results of an estimate, and the names of its checks that fail or warn."""
    found = estimate_batch(batch, grid=True)
    cold_face = found.rows.get("cold_face_temperature")
    warmest = np.full(batch.cases, np.nan)
    if cold_face is not None:
        warmest = np.where(found.valid, np.where(np.isnan(cold_face), -np.inf, cold_face).max(axis=0), np.nan)
    texts = {}
    for name, status in (("failed_checks", FAIL), ("warned_checks", WARN)):
        words = np.full(batch.cases, "", dtype=object)
        for check in found.checks:
            where = (check.status == status) & found.valid
            words[where] = words[where] + f"; {check.name}"
        texts[name] = np.array([each.removeprefix("; ") for each in words], dtype=object)
    return SweepPart({**found.scalars, WARMEST_COLD_FACE: warmest}, texts, found.problem)
