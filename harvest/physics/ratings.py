"""A module's parameters from the ratings of a data sheet, as a cooler or as a generator, and the ratings from them.

Parameters and ratings refer to the module's outer faces and are constants of one rating; `ScaledModule` lays the
temperature dependence of a material over them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from harvest.physics.arrays import FloatArray, IntArray
from harvest.physics.curves import Curve, PolynomialCurve, TableCurve
from harvest.physics.thermoelectrics import JunctionParameters, ModuleModel, figure_of_merit, hot_junction_heat

UNKNOWN: FloatArray = np.array(np.nan)
SMALLEST_SPAN = 10.0
"""Mean temperatures closer than this [K] tell nothing about the dependence on temperature."""

# Each number at a matched load is factor x E^p x R^q, E the open-circuit voltage and R the internal resistance.
_POWERS = {
    "matched_power": (2.0, -1.0, 0.25),
    "matched_voltage": (1.0, 0.0, 0.5),
    "matched_current": (1.0, -1.0, 0.5),
    "open_circuit_voltage": (1.0, 0.0, 1.0),
    "internal_resistance": (0.0, 1.0, 1.0),
}
ELECTRICAL_RATINGS = tuple(_POWERS)


class ModuleParameters(NamedTuple):
    """Parameters of a whole module: Seebeck coefficient [V/K], resistance [ohm], conductance [W/K]."""

    seebeck_coefficient: FloatArray
    resistance: FloatArray
    conductance: FloatArray


class CoolerRatings(NamedTuple):
    """The four ratings of a cooler at one hot side temperature: current [A], voltage [V], difference [K], heat [W].

    Current and voltage are those of the largest temperature difference without heat; heat is that pumped at the same
    current without a difference.
    """

    maximum_current: FloatArray
    maximum_voltage: FloatArray
    maximum_temperature_difference: FloatArray
    maximum_heat: FloatArray


class GeneratorRatings(NamedTuple):
    """What a generator gives into a matched load between two faces; SI, efficiency [-]."""

    matched_power: FloatArray
    matched_voltage: FloatArray
    matched_current: FloatArray
    open_circuit_voltage: FloatArray
    internal_resistance: FloatArray
    heat_flow: FloatArray
    efficiency: FloatArray


def cooler_parameters_by_voltage(
    maximum_current: FloatArray,
    maximum_voltage: FloatArray,
    maximum_temperature_difference: FloatArray,
    hot_side_temperature: FloatArray,
) -> ModuleParameters:
    """Parameters from three ratings of a cooler: a [V/K], R [ohm], K [W/K].

    Parameters: `maximum_current` [A], `maximum_voltage` [V], `maximum_temperature_difference` [K] below
    `hot_side_temperature` [K]; shapes broadcast. For a single stage. Source: Lineykin and Ben-Yaakov, IEEE Trans. Ind.
    Appl. 43 (2007) 505: a = Vmax/Th, R = Vmax (Th - dTmax)/(Imax Th), K = Imax Vmax (Th - dTmax)/(2 Th dTmax).
    """
    coldest = hot_side_temperature - maximum_temperature_difference
    share = coldest / hot_side_temperature
    return ModuleParameters(
        maximum_voltage / hot_side_temperature,
        maximum_voltage * share / maximum_current,
        0.5 * maximum_current * maximum_voltage * share / maximum_temperature_difference,
    )


def cooler_parameters_by_heat(
    maximum_current: FloatArray,
    maximum_heat: FloatArray,
    maximum_temperature_difference: FloatArray,
    hot_side_temperature: FloatArray,
) -> ModuleParameters:
    """Parameters from a cooler's ratings with the heat in place of the voltage: a [V/K], R [ohm], K [W/K].

    Parameters: `maximum_current` [A], `maximum_heat` [W], `maximum_temperature_difference` [K] below
    `hot_side_temperature` [K]; shapes broadcast. For a single stage. Source: Zhang, Int. J. Refrig. 33 (2010) 1187
    (from memory): a = 2 Qmax/(Imax (Th + dTmax)), R = a (Th - dTmax)/Imax, K = Qmax (Th - dTmax)/((Th + dTmax) dTmax).
    """
    difference = maximum_temperature_difference
    coldest, total = hot_side_temperature - difference, hot_side_temperature + difference
    seebeck = 2.0 * maximum_heat / (maximum_current * total)
    return ModuleParameters(seebeck, seebeck * coldest / maximum_current, maximum_heat * coldest / (total * difference))


def cooler_maximum_heat(
    maximum_current: FloatArray,
    maximum_voltage: FloatArray,
    maximum_temperature_difference: FloatArray,
    hot_side_temperature: FloatArray,
) -> FloatArray:
    """Heat rating that the other three ratings of a cooler imply, Imax Vmax (Th + dTmax)/(2 Th) [W].

    Parameters as in `cooler_parameters_by_voltage`. Its ratio to the stated heat is also the ratio of each of the
    three parameters by the two extractions.
    """
    share = (hot_side_temperature + maximum_temperature_difference) / hot_side_temperature
    return 0.5 * maximum_current * maximum_voltage * share


def cooler_ratings(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    conductance: FloatArray,
    hot_side_temperature: FloatArray,
) -> CoolerRatings:
    """Ratings of a cooler with constant parameters; the inverse of both extractions.

    Parameters: a [V/K], R [ohm], K [W/K], all positive, `hot_side_temperature` [K]; shapes broadcast. The largest
    difference is where Th - Tc = Z Tc^2/2. Source: Ioffe, Semiconductor Thermoelements, 1957.
    """
    merit = figure_of_merit(seebeck_coefficient, resistance, conductance)
    root = np.sqrt(1.0 + 2.0 * merit * hot_side_temperature)
    coldest = 2.0 * hot_side_temperature / (1.0 + root)
    current = seebeck_coefficient * coldest / resistance
    difference = 0.5 * merit * coldest**2
    return CoolerRatings(
        current,
        seebeck_coefficient * hot_side_temperature,
        difference,
        0.5 * seebeck_coefficient * current * (hot_side_temperature + difference),
    )


def matched_power(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    hot_face_temperature: FloatArray,
    cold_face_temperature: FloatArray,
) -> FloatArray:
    """Power of a module into a load of its own resistance, (a dT)^2/(4 R) [W].

    Parameters: a [V/K], R [ohm], temperatures [K]; shapes broadcast. Source: Ioffe 1957.
    """
    difference = hot_face_temperature - cold_face_temperature
    return (seebeck_coefficient * difference) ** 2 / (4.0 * resistance)


def generator_ratings(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    conductance: FloatArray,
    hot_face_temperature: FloatArray,
    cold_face_temperature: FloatArray,
) -> GeneratorRatings:
    """Ratings of a generator at a matched load; the inverse of `generator_parameters`.

    Parameters: a [V/K], R [ohm], K [W/K], face temperatures [K], hot above cold; shapes broadcast. Source: Ioffe 1957.
    """
    emf = seebeck_coefficient * (hot_face_temperature - cold_face_temperature)
    current = emf / (2.0 * resistance)
    power = matched_power(seebeck_coefficient, resistance, hot_face_temperature, cold_face_temperature)
    heat = hot_junction_heat(
        seebeck_coefficient, resistance, conductance, hot_face_temperature, cold_face_temperature, current
    )
    return GeneratorRatings(power, 0.5 * emf, current, emf, resistance, heat, power / heat)


class ElectricalFit(NamedTuple):
    """Open-circuit voltage [V] and resistance [ohm] of rated points, (points,); NaN where the numbers are too few.

    `implied` (numbers, points): what the other numbers of a point give for each one, in the order of
    `ELECTRICAL_RATINGS`; NaN where they do not determine it.
    """

    open_circuit_voltage: FloatArray
    resistance: FloatArray
    implied: FloatArray


def generator_voltage_and_resistance(given: FloatArray) -> ElectricalFit:
    """Open-circuit voltage [V] and internal resistance [ohm] of points rated at a matched load.

    Parameters: `given` (numbers, points), positive, SI, in the order of `ELECTRICAL_RATINGS`, NaN where not given.
    Least squares of relative deviations where there are more than two. Source: P = E^2/(4R), V = E/2, I = E/(2R).
    """
    powers, factors = (
        np.array([each[:2] for each in _POWERS.values()]),
        np.array([each[2] for each in _POWERS.values()]),
    )
    wanted = np.log(given / factors[:, None])
    known = np.isfinite(wanted)
    logarithms = _solved(powers, wanted, known)
    implied = np.full(given.shape, np.nan)
    for each in range(len(powers)):
        others = known.copy()
        others[each] = False
        implied[each] = factors[each] * np.exp(powers[each] @ _solved(powers, wanted, others))
    voltage, resistance = np.exp(logarithms)
    return ElectricalFit(voltage, resistance, np.where(known, implied, np.nan))


def _solved(powers: FloatArray, wanted: FloatArray, known: FloatArray) -> FloatArray:
    """Least squares of powers @ x = wanted over the known rows, (2, points); NaN where undetermined."""
    weight, right = known.astype(float), np.where(known, wanted, 0.0)
    p, q = powers[:, :1], powers[:, 1:]
    pp, pq, qq = (weight * p * p).sum(axis=0), (weight * p * q).sum(axis=0), (weight * q * q).sum(axis=0)
    determinant = pp * qq - pq**2
    safe = np.where(determinant > 0.0, determinant, np.nan)
    by_p, by_q = (p * right).sum(axis=0), (q * right).sum(axis=0)
    return np.stack([(qq * by_p - pq * by_q) / safe, (pp * by_q - pq * by_p) / safe])


def conductance_from_heat(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    hot_face_temperature: FloatArray,
    cold_face_temperature: FloatArray,
    heat_flow: FloatArray,
) -> FloatArray:
    """Conductance from the heat that enters the hot face at a matched load [W/K].

    Parameters: a [V/K], R [ohm], face temperatures [K], `heat_flow` [W]; shapes broadcast. Too little heat gives a
    conductance that is not positive.
    Source: K = (Q - a Th I + I^2 R/2)/dT with I = a dT/(2R), Ioffe 1957.
    """
    difference = hot_face_temperature - cold_face_temperature
    return (
        heat_flow - heat_of_the_current(seebeck_coefficient, resistance, hot_face_temperature, cold_face_temperature)
    ) / difference


def heat_of_the_current(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    hot_face_temperature: FloatArray,
    cold_face_temperature: FloatArray,
) -> FloatArray:
    """Heat that the current of a matched load itself takes from the hot face, a Th I - I^2 R/2 [W].

    Parameters: a [V/K], R [ohm], face temperatures [K]; shapes broadcast. Source: Ioffe 1957.
    """
    current = seebeck_coefficient * (hot_face_temperature - cold_face_temperature) / (2.0 * resistance)
    return seebeck_coefficient * hot_face_temperature * current - 0.5 * current**2 * resistance


def largest_matched_efficiency(hot_face_temperature: FloatArray, cold_face_temperature: FloatArray) -> FloatArray:
    """Efficiency at a matched load that no module with constant parameters reaches, 2 dT/(4 Th - dT) [-].

    Parameters: face temperatures [K]. It is that of a module that conducts no heat. Source: Ioffe 1957, with K = 0.
    """
    difference = hot_face_temperature - cold_face_temperature
    return 2.0 * difference / (4.0 * hot_face_temperature - difference)


def generator_parameters(
    hot_face_temperature: FloatArray,
    cold_face_temperature: FloatArray,
    matched_power: FloatArray = UNKNOWN,
    matched_voltage: FloatArray = UNKNOWN,
    matched_current: FloatArray = UNKNOWN,
    open_circuit_voltage: FloatArray = UNKNOWN,
    internal_resistance: FloatArray = UNKNOWN,
    efficiency: FloatArray = UNKNOWN,
    heat_flow: FloatArray = UNKNOWN,
    figure_of_merit: FloatArray = UNKNOWN,
) -> ModuleParameters:
    """Parameters of each rated point of a generator: a [V/K], R [ohm], K [W/K], (points,); NaN where undetermined.

    Parameters, numbers or (points,), NaN where not given: face temperatures [K], hot above cold; at a matched load
    power [W], voltage [V], current [A], open-circuit voltage [V], resistance [ohm], of which two determine a and R;
    `efficiency` [-], `heat_flow` into the hot face [W] (geometric mean if both are given), or else `figure_of_merit`
    Z Tmean [-]. Source: the heat balance of Ioffe 1957 at I = a dT/(2R).
    """
    given = (
        matched_power,
        matched_voltage,
        matched_current,
        open_circuit_voltage,
        internal_resistance,
        efficiency,
        heat_flow,
        figure_of_merit,
        hot_face_temperature,
        cold_face_temperature,
    )
    *electrical, efficiency, heat_flow, merit, hot, cold = np.broadcast_arrays(*map(np.atleast_1d, given))
    voltage, resistance, _ = generator_voltage_and_resistance(np.array(electrical))
    seebeck = voltage / (hot - cold)
    by_efficiency = voltage**2 / (4.0 * resistance) / efficiency
    heat = np.where(np.isnan(by_efficiency), heat_flow, by_efficiency)
    heat = np.where(np.isnan(heat_flow), heat, np.sqrt(heat * heat_flow))
    from_heat = conductance_from_heat(seebeck, resistance, hot, cold, heat)
    from_merit = seebeck**2 * 0.5 * (hot + cold) / (resistance * merit)
    return ModuleParameters(seebeck, resistance, np.where(np.isnan(from_heat), from_merit, from_heat))


class TemperatureLine(NamedTuple):
    """A parameter as a straight line in temperature [K], and the largest relative residual [-] of its points."""

    curve: Curve
    largest_residual: float


def temperature_line(temperatures: FloatArray, values: FloatArray) -> TemperatureLine:
    """Straight line through values at `temperatures` [K], (points,), least squares of relative deviations.

    Values are positive, SI, NaN where unknown. A constant where the temperatures span less than `SMALLEST_SPAN`; held
    constant beyond the first and the last temperature.
    """
    known = np.isfinite(values)
    at, value = temperatures[known], values[known]
    ends = np.array([at.min(), at.max()])
    is_constant = ends[1] - ends[0] < SMALLEST_SPAN
    terms = np.ones((1, len(at))) if is_constant else np.stack([np.ones_like(at), at - ends[0]])
    coefficients = np.asarray(np.linalg.lstsq((terms / value).T, np.ones_like(at), rcond=None)[0], dtype=np.float64)
    residual = float(np.abs(coefficients @ terms / value - 1.0).max())
    if is_constant:
        return TemperatureLine(PolynomialCurve(coefficients[:, None]), residual)
    line = coefficients[0] + coefficients[1] * (ends - ends[0])
    return TemperatureLine(TableCurve(ends, line), residual)


@dataclass(frozen=True, eq=False, repr=False)
class ScaledModule:
    """A module with the temperature dependence of another one; `factors` on a, R and K, (3, cases)."""

    model: ModuleModel
    factors: FloatArray

    @classmethod
    def through(
        cls,
        model: ModuleModel,
        rated: ModuleParameters,
        hot_face_temperature: FloatArray,
        cold_face_temperature: FloatArray,
    ) -> ScaledModule:
        """Return the model scaled so that it has the `rated` parameters between two faces [K], (cases,)."""
        parameters = model.parameters(hot_face_temperature, cold_face_temperature)[:3]
        return cls(model, np.stack(rated) / np.stack(parameters))

    def parameters(
        self, hot_junction_temperature: FloatArray, cold_junction_temperature: FloatArray
    ) -> JunctionParameters:
        """Return the scaled parameters and slopes; see `harvest.physics.thermoelectrics.ModuleModel`."""
        own = self.model.parameters(hot_junction_temperature, cold_junction_temperature)
        by_parameter = tuple(self.factors) * 3
        return JunctionParameters(*(factor * value for factor, value in zip(by_parameter, own, strict=True)))

    def take(self, which: IntArray) -> ScaledModule:
        """Return the model of a subset of cases."""
        return ScaledModule(self.model.take(which), self.factors[:, which])
