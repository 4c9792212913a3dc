"""How sure a net power is: tolerances of inputs carried through the batched model, and which of them matter."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

import numpy as np

from harvest.errors import InputError, NoAnswerError
from harvest.model.batch import Batch
from harvest.model.case import DECLARATIONS, Case, value_at
from harvest.model.checks import AT_LEAST
from harvest.model.design import SPEC_NUMBERS, stream_excess_air_ratio
from harvest.model.search import SEARCH_CELLS, Outcomes, search_batch
from harvest.model.stream_sections import HEAT_SINK
from harvest.model.tolerances import FACTOR, NONE, UNIFORM, Tolerance
from harvest.physics.arrays import FloatArray, IntArray
from harvest.quantities import StandardVolumeFlow
from harvest.study.common_tolerances import COMMON_TOLERANCES
from harvest.study.limits import LIMITS, ROUNDING, WINDOW, asks_without_load, limit_of
from harvest.study.reasons import counted_reasons

SAMPLES = 4096
FEWEST_SAMPLES, MOST_SAMPLES = 64, 2**16
SEED = 1
INDEX_SHARE = 4
"""Cases of the percentiles for each base case of the indices."""
RESAMPLED = 200
"""Times that the indices are worked out anew from cases drawn with repetition, for their intervals."""
SHARE_WITHIN = 0.95
QUANTILE = 1.959963984540054
"""Standard deviations within which 95 of 100 values of a normal distribution lie."""
EDGE = 1e-12
"""Least probability that is drawn: a normal distribution has no end."""
SMALLEST = 1e-300
"""Next to zero [SI], where a number must lie above it."""
OF_TABLES = (*SPEC_NUMBERS, "pressure")
"""Fields of which each different value costs a table of the fluid's properties."""
LEVELS = 12
AIR_STEP = 0.005
"""Relative step of an excess air that follows from two flows."""
WORTHWHILE = 0.05
"""Part of the band's width that knowing an input must take away to be worth measuring."""
RESULTS = (
    "net_power",
    "generated_power",
    "hot_drive_power",
    "cold_drive_power",
    "voltage",
    "hot_outlet_temperature",
    "cold_outlet_temperature",
    "hot_pressure_drop",
    "cold_pressure_drop",
    "hottest_face_temperature",
)
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class Spread:
    """How one result is spread over the cases that have an answer; SI, in the unit of the result.

    `nominal` is the result of the case as it stands, `mean` and `standard_deviation` are of the sample, `p5` to `p95`
    its percentiles: 5, 10, 50, 90 and 95 of 100 cases lie below. `p10` to `p90` is the 80 % band, `p5` to `p95` the
    90 % band.
    """

    nominal: float
    mean: float
    standard_deviation: float
    p5: float
    p10: float
    p50: float
    p90: float
    p95: float


@dataclass(frozen=True)
class UncertainInput:
    """One field that is not known exactly, and what that does to the net power.

    `field` is its path and `kind` the name of its kind of quantity, `nominal` its value [SI]; `tolerance` how it may be
    off, in words ("+- 5 %"), `distribution` "normal", "uniform" or "factor"; `lower` and `upper` [SI] hold 95 of 100
    values of a normal or factor distribution, all of a uniform one. `origin` is "given" in the case or "default", and
    `source` says where a default is from ("" where given).

    `first_order` [-] is the share of the variance of net power that this input brings alone, `total` [-] its share with
    all its interactions; `first_order_interval` and `total_interval` [-] hold them at 95 % (bootstrap).
    `net_power_at_p10` and `net_power_at_p90` [W] are the net power with this input alone at its own 10th and 90th
    percentile, and `swing` [W] the second less the first. `band_narrowing` [-] is by how much of its width the band of
    net power would narrow, on average, if this input were known exactly: 1 - sqrt(1 - first_order).
    """

    field: str
    kind: str
    nominal: float
    tolerance: str
    distribution: str
    lower: float
    upper: float
    origin: str
    source: str
    first_order: float
    total: float
    first_order_interval: tuple[float, float]
    total_interval: tuple[float, float]
    net_power_at_p10: float
    net_power_at_p90: float
    swing: float
    band_narrowing: float


@dataclass(frozen=True)
class LimitChance:
    """How likely a limit is broken: the name of the `limit`, the `result` it bounds, its `value` [SI].

    The result must be "at most" or "at least" the value, as `bound` says; a converter's window is two limits. `nominal`
    [SI] is the result of the case as it stands, `chance` [-] the share of valid cases beyond the limit.
    """

    limit: str
    result: str
    value: float
    bound: str
    nominal: float
    chance: float


