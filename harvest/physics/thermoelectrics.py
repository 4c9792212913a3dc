"""The thermoelectric module: its heat balance, its parameters from materials and legs, and its ceilings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple, Protocol

import numpy as np

from harvest.physics.arrays import FloatArray, IntArray
from harvest.physics.curves import Curve

# Gauss-Legendre, three points: exact for the products of quadratic materials.
_GAUSS_OFFSETS = (-np.sqrt(0.6), 0.0, np.sqrt(0.6))
_GAUSS_WEIGHTS = (5.0 / 18.0, 8.0 / 18.0, 5.0 / 18.0)


def hot_junction_heat(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    conductance: FloatArray,
    hot_junction_temperature: FloatArray,
    cold_junction_temperature: FloatArray,
    current: FloatArray,
) -> FloatArray:
    """Heat that enters a module's hot junctions, a Th I + K (Th - Tc) - I^2 R / 2 [W].

    Parameters: module's `seebeck_coefficient` [V/K], `resistance` [ohm], `conductance` [W/K], junction temperatures
    [K], `current` [A]; shapes broadcast. Source: Ioffe, Semiconductor Thermoelements, 1957.
    """
    difference = hot_junction_temperature - cold_junction_temperature
    return (
        seebeck_coefficient * hot_junction_temperature * current
        + conductance * difference
        - 0.5 * current**2 * resistance
    )


def cold_junction_heat(
    seebeck_coefficient: FloatArray,
    resistance: FloatArray,
    conductance: FloatArray,
    hot_junction_temperature: FloatArray,
    cold_junction_temperature: FloatArray,
    current: FloatArray,
) -> FloatArray:
    """Heat that leaves a module's cold junctions, a Tc I + K (Th - Tc) + I^2 R / 2 [W]; see `hot_junction_heat`."""
    difference = hot_junction_temperature - cold_junction_temperature
    return (
        seebeck_coefficient * cold_junction_temperature * current
        + conductance * difference
        + 0.5 * current**2 * resistance
    )


def figure_of_merit(seebeck_coefficient: FloatArray, resistance: FloatArray, conductance: FloatArray) -> FloatArray:
    """Figure of merit of a module, Z = a^2 / (R K) [1/K]."""
    return seebeck_coefficient**2 / (resistance * conductance)


def carnot_efficiency(hot_temperature: FloatArray, cold_temperature: FloatArray) -> FloatArray:
    """Largest efficiency of any engine between two temperatures [K], 1 - Tc/Th [-]."""
    return 1.0 - cold_temperature / hot_temperature


def maximum_efficiency(
    dimensionless_figure_of_merit: FloatArray, hot_temperature: FloatArray, cold_temperature: FloatArray
) -> FloatArray:
    """Largest efficiency of a module with constant properties between fixed junctions [-].

    Parameters: Z Tmean [-]; junction temperatures [K].
    Source: Ioffe 1957; Angrist, Direct Energy Conversion: Carnot x (s - 1)/(s + Tc/Th), s = sqrt(1 + Z Tmean).
    """
    root = np.sqrt(1.0 + dimensionless_figure_of_merit)
    return (
        carnot_efficiency(hot_temperature, cold_temperature)
        * (dimensionless_figure_of_merit / (root + 1.0))
        / (root + cold_temperature / hot_temperature)
    )


def efficiency_at_load_ratio(
    dimensionless_figure_of_merit: FloatArray,
    hot_temperature: FloatArray,
    cold_temperature: FloatArray,
    load_ratio: FloatArray,
) -> FloatArray:
    """Efficiency of a module with constant properties at a ratio m of load to internal resistance [-].

    Parameters: Z Tmean [-]; junction temperatures [K]; `load_ratio` [-], positive. Source: Ioffe 1957.
    """
    merit = dimensionless_figure_of_merit / (0.5 * (hot_temperature + cold_temperature))
    m = load_ratio
    difference = hot_temperature - cold_temperature
    return (
        difference
        / hot_temperature
        * m
        / ((1.0 + m) + (1.0 + m) ** 2 / (merit * hot_temperature) - 0.5 * difference / hot_temperature)
    )


class JunctionParameters(NamedTuple):
    """Parameters of a module at its junction temperatures, and their derivatives, shape (..., cases).

    The `_slope`s are by the mean of the two junction temperatures, the `_spread`s by half their difference [per K].
    """

    seebeck: FloatArray
    resistance: FloatArray
    conductance: FloatArray
    seebeck_slope: FloatArray
    resistance_slope: FloatArray
    conductance_slope: FloatArray
    seebeck_spread: FloatArray
    resistance_spread: FloatArray
    conductance_spread: FloatArray


class ModuleModel(Protocol):
    """Parameters of a module at given junction temperatures, with how they change with them."""

    def parameters(
        self, hot_junction_temperature: FloatArray, cold_junction_temperature: FloatArray
    ) -> JunctionParameters:
        """Return parameters and derivatives at junction temperatures [K], shape (..., cases)."""

    def take(self, which: IntArray) -> ModuleModel:
        """Return the model of a subset of cases."""


