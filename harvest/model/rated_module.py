"""The module of a case from the ratings of a cooler or a generator."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from harvest.model.batch import Batch
from harvest.model.materials import MaterialRecord, load_material
from harvest.model.module import COOLER, GENERATOR, LARGEST_DISAGREEMENT, DescribedModule, joined
from harvest.model.rating_rules import (
    cooler_contradictions,
    cooler_merit,
    rating_deviations,
    rating_numbers,
)
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.physics.curves import HeldCurve, PolynomialCurve
from harvest.physics.ratings import (
    SMALLEST_SPAN,
    ModuleParameters,
    ScaledModule,
    cooler_maximum_heat,
    cooler_parameters_by_heat,
    cooler_parameters_by_voltage,
    generator_parameters,
    matched_power,
    temperature_line,
)
from harvest.physics.thermoelectrics import LegModule, Material, MeanTemperatureModule, ModuleModel
from harvest.quantities import format_quantity

COOLER_RATINGS = (
    "maximum_current",
    "maximum_voltage",
    "maximum_temperature_difference",
    "maximum_heat",
    "hot_side_temperature",
)
SOURCES = {"Lineykin": "Lineykin and Ben-Yaakov", "Zhang": "Zhang"}
COMMON_MERIT = 1.3
"""Z T above which a cooler's ratings are worth a warning; common practice, no source."""


@dataclass(frozen=True)
class CoolerComparison:
    """One cooler as a generator between two faces, whatever its case chooses, SI.

    Matched-load power with the parameters `corrected` to the operating temperature and `uncorrected`, and the ratio of
    the second to the first; `by_voltage` and `by_heat` the parameters as rated by the two extractions (`by_heat` None
    and `stated_heat` NaN where no heat is stated); `implied_heat` the heat rating that the other three imply.
    """

    corrected_power: float
    uncorrected_power: float
    power_ratio: float
    by_voltage: RatedParameters
    by_heat: RatedParameters | None
    implied_heat: float
    stated_heat: float


@dataclass(frozen=True)
class RatedParameters:
    """A module's parameters as rated: Seebeck coefficient [V/K], resistance [ohm], conductance [W/K]."""

    seebeck: float
    resistance: float
    conductance: float


def cooler_contradictions_of(batch: Batch) -> Iterator[tuple[BoolArray, Callable[[int], str]]]:
    """Cases whose cooler ratings contradict each other, (cases,), with a sentence by index."""
    for where, field, sentence in cooler_contradictions(*_cooler_numbers(batch)):
        yield where, lambda index, field=field, said=sentence: f"module.cooler_rating.{field}: {said(index)}"  # type: ignore[misc]


def cooler_heat_disagreement(batch: Batch) -> FloatArray:
    """Stated over implied heat rating of coolers, less one [-], (cases,); NaN where no heat is stated.

    It is also by how much each parameter differs between the two extractions.
    """
    current, voltage, difference, heat, hot_side = _cooler_numbers(batch)
    return heat / cooler_maximum_heat(current, voltage, difference, hot_side) - 1.0