@dataclass(frozen=True)
class ExactField:
    """A field whose tolerance, given or default, is not applied here, and the reason why."""

    field: str
    reason: str


@dataclass(frozen=True)
class Doubt:
    """How sure the results of a case are.

    `results` is the spread by result name: net_power, generated_power, hot_drive_power, cold_drive_power, voltage,
    hot_outlet_temperature, cold_outlet_temperature, hot_pressure_drop, cold_pressure_drop, hottest_face_temperature.
    A result that the case does not have (the outlet of a reservoir) is left out.

    `chance_negative` [-] is the share of valid cases with a net power below zero, `limits` the chance of breaking each
    limit. `inputs` are in order of `first_order`, the largest first; `worth_measuring` names the fields of those that
    would narrow the band noticeably if they were known exactly, in the same order, few of them.
    `interactions` [-] is the share of the variance that no input brings alone, 1 - sum of first_order, at least 0.
    `exact` are fields whose tolerance is not applied, with the reason.

    `samples` cases were drawn for the percentiles with `seed`, of which `valid` have an answer; `invalid` counts the
    others by reason and they are in no percentile. The indices took `index_cases` = `index_samples` x (inputs + 2)
    further cases, of which `index_invalid` had no answer; they stand in the indices as the mean of the valid ones.

    `net_power_sample` [W] (valid,) are the sampled net powers, ascending, for drawings; it is not part of the JSON.
    """

    results: dict[str, Spread]
    chance_negative: float
    limits: tuple[LimitChance, ...]
    inputs: tuple[UncertainInput, ...]
    worth_measuring: tuple[str, ...]
    interactions: float
    exact: tuple[ExactField, ...]
    samples: int
    seed: int
    valid: int
    invalid: dict[str, int]
    index_samples: int
    index_cases: int
    index_invalid: int
    net_power_sample: FloatArray = field(compare=False, repr=False)


# ---- Distributions


@dataclass(frozen=True)
class Drawn:
    """A field with the distribution it is drawn from."""

    path: str
    nominal: float
    tolerance: Tolerance
    origin: str
    source: str

    def values(self, probability: FloatArray) -> FloatArray:
        """Values [SI] below which the field lies with a `probability` [-]; one shape.

        Every distribution is cut off at the ends of the field's allowed range.
        """
        from scipy.special import ndtr, ndtri

        low, high = self.tolerance.ends(self.nominal)
        lowest, highest = self._range()
        if self.tolerance.distribution == UNIFORM:
            low, high = np.clip([low, high], lowest, highest)
            return np.asarray(low + (high - low) * probability)
        scale = np.log if self.tolerance.distribution == FACTOR else np.asarray
        low, high, least, most = (float(scale(each)) for each in (low, high, lowest, highest))
        middle, deviation = 0.5 * (low + high), 0.5 * (high - low) / QUANTILE
        below, above = ndtr((np.array([least, most]) - middle) / deviation)
        drawn = middle + deviation * ndtri(np.clip(below + (above - below) * probability, EDGE, 1.0 - EDGE))
        drawn = np.exp(drawn) if self.tolerance.distribution == FACTOR else drawn
        return np.asarray(np.clip(drawn, lowest, highest))

    def in_steps(self, values: FloatArray) -> FloatArray:
        """Values [SI] in steps where each costs a table of the fluid, for compositions and pressures; others as given.

        The nominal value is one of the steps, and LEVELS of them span 95 of 100 values.
        """
        if self.path.rpartition(".")[2] not in OF_TABLES:
            return values
        low, high = self.tolerance.ends(self.nominal)
        return np.clip(in_steps(values, self.nominal, (high - low) / LEVELS), *self._range())

    def _range(self) -> tuple[float, float]:
        """Allowed range of the field [SI]; a factor keeps to numbers above zero."""
        declaration = DECLARATIONS[self.path]
        lowest = -np.inf if declaration.minimum is None else declaration.minimum
        if self.tolerance.distribution == FACTOR:
            lowest = max(lowest, SMALLEST)
        if declaration.above is not None:
            lowest = max(lowest, declaration.above + SMALLEST)
        return lowest, np.inf if declaration.maximum is None else declaration.maximum


