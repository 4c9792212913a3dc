"""What must hold within the ratings of a module: contradictions, each with the sentence that explains it."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import NamedTuple

import numpy as np

from harvest.model.case_fields import declared
from harvest.model.stack_sections import GeneratorRating
from harvest.physics.arrays import BoolArray, FloatArray
from harvest.physics.ratings import (
    ELECTRICAL_RATINGS,
    cooler_maximum_heat,
    cooler_parameters_by_voltage,
    generator_parameters,
    generator_voltage_and_resistance,
    heat_of_the_current,
    largest_matched_efficiency,
    matched_power,
    temperature_line,
)
from harvest.physics.thermoelectrics import carnot_efficiency, figure_of_merit
from harvest.quantities import format_quantity

LARGEST_MERIT = 3.0
"""Z T above which ratings cannot be true."""
LARGEST_DEVIATION = 0.05
"""Relative deviation of a number from what the others of its point imply that still passes as rounding."""
LARGEST_HEAT_DEVIATION = 0.5
"""Relative deviation of a cooler's stated heat from the implied one that cannot be the same part."""
LARGEST_SCATTER = 0.25
"""Relative residual of a rated point beyond which the points are not of one module."""
VOLTAGES = ("matched_voltage", "open_circuit_voltage")
KINDS = {name: declaration.kind for name, declaration in declared(GeneratorRating)}


class Contradiction(NamedTuple):
    """Where ratings contradict each other (cases or points), at which field, and a sentence by index."""

    where: BoolArray
    field: str
    sentence: Callable[[int], str]


def rating_numbers(points: Sequence[GeneratorRating]) -> dict[str, FloatArray]:
    """Numbers of rated points by field, SI, (points,); NaN where not given."""
    return {
        name: np.array([np.nan if getattr(each, name) is None else getattr(each, name) for each in points])
        for name in KINDS
    }


def cooler_merit(current: FloatArray, voltage: FloatArray, difference: FloatArray, hot_side: FloatArray) -> FloatArray:
    """Z T [-] at the hot side temperature that ratings of coolers [A, V, K, K] ask for, (cases,)."""
    return figure_of_merit(*cooler_parameters_by_voltage(current, voltage, difference, hot_side)) * hot_side


def cooler_contradictions(
    current: FloatArray, voltage: FloatArray, difference: FloatArray, heat: FloatArray, hot_side: FloatArray
) -> Iterator[Contradiction]:
    """Contradictions in the ratings of coolers [A, V, K, W, K], (cases,); heat is NaN where not stated."""
    yield Contradiction(
        difference >= hot_side,
        "maximum_temperature_difference",
        lambda i: (
            f"{difference[i]:.6g} K is not below the hot_side_temperature of {hot_side[i]:.6g} K; "
            "the cold side would have no temperature left"
        ),
    )
    merit = cooler_merit(current, voltage, difference, hot_side)
    yield Contradiction(
        merit > LARGEST_MERIT,
        "maximum_temperature_difference",
        lambda i: (
            f"{difference[i]:.6g} K below {hot_side[i]:.6g} K asks for Z T = {merit[i]:.2f} there, and no single stage "
            f"comes near {LARGEST_MERIT:g}; give the ratings of a single-stage part"
        ),
    )
    implied = cooler_maximum_heat(current, voltage, difference, hot_side)
    yield Contradiction(
        np.abs(heat / implied - 1.0) > LARGEST_HEAT_DEVIATION,
        "maximum_heat",
        lambda i: (
            f"{_w(heat[i])} does not belong to the other three ratings, which imply {_w(implied[i])}; "
            "check that all four are of the same part and hot side temperature"
        ),
    )