def cooler_matched_powers(batch: Batch, hot_face: FloatArray, cold_face: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Matched-load power of one module made of a cooler, corrected for temperature and uncorrected [W].

    Parameters: a batch with cooler ratings; face temperatures [K], (..., cases). Both whatever the case uses.
    """
    corrected = _bismuth_telluride(batch)[0].parameters(hot_face, cold_face)
    uncorrected = _cooler_parameters(batch)
    return (
        matched_power(corrected[0], corrected[1], hot_face, cold_face),
        matched_power(uncorrected.seebeck_coefficient, uncorrected.resistance, hot_face, cold_face),
    )


def cooler_comparison(
    batch: Batch, hot_face_temperature: float, cold_face_temperature: float
) -> CoolerComparison | None:
    """Compare what the ratings of the first case's cooler give between two faces [K]; None for another module."""
    if batch.base.module.cooler_rating is None:
        return None
    current, voltage, difference, heat, hot_side = _cooler_numbers(batch)
    powers = cooler_matched_powers(
        batch, np.full(batch.cases, hot_face_temperature), np.full(batch.cases, cold_face_temperature)
    )
    corrected, uncorrected = (float(each[0]) for each in powers)
    by_heat = cooler_parameters_by_heat(current, heat, difference, hot_side)
    return CoolerComparison(
        corrected_power=corrected,
        uncorrected_power=uncorrected,
        power_ratio=uncorrected / corrected,
        by_voltage=_first_case(cooler_parameters_by_voltage(current, voltage, difference, hot_side)),
        by_heat=_first_case(by_heat) if np.isfinite(heat[0]) else None,
        implied_heat=float(cooler_maximum_heat(current, voltage, difference, hot_side)[0]),
        stated_heat=float(heat[0]),
    )


def _first_case(parameters: ModuleParameters) -> RatedParameters:
    return RatedParameters(*(float(each[0]) for each in parameters))


def _cooler_numbers(batch: Batch) -> tuple[FloatArray, ...]:
    return tuple(batch.number(f"module.cooler_rating.{name}") for name in COOLER_RATINGS)


def _cooler_parameters(batch: Batch) -> ModuleParameters:
    """Parameters as rated, by the extraction that the case chooses, (cases,)."""
    rating = batch.base.module.cooler_rating
    assert rating is not None
    current, voltage, difference, heat, hot_side = _cooler_numbers(batch)
    if rating.extraction == "Zhang":
        return cooler_parameters_by_heat(current, heat, difference, hot_side)
    return cooler_parameters_by_voltage(current, voltage, difference, hot_side)


def _bismuth_telluride(batch: Batch) -> tuple[ScaledModule, tuple[MaterialRecord, ...]]:
    """Legs of the bundled material, held beyond its range, with the rated parameters at the rating's two faces."""
    records = (load_material("bismuth telluride n"), load_material("bismuth telluride p"))
    n_type, p_type = (_held(record) for record in records)
    one, nothing = np.ones(batch.cases), np.zeros(batch.cases)
    *_, difference, _, hot_side = _cooler_numbers(batch)
    legs = LegModule(n_type, p_type, one, one, one, nothing, nothing)
    return ScaledModule.through(legs, _cooler_parameters(batch), hot_side, hot_side - difference), records


def _held(record: MaterialRecord) -> Material:
    return Material(
        HeldCurve(record.material.seebeck, record.lower, record.upper),
        HeldCurve(record.material.resistivity, record.lower, record.upper),
        HeldCurve(record.material.conductivity, record.lower, record.upper),
    )


def of_cooler_ratings(batch: Batch) -> DescribedModule:
    """Parameters by the chosen extraction, as rated or brought to the operating temperature."""
    rating = batch.base.module.cooler_rating
    assert rating is not None
    apart = float(cooler_heat_disagreement(batch)[0])
    hot_side = format_quantity(float(batch.number("module.cooler_rating.hot_side_temperature")[0]), "temperature")
    says = f"from {COOLER} at {hot_side} ({SOURCES[rating.extraction]})"
    stated = np.isfinite(apart)
    says += f", two extractions {100 * abs(apart):.1f} % apart" if stated else ", no fourth rating to compare"
    warnings: list[str] = []
    if abs(apart) > LARGEST_DISAGREEMENT:
        warnings.append(
            f"The stated heat rating differs by {100 * apart:+.1f} % from the one that the other three imply, "
            "and so do the parameters by the two extractions."
        )
    merit = float(cooler_merit(*(_cooler_numbers(batch)[each] for each in (0, 1, 2, 4)))[0])
    if merit > COMMON_MERIT:
        warnings.append(
            f"The ratings ask for Z T = {merit:.2f} at their hot side temperature, and common bismuth telluride stays "
            "near 1 (common practice, no source): check maximum_temperature_difference and that it has one stage."
        )
    if rating.temperature_dependence == "none":
        warnings.append(
            f"The parameters are used as rated at {hot_side}, whatever the operating temperature, "
            "which flatters a warmer module."
        )
        constant = MeanTemperatureModule(*(PolynomialCurve.constant(each) for each in _cooler_parameters(batch)))
        return joined(batch, constant, COOLER, f"{says}, without temperature dependence", warnings=tuple(warnings))
    model, records = _bismuth_telluride(batch)
    return joined(
        batch,
        model,
        COOLER,
        f"{says}, with the temperature dependence of {rating.temperature_dependence}",
        records,
        lower=max(each.lower for each in records),
        upper=min(each.upper for each in records),
        warnings=tuple(warnings),
    )


def of_generator_ratings(batch: Batch) -> DescribedModule:
    """Constants of one point, or straight lines in the mean temperature of several."""
    module = batch.base.module
    assert module.generator_rating is not None
    numbers = rating_numbers(module.generator_rating)
    hot, cold = numbers["hot_face_temperature"], numbers["cold_face_temperature"]
    merit = batch.number("module.figure_of_merit")
    by_merit = bool(np.isfinite(merit[0]))
    parameters = generator_parameters(**numbers, figure_of_merit=np.array(merit[0]))
    mean = 0.5 * (hot + cold)
    lines = [temperature_line(mean, each) for each in parameters]
    residual = max(line.largest_residual for line in lines)
    model: ModuleModel = MeanTemperatureModule(*(line.curve for line in lines))
    if "module.figure_of_merit" in batch.varied:
        same = np.ones(batch.cases)
        model = ScaledModule(model, np.stack([same, same, merit[0] / merit]))
    words = f"from {GENERATOR} at {_faces(hot[0], cold[0])} (hot/cold face)"
    if len(hot) > 1:
        words = f"from {GENERATOR} at {len(hot)} points"
    if np.ptp(mean) >= SMALLEST_SPAN:
        words += (
            f", straight lines in mean temperature from {format_quantity(float(mean.min()), 'temperature')} to "
            f"{format_quantity(float(mean.max()), 'temperature')} and held beyond"
        )
    else:
        words += ", constants without temperature dependence"
    if len(hot) > 1:
        words += f", largest residual {100 * residual:.1f} %"
    apart = rating_deviations(numbers).max()
    if apart > 0.0:
        words += f", redundant numbers within {100 * apart:.1f} %"
    words += f", conductance from an assumed Z T of {merit[0]:.3g}" if by_merit else ", conductance from the rated heat"
    warnings: tuple[str, ...] = ()
    if residual > LARGEST_DISAGREEMENT:
        warnings = (f"A rated point lies {100 * residual:.1f} % from the fit through all points; check the points.",)
    return joined(
        batch,
        model,
        GENERATOR,
        words,
        lower=float(cold.min()),
        upper=float(hot.max()),
        warnings=warnings,
        residual=residual,
    )


def _faces(hot: float, cold: float) -> str:
    return f"{hot - 273.15:.6g}/{cold - 273.15:.6g} degC"