def drawn_inputs(case: Case) -> tuple[tuple[Drawn, ...], tuple[ExactField, ...]]:
    """Fields of a case that are in doubt, those that it states first, and fields whose default does not apply."""
    stated = case.uncertainty or {}
    candidates = [(path, tolerance, "given", "") for path, tolerance in stated.items()]
    for common in COMMON_TOLERANCES:
        for path in common.fields:
            known = {each[0] for each in candidates}
            if (
                path not in known
                and value_at(case, path) is not None
                and _is_asked(case, path)
                and common.holds(case, path)
            ):
                candidates.append((path, common.tolerance, "default", common.source))
    found, exact = [], {}
    for path, tolerance, origin, source in candidates:
        nominal = _nominal(case, path)
        if tolerance.distribution == NONE:
            exact[path] = 'said to be exact by "none" in [uncertainty]'
        elif tolerance.relative and nominal == 0.0:
            exact[path] = (
                "0 here, and a share of 0 is nothing; if it is in doubt, give it in [uncertainty] as a difference"
            )
        elif origin == "default" and path in case.assumed and nominal == DECLARATIONS[path].maximum:
            exact[path] = "is assumed to be without loss"
        else:
            found.append(Drawn(path, nominal, tolerance, origin, source))
    for side in ("hot", "cold"):
        if getattr(case, side).drive_curve is not None:
            exact[f"{side}.drive_curve"] = "a curve is taken as it is"
    return tuple(found), tuple(ExactField(*each) for each in exact.items())


def _nominal(case: Case, path: str) -> float:
    value = value_at(case, path)
    return float(value.volume_flow if isinstance(value, StandardVolumeFlow) else value)


def _is_asked(case: Case, path: str) -> bool:
    """Whether a field plays a part in a case, by the choice beside or above it that decides so."""
    applies, owner = DECLARATIONS[path].applies, path.rpartition(".")[0]
    if applies is None:
        return True
    while owner and f"{owner}.{applies[0]}" not in DECLARATIONS:
        owner = owner.rpartition(".")[0]
    return value_at(case, f"{owner}.{applies[0]}") in applies[1]


# ---- The model that is asked