def generator_contradictions(numbers: Mapping[str, FloatArray], merit: float | None) -> Iterator[Contradiction]:
    """Contradictions in rated points of a generator, and numbers that are too few; a stated Z T `merit` [-] or None."""
    hot, cold = numbers["hot_face_temperature"], numbers["cold_face_temperature"]
    yield Contradiction(
        hot <= cold,
        "hot_face_temperature",
        lambda i: (
            f"{format_quantity(hot[i], 'temperature')} is not above the cold face at "
            f"{format_quantity(cold[i], 'temperature')}; {'swap them or ' if hot[i] < cold[i] else ''}correct one"
        ),
    )
    yield from _electrical_contradictions(numbers)
    heat, efficiency = numbers["heat_flow"], numbers["efficiency"]
    carnot, ceiling = carnot_efficiency(hot, cold), largest_matched_efficiency(hot, cold)
    yield Contradiction(
        efficiency >= carnot,
        "efficiency",
        lambda i: (
            f"{efficiency[i]:.4g} is not below the Carnot efficiency of {carnot[i]:.4g} between these faces; "
            "0.045 or 4.5 % is usual"
        ),
    )
    yield Contradiction(
        efficiency >= ceiling,
        "efficiency",
        lambda i: (
            f"{efficiency[i]:.4g} is not below {ceiling[i]:.4g}, which a module that conducts no heat at all would "
            "reach at a matched load between these faces"
        ),
    )
    seebeck, resistance, conductance = generator_parameters(**numbers)
    power, least = matched_power(seebeck, resistance, hot, cold), heat_of_the_current(seebeck, resistance, hot, cold)
    yield Contradiction(
        heat <= least,
        "heat_flow",
        lambda i: (
            f"{_w(heat[i])} is not above the {_w(least[i])} that the current alone takes from the hot face "
            "(a T I - I^2 R/2); nothing is left for conduction"
        ),
    )
    yield Contradiction(
        np.abs(power / efficiency / heat - 1.0) > LARGEST_DEVIATION,
        "heat_flow",
        lambda i: (
            f"{_w(heat[i])} does not go with the efficiency of {efficiency[i]:.4g}, from which "
            f"{_w(power[i] / efficiency[i])} follows; leave one out"
        ),
    )
    implied = figure_of_merit(seebeck, resistance, conductance) * 0.5 * (hot + cold)
    for field in ("efficiency", "heat_flow"):
        yield Contradiction(
            (implied > LARGEST_MERIT) & np.isfinite(numbers[field]),
            field,
            lambda i: (
                f"asks for Z T = {implied[i]:.2f} together with the electrical numbers, and no module comes near "
                f"{LARGEST_MERIT:g}; check it"
            ),
        )
    if merit is not None:
        return
    none = np.isnan(heat).all() and np.isnan(efficiency).all()
    yield Contradiction(
        np.arange(len(hot)) < int(none),
        "efficiency",
        lambda _: (
            "is missing, and no point has one or a heat_flow, so the conductance is unknown; "
            "give one of them, or module.figure_of_merit if it must be assumed"
        ),
    )


def generator_scatter(numbers: Mapping[str, FloatArray], merit: float | None) -> float:
    """Largest relative residual of sound points of a generator from constants or lines in mean temperature [-]."""
    parameters = generator_parameters(**numbers, figure_of_merit=np.array(np.nan if merit is None else merit))
    mean = 0.5 * (numbers["hot_face_temperature"] + numbers["cold_face_temperature"])
    return max(temperature_line(mean, each).largest_residual for each in parameters)


def rating_deviations(numbers: Mapping[str, FloatArray]) -> FloatArray:
    """Relative deviations of electrical numbers from what the others of their point imply [-], (numbers, points)."""
    given = np.stack([numbers[name] for name in ELECTRICAL_RATINGS])
    return np.nan_to_num(np.abs(np.log(given / generator_voltage_and_resistance(given).implied)))


def _electrical_contradictions(numbers: Mapping[str, FloatArray]) -> Iterator[Contradiction]:
    given = np.stack([numbers[name] for name in ELECTRICAL_RATINGS])
    fit = generator_voltage_and_resistance(given)
    unknown = ~np.isfinite(fit.resistance)
    has_current = np.isfinite(numbers["matched_current"])
    has_voltage = np.isfinite(given[[ELECTRICAL_RATINGS.index(name) for name in VOLTAGES]]).any(axis=0)
    yield Contradiction(
        unknown & has_current,
        "matched_current",
        lambda _: (
            "stands without a voltage, so neither Seebeck coefficient nor resistance is known; "
            "add matched_voltage, matched_power or open_circuit_voltage"
        ),
    )
    yield Contradiction(
        unknown & has_voltage,
        "matched_power",
        lambda _: (
            "is missing; a voltage alone leaves the resistance unknown: give matched_power, matched_current or "
            "internal_resistance"
        ),
    )
    yield Contradiction(
        unknown,
        "matched_voltage",
        lambda _: (
            "is missing; two of matched_power, matched_voltage, matched_current, open_circuit_voltage and "
            "internal_resistance determine a point"
        ),
    )
    deviation = rating_deviations(numbers)
    largest = deviation.max(axis=0)
    worst = (deviation >= largest * (1.0 - 1e-9)).argmax(axis=0)  # the first of equals: power before resistance
    wrong = largest > LARGEST_DEVIATION
    for position, name in enumerate(ELECTRICAL_RATINGS):
        yield Contradiction(wrong & (worst == position), name, _why(name, given[position], fit.implied[position]))


def _why(name: str, given: FloatArray, implied: FloatArray) -> Callable[[int], str]:
    def sentence(index: int) -> str:
        said, follows = (format_quantity(each[index], KINDS[name]) for each in (given, implied))
        if name == "matched_power" and given[index] > implied[index]:
            return (
                f"{said} is above {follows}, the most that the open-circuit voltage E and the resistance R of the "
                "other numbers allow: no load takes more than E^2/(4 R)"
            )
        return (
            f"{said} contradicts the other numbers of the point, from which {follows} follows; "
            "at a matched load V = E/2, I = E/(2 R) and P = V I = E^2/(4 R), E without load"
        )

    return sentence


def _w(power: float) -> str:
    return format_quantity(power, "power")
