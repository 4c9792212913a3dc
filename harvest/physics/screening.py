"""What two streams could give at most, before anything is designed: exergy, ceilings of a figure of merit, arrays."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from harvest.physics.arrays import FloatArray
from harvest.physics.thermoelectrics import maximum_efficiency

BISECTIONS = 60
"""Halvings of a temperature range: enough for the last digit."""
THIRDS = 40
"""Times that a range of heat is cut by a third: to 1e-7 of it."""
_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(16)


def temperatures_between(lower: FloatArray, upper: FloatArray) -> FloatArray:
    """Temperatures [K], (16, ...), at which `integral_over` wants its integrand; limits [K] of any one shape."""
    middle, half = 0.5 * (lower + upper), 0.5 * (upper - lower)
    return np.asarray(middle + _POINTS.reshape(-1, *(1,) * np.ndim(middle)) * half)


def integral_over(values: FloatArray, lower: FloatArray, upper: FloatArray) -> FloatArray:
    """Integral from `lower` to `upper` [K] of `values` (16, ...) [any unit] at `temperatures_between` them.

    Source: Gauss-Legendre quadrature, 16 points.
    """
    return np.asarray(0.5 * (upper - lower) * np.tensordot(_WEIGHTS, values, 1))


def exergy(heat: FloatArray, entropy: FloatArray, surroundings_temperature: FloatArray) -> FloatArray:
    """Largest work from `heat` [W] that is given with `entropy` [W/K] above a sink at a temperature [K], H - T0 S [W].

    Source: any textbook of thermodynamics, such as Bejan, Advanced Engineering Thermodynamics (from memory).
    """
    return np.asarray(heat - surroundings_temperature * entropy)


def balanced_temperature(
    entropy_given: Callable[[FloatArray], FloatArray],
    entropy_taken: Callable[[FloatArray], FloatArray],
    lower: FloatArray,
    upper: FloatArray,
) -> FloatArray:
    """Temperature [K] between two limits to which two streams come by reversible engines, no entropy being generated.

    Parameters: entropy [W/K] that the hot stream gives down to a temperature [K], falling with it, and that the cold
    stream takes up to it, rising; limits [K], all of one shape. Source: second law; found by bisection.
    """
    for _ in range(BISECTIONS):
        middle = 0.5 * (lower + upper)
        surplus = entropy_given(middle) > entropy_taken(middle)
        lower, upper = np.where(surplus, middle, lower), np.where(surplus, upper, middle)
    return np.asarray(0.5 * (lower + upper))


def reduced_efficiency(dimensionless_figure_of_merit: FloatArray) -> FloatArray:
    """Best efficiency of a module over Carnot's at small differences, ZT/(1 + s)^2 = (s - 1)/(s + 1) [-].

    Parameters: Z Tmean [-]; s = sqrt(1 + Z Tmean). Source: limit of Ioffe 1957 at equal temperatures.
    """
    root = np.sqrt(1.0 + np.asarray(dimensionless_figure_of_merit))
    return np.asarray((root - 1.0) / (root + 1.0))


def joint_optimum_power(
    film_conductance: FloatArray,
    hot_temperature: FloatArray,
    cold_temperature: FloatArray,
    dimensionless_figure_of_merit: FloatArray,
) -> FloatArray:
    """Most power [W] behind given films, module conductance and load both free: Kc dT^2/(4 Tmean) ZT/(1 + s)^2.

    Parameters: `film_conductance` Kc of both films in series [W/K], or [W/(m^2 K)] for power per area [W/m^2];
    temperatures of the two fluids [K]; Z Tmean [-]. The films then take half of the difference and the load ratio is s.
    Range: exact at small differences; with ZT held at the mean, within 2 % up to 600 and 300 K and films ten to one.
    Source: Freunek et al., J. Electron. Mater. 38 (2009) 1214; Apertet et al., EPL 97 (2012) 28001 (both from memory,
    derived anew).
    """
    difference, mean = hot_temperature - cold_temperature, 0.5 * (hot_temperature + cold_temperature)
    return np.asarray(
        film_conductance * difference**2 / (4.0 * mean) * reduced_efficiency(dimensionless_figure_of_merit)
    )


def joint_optimum_conductance(film_conductance: FloatArray, dimensionless_figure_of_merit: FloatArray) -> FloatArray:
    """Module conductance without current [W/K] of `joint_optimum_power`, Kc/s.

    Parameters: `film_conductance` Kc [W/K]; Z Tmean [-]. With current, the module conducts s times as much, that is Kc.
    Source: as `joint_optimum_power`.
    """
    return np.asarray(film_conductance / np.sqrt(1.0 + np.asarray(dimensionless_figure_of_merit)))


def power_from_hot_slices(
    heat_capacity_rate: FloatArray,
    temperature: FloatArray,
    limits: tuple[FloatArray, FloatArray],
    cold_temperature: FloatArray,
    dimensionless_figure_of_merit: FloatArray,
) -> FloatArray:
    """Power [W] if each slice of a hot stream's heat went without films to one cold temperature [K].

    Parameters: `heat_capacity_rate` [W/K] at `temperature` [K], (16, ...), from `temperatures_between` the two `limits`
    [K]; Z Tmean [-]. No array of that figure of merit gives more: its cold side is nowhere colder.
    Source: integral of `maximum_efficiency` over the stream.
    """
    efficiency = maximum_efficiency(dimensionless_figure_of_merit, temperature, cold_temperature)
    return integral_over(heat_capacity_rate * efficiency, *limits)


def power_into_cold_slices(
    heat_capacity_rate: FloatArray,
    temperature: FloatArray,
    limits: tuple[FloatArray, FloatArray],
    hot_temperature: FloatArray,
    dimensionless_figure_of_merit: FloatArray,
) -> FloatArray:
    """Power [W] if each slice of a cold stream were warmed without films from one hot temperature [K].

    Parameters: as `power_from_hot_slices`, of the cold stream. The power over the heat rejected is e/(1 - e).
    Source: integral of `maximum_efficiency` over the stream.
    """
    efficiency = maximum_efficiency(dimensionless_figure_of_merit, hot_temperature, temperature)
    return integral_over(heat_capacity_rate * efficiency / (1.0 - efficiency), *limits)


def counterflow_differences(
    heat: FloatArray,
    inverse_hot_capacity_rate: FloatArray,
    inverse_cold_capacity_rate: FloatArray,
    hot_inlet_temperature: FloatArray,
    cold_inlet_temperature: FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Differences [K] between two streams at the hot and at the cold inlet of a counterflow exchanger.

    Parameters: `heat` [W]; inverse heat capacity rates [K/W], 0 for a reservoir; inlet temperatures [K]; any one shape.
    """
    difference = hot_inlet_temperature - cold_inlet_temperature
    return (
        np.asarray(difference - heat * inverse_cold_capacity_rate),
        np.asarray(difference - heat * inverse_hot_capacity_rate),
    )