def answered(case: Case, inputs: tuple[Drawn, ...], values: FloatArray, *, without_load: bool = False) -> Outcomes:
    """Results of the case with its uncertain fields at `values` [SI], (inputs, cases); in bearable chunks.

    With `without_load` they hold what limits without load look at, which takes a solution of its own.
    """
    cases = values.shape[1]
    chunk = max(1, SEARCH_CELLS // (case.stack.rows * case.stack.segments))
    parts = []
    for first in range(0, cases, chunk):
        some = values[:, first : first + chunk]
        varied = {each.path: each.in_steps(numbers) for each, numbers in zip(inputs, some, strict=True)}
        batch = _with_few_gases(Batch(case, some.shape[1], varied))
        parts.append(search_batch(batch, without_load=without_load))
    return Outcomes(
        {name: np.concatenate([part.scalars[name] for part in parts]) for name in parts[0].scalars},
        np.concatenate([part.problem for part in parts]),
    )


def _with_few_gases(batch: Batch) -> Batch:
    """Return the batch with an excess air that follows from two flows in steps, as each different gas costs a table."""
    for name in ("hot", "cold"):
        if not (batch.given(f"{name}.mass_flow") and batch.given(f"{name}.fuel_flow")):
            continue
        nominal = stream_excess_air_ratio(Batch(batch.base), name)
        ratio = in_steps(stream_excess_air_ratio(batch, name), float(nominal[0]), AIR_STEP * float(nominal[0]))
        side = dataclasses.replace(getattr(batch.base, name), excess_air_ratio=1.0)
        varied = {**batch.varied, f"{name}.excess_air_ratio": ratio}
        batch = dataclasses.replace(batch, base=dataclasses.replace(batch.base, **{name: side}), varied=varied)
    return batch


def in_steps(values: FloatArray, middle: float, step: float) -> FloatArray:
    """Nearest of the numbers that are whole steps from a middle; one shape."""
    return np.asarray(middle + step * np.round((values - middle) / step))


# ---- Propagation


def probabilities(inputs: int, samples: int, seed: int) -> FloatArray:
    """Evenly spread points of the unit cube, (inputs, samples): a scrambled Sobol sequence (scipy)."""
    from scipy.stats import qmc

    return np.asarray(qmc.Sobol(inputs, scramble=True, seed=np.random.default_rng(seed)).random(samples).T)


def spread(nominal: float, sample: FloatArray) -> Spread:
    """Percentiles, mean and standard deviation of a sample without NaN, (cases,), beside a nominal value."""
    percentiles = np.quantile(sample, [0.05, 0.10, 0.50, 0.90, 0.95])
    return Spread(nominal, float(sample.mean()), float(sample.std()), *map(float, percentiles))


@dataclass(frozen=True)
class Indices:
    """Sobol indices [-], (inputs,), and their intervals at 95 %, (2, inputs); `cases` asked, `invalid` of them NaN."""

    first_order: FloatArray
    total: FloatArray
    first_order_interval: FloatArray
    total_interval: FloatArray
    cases: int
    invalid: int


def indices(answer: Callable[[FloatArray], FloatArray], inputs: int, samples: int, seed: int) -> Indices:
    """First-order and total sensitivity indices of a function of the unit cube.

    Parameters: `answer`, from probabilities (inputs, cases) to a result (cases,), NaN where there is none; `samples`, a
    power of two: samples x (inputs + 2) cases are asked. An answer that is NaN stands for the mean of the others.
    Source: Saltelli et al. 2010 (scipy.stats.sobol_indices); intervals by bootstrap over the samples.
    """
    from scipy.stats import sobol_indices

    both = probabilities(2 * inputs, samples, seed).reshape(2, inputs, samples)
    swapped = np.repeat(both[0][None], inputs, axis=0)
    swapped[np.arange(inputs), np.arange(inputs)] = both[1]
    results = answer(np.concatenate([*both, *swapped], axis=1))
    lost = ~np.isfinite(results)
    results = np.where(lost, results[~lost].mean(), results).reshape(inputs + 2, 1, samples)
    if inputs == 1:  # all of the variance is that of the only input
        one, certain = np.ones(1), np.ones((2, 1))
        return Indices(one, one, certain, certain, results.size, int(lost.sum()))

    def of(places: IntArray) -> FloatArray:
        some = results[:, :, places]
        found = sobol_indices(func={"f_A": some[0], "f_B": some[1], "f_AB": some[2:]}, n=samples)
        return np.stack([found.first_order, found.total_order])

    best = of(np.arange(samples))
    rng = np.random.default_rng(seed)
    again = np.stack([of(rng.integers(0, samples, samples)) for _ in range(RESAMPLED)])
    ends = np.quantile(again, [0.5 - 0.5 * SHARE_WITHIN, 0.5 + 0.5 * SHARE_WITHIN], axis=0)
    return Indices(best[0], best[1], ends[:, 0], ends[:, 1], results.size, int(lost.sum()))


# ---- The study


def doubt(case: Case, samples: int = SAMPLES, seed: int = SEED, progress: Progress | None = None) -> Doubt:
    """How sure the results of a case are, from the tolerances of its inputs.

    Parameters: `case`, with or without tolerances in [uncertainty]; `samples`, a power of two from 64 to 65,536, for
    the percentiles, a quarter of it as base of the indices; `seed`, from 0 on; `progress`, called with cases done and
    in all. Inputs are drawn independently of each other. Raises InputError for wrong numbers or where nothing is in
    doubt, NoAnswerError where the case itself, or every drawn one, has no answer.
    """
    if not FEWEST_SAMPLES <= samples <= MOST_SAMPLES or samples & (samples - 1):
        raise InputError(
            f"samples: {samples} is not possible; give a power of two from {FEWEST_SAMPLES} to {MOST_SAMPLES:,}, "
            f"such as {SAMPLES}"
        )
    if seed < 0:
        raise InputError(f"seed: {seed} is not possible; give a whole number from 0 on")
    inputs, exact = drawn_inputs(case)
    if not inputs:
        raise InputError("uncertainty: no field is in doubt; give at least one a tolerance")
    index_samples = max(FEWEST_SAMPLES, samples // INDEX_SHARE)
    all_of_them = samples + index_samples * (len(inputs) + 2)

    def at(points: FloatArray) -> FloatArray:
        return np.stack([each.values(row) for each, row in zip(inputs, points, strict=True)])

    nominal, swings = _one_at_a_time(case, inputs)
    points = probabilities(len(inputs), samples, seed)
    found = answered(case, inputs, at(points), without_load=asks_without_load(case))
    valid = found.problem == ""
    if not valid.any():
        raise NoAnswerError("\n".join(["no drawn case has an answer", *counted_reasons(found.problem)]))
    if progress is not None:
        progress(samples, all_of_them)
    shares = indices(
        lambda points: answered(case, inputs, at(points)).scalars["net_power"], len(inputs), index_samples, seed
    )
    if progress is not None:
        progress(all_of_them, all_of_them)
    scalars = {name: values[valid] for name, values in found.scalars.items()}
    told = [_uncertain(each, swings[:, place], shares, place) for place, each in enumerate(inputs)]
    told.sort(key=lambda each: -each.first_order)
    net = scalars["net_power"]
    return Doubt(
        results={
            name: spread(float(nominal[name]), scalars[name])
            for name in RESULTS
            if name == "net_power" or (_is_told(case, name) and np.ptp(scalars[name]) > 0)
        },
        chance_negative=float((net < 0).mean()),
        limits=tuple(_chances(case, nominal, scalars)),
        inputs=tuple(told),
        worth_measuring=tuple(each.field for each in told if each.band_narrowing >= WORTHWHILE),
        interactions=max(0.0, 1.0 - float(shares.first_order.sum())),
        exact=exact,
        samples=samples,
        seed=seed,
        valid=int(valid.sum()),
        invalid=counted_reasons(found.problem),
        index_samples=index_samples,
        index_cases=shares.cases,
        index_invalid=shares.invalid,
        net_power_sample=np.sort(net),
    )


def _one_at_a_time(case: Case, inputs: tuple[Drawn, ...]) -> tuple[dict[str, float], FloatArray]:
    """Results of the case as it stands, and net power [W] with each input at P10 and at P90, (2, inputs)."""
    count = len(inputs)
    values = np.tile(np.array([each.nominal for each in inputs])[:, None], 1 + 2 * count)
    for place, each in enumerate(inputs):
        values[place, 1 + place], values[place, 1 + count + place] = each.values(np.array([0.1, 0.9]))
    found = answered(case, inputs, values, without_load=asks_without_load(case))
    if found.problem[0]:
        raise NoAnswerError(f"the case has no answer as it stands: {found.problem[0]}")
    first = {name: float(each[0]) for name, each in found.scalars.items()}
    return first, found.scalars["net_power"][1:].reshape(2, count)


def _uncertain(drawn: Drawn, swing: FloatArray, shares: Indices, place: int) -> UncertainInput:
    kind = DECLARATIONS[drawn.path].kind
    lower, upper = drawn.values(np.array([0.5 - 0.5 * SHARE_WITHIN, 0.5 + 0.5 * SHARE_WITHIN]))
    if drawn.tolerance.distribution == UNIFORM:
        lower, upper = drawn.values(np.array([0.0, 1.0]))
    first, total = (float(each[place]) for each in (shares.first_order, shares.total))
    low, high = (tuple(map(float, each[:, place])) for each in (shares.first_order_interval, shares.total_interval))
    return UncertainInput(
        field=drawn.path,
        kind=kind,
        nominal=drawn.nominal,
        tolerance=drawn.tolerance.text(kind),
        distribution=drawn.tolerance.distribution,
        lower=float(lower),
        upper=float(upper),
        origin=drawn.origin,
        source=drawn.source,
        first_order=first,
        total=total,
        first_order_interval=(low[0], low[1]),
        total_interval=(high[0], high[1]),
        net_power_at_p10=float(swing[0]),
        net_power_at_p90=float(swing[1]),
        swing=float(swing[1] - swing[0]),
        band_narrowing=1.0 - float(np.sqrt(1.0 - min(max(first, 0.0), 1.0))),
    )


def _is_told(case: Case, result: str) -> bool:
    """Whether a case has a result: a reservoir has no outlet, converters of their own no common voltage."""
    if result == "voltage":
        return not case.electrical.independent
    side = result.partition("_")[0]
    return side not in ("hot", "cold") or (
        getattr(case, side).fluid != "reservoir" and getattr(case, side).duct.kind != HEAT_SINK
    )


def _chances(case: Case, nominal: dict[str, float], scalars: dict[str, FloatArray]) -> Iterator[LimitChance]:
    for name, (result, sign) in LIMITS.items():
        limit = limit_of(case, name)
        if np.isfinite(limit):
            yield _chance(name, result, limit, sign, nominal, scalars)
    window = case.electrical.converter_window
    if window is not None and not case.electrical.independent:
        for limit, sign in zip(window, (-1.0, 1.0), strict=True):
            yield _chance(WINDOW, "voltage", limit, sign, nominal, scalars, ROUNDING * limit)


def _chance(
    name: str,
    result: str,
    limit: float,
    sign: float,
    nominal: dict[str, float],
    scalars: dict[str, FloatArray],
    rounding: float = 0.0,
) -> LimitChance:
    """Chance of a limit from above, `sign` 1, or from below, -1."""
    broken = sign * scalars[result] > sign * limit + rounding
    return LimitChance(name, result, limit, "at most" if sign > 0 else AT_LEAST, nominal[result], float(broken.mean()))