@dataclass(frozen=True, eq=False, repr=False)
class MeanTemperatureModule:
    """A module whose parameters are curves in the mean of its two junction temperatures."""

    seebeck: Curve
    resistance: Curve
    conductance: Curve

    def parameters(
        self, hot_junction_temperature: FloatArray, cold_junction_temperature: FloatArray
    ) -> JunctionParameters:
        """Return the parameters at the mean junction temperature; see `ModuleModel`."""
        mean = 0.5 * (hot_junction_temperature + cold_junction_temperature)
        seebeck, seebeck_slope = self.seebeck.value_and_slope(mean)
        resistance, resistance_slope = self.resistance.value_and_slope(mean)
        conductance, conductance_slope = self.conductance.value_and_slope(mean)
        none = np.zeros_like(mean)
        return JunctionParameters(
            seebeck, resistance, conductance, seebeck_slope, resistance_slope, conductance_slope, none, none, none
        )

    def take(self, which: IntArray) -> MeanTemperatureModule:
        """Return the model of a subset of cases."""
        return MeanTemperatureModule(
            self.seebeck.take(which), self.resistance.take(which), self.conductance.take(which)
        )


@dataclass(frozen=True, eq=False, repr=False)
class Material:
    """One thermoelectric material: signed Seebeck [V/K], resistivity [ohm m], conductivity [W/(m K)] against T."""

    seebeck: Curve
    resistivity: Curve
    conductivity: Curve

    def take(self, which: IntArray) -> Material:
        """Return the material of a subset of cases."""
        return Material(self.seebeck.take(which), self.resistivity.take(which), self.conductivity.take(which))


@dataclass(frozen=True, eq=False, repr=False)
class LegModule:
    """A module built of legs; its parameters are averages over the temperature profile without current.

    a = mean alpha, K = (A/L) mean k, R = (L/A) integral rho k dT / integral k dT, summed over the n and the p legs,
    plus four contacts a couple and the gap filler beside the legs. Arrays (cases,): `couples` [-], leg `length` [m]
    and `area` [m^2], `contact_resistivity` [ohm m^2], `filler_conductance` [W/K] of the whole module.
    Source: zero-current averaging as in Goupil (ed.), Continuum Theory and Modeling of Thermoelectric Elements, 2016
    (from memory); 0.5 % in power from the leg-resolved solution at 230/50 degC.
    """

    n_material: Material
    p_material: Material
    couples: FloatArray
    length: FloatArray
    area: FloatArray
    contact_resistivity: FloatArray
    filler_conductance: FloatArray

    def parameters(
        self, hot_junction_temperature: FloatArray, cold_junction_temperature: FloatArray
    ) -> JunctionParameters:
        """Return the zero-current averages and their derivatives; see `ModuleModel`."""
        mean = 0.5 * (hot_junction_temperature + cold_junction_temperature)
        half = 0.5 * (hot_junction_temperature - cold_junction_temperature)
        # rows: value, derivative by the mean, derivative by half the difference
        seebeck, conductance, resistance = np.zeros((3, 3, *mean.shape))
        for sign, material in ((-1.0, self.n_material), (1.0, self.p_material)):
            mean_k, mean_rk = np.zeros((2, 3, *mean.shape))
            for offset, weight in zip(_GAUSS_OFFSETS, _GAUSS_WEIGHTS, strict=True):
                temperature = mean + offset * half
                alpha, alpha_slope = material.seebeck.value_and_slope(temperature)
                rho, rho_slope = material.resistivity.value_and_slope(temperature)
                k, k_slope = material.conductivity.value_and_slope(temperature)
                product_slope = rho_slope * k + rho * k_slope
                for total, value, slope, factor in (
                    (seebeck, alpha, alpha_slope, sign * weight),
                    (mean_k, k, k_slope, weight),
                    (mean_rk, rho * k, product_slope, weight),
                ):
                    total[0] += factor * value
                    total[1] += factor * slope
                    total[2] += (factor * offset) * slope
            conductance += mean_k
            leg = mean_rk[0] / mean_k[0]
            resistance[0] += leg
            resistance[1:] += (mean_rk[1:] - leg * mean_k[1:]) / mean_k[0]
        seebeck *= self.couples
        resistance *= self.couples * self.length / self.area
        conductance *= self.couples * self.area / self.length
        resistance[0] += self.couples * 4.0 * self.contact_resistivity / self.area
        conductance[0] += self.filler_conductance
        return JunctionParameters(
            seebeck[0],
            resistance[0],
            conductance[0],
            seebeck[1],
            resistance[1],
            conductance[1],
            seebeck[2],
            resistance[2],
            conductance[2],
        )

    def take(self, which: IntArray) -> LegModule:
        """Return the model of a subset of cases."""
        return LegModule(
            self.n_material.take(which),
            self.p_material.take(which),
            self.couples[which],
            self.length[which],
            self.area[which],
            self.contact_resistivity[which],
            self.filler_conductance[which],
        )