def log_mean_difference(first: FloatArray, second: FloatArray) -> FloatArray:
    """Mean temperature difference [K] of a counterflow exchanger from those at its ends [K]; 0 where one of them is 0.

    Source: (a - b)/ln(a/b), any textbook of heat transfer; near a = b by its series.
    """
    larger, smaller = np.maximum(first, second), np.minimum(first, second)
    near = larger < smaller * (1.0 + 1e-6)
    apart = (smaller > 0.0) & ~near
    logarithm = np.log(np.where(apart, larger, 2.0) / np.where(apart, smaller, 1.0))
    return np.asarray(np.where(near, 0.5 * (first + second), np.where(apart, (larger - smaller) / logarithm, 0.0)))


def counterflow_array_power(
    heat: FloatArray,
    inverse_hot_capacity_rate: FloatArray,
    inverse_cold_capacity_rate: FloatArray,
    hot_inlet_temperature: FloatArray,
    cold_inlet_temperature: FloatArray,
    dimensionless_figure_of_merit: FloatArray,
    module_share: FloatArray,
) -> FloatArray:
    """Power [W] of modules along a counterflow exchanger, each at its best load, heat capacity rates being constant.

    Parameters: as `counterflow_differences`; Z Tmean [-]; `module_share` [-], part of the local difference that the
    modules have, the films taking the rest, the same on both sides. Source: integral of `maximum_efficiency` over the
    heat; 16-point Gauss-Legendre.
    """
    place = temperatures_between(np.zeros_like(heat), heat)
    hot = hot_inlet_temperature - place * inverse_hot_capacity_rate
    cold = cold_inlet_temperature + (heat - place) * inverse_cold_capacity_rate
    film = 0.5 * (1.0 - module_share) * (hot - cold)
    return integral_over(
        maximum_efficiency(dimensionless_figure_of_merit, hot - film, cold + film), np.zeros_like(heat), heat
    )


def heat_of_most_power(
    most_heat: FloatArray,
    inverse_hot_capacity_rate: FloatArray,
    inverse_cold_capacity_rate: FloatArray,
    hot_inlet_temperature: FloatArray,
    cold_inlet_temperature: FloatArray,
    dimensionless_figure_of_merit: FloatArray,
    module_share: FloatArray,
) -> FloatArray:
    """Heat [W], at most `most_heat` [W], for which `counterflow_array_power` is largest; the other parameters are its.

    For a ZT that nears 0 and small differences it is Cmin dT/(1 + Cmin/Cmax) (closed form). Found by thirds.
    """
    lower, upper = np.zeros_like(most_heat), most_heat
    rest = (
        inverse_hot_capacity_rate,
        inverse_cold_capacity_rate,
        hot_inlet_temperature,
        cold_inlet_temperature,
        dimensionless_figure_of_merit,
        module_share,
    )
    for _ in range(THIRDS):
        first, second = lower + (upper - lower) / 3.0, upper - (upper - lower) / 3.0
        rises = counterflow_array_power(second, *rest) > counterflow_array_power(first, *rest)
        lower, upper = np.where(rises, first, lower), np.where(rises, upper, second)
    return np.asarray(0.5 * (lower + upper))
