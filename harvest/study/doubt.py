"""How sure a net power is: tolerances of inputs carried through the batched model, and which of them matter."""

from __future__ import annotations

from dataclasses import dataclass, field

from harvest.physics.arrays import FloatArray


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

    `nominal` [SI] is the result of the case as it stands, `chance` [-] the share of valid cases beyond the limit.
    """

    limit: str
    result: str
    value: float
    nominal: float
    chance: float


@dataclass(frozen=True)
class ExactField:
    """A field for which there is a default tolerance that is not applied here, and the reason why."""

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
    `exact` are fields whose default tolerance is not applied, with the reason.

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
