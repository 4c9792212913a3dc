"""Bought blocks and finished exchangers by their rated curves of thermal resistance and pressure drop against flow."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from harvest.physics.arrays import FloatArray, IntArray

PRANDTL_EXPONENT = 1.0 / 3.0
"""Exponent of the Prandtl number at equal Reynolds number in Colburn's analogy."""


def rated_value(flow: FloatArray, flows: FloatArray, values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Value of a rated curve and its exponent d ln(value)/d ln(flow) [-]: a power law between neighbouring points.

    Parameters: `flow` [m^3/s], (cases,); rising `flows` [m^3/s] and `values` [SI] of the points, (points,), above 0. A
    flow outside the points is answered by the nearest power law and has to be refused by who asks.
    """
    segment = np.clip(np.searchsorted(flows, flow, side="right") - 1, 0, len(flows) - 2)
    exponents = np.diff(np.log(values)) / np.diff(np.log(flows))
    exponent = exponents[segment]
    return values[segment] * (flow / flows[segment]) ** exponent, exponent


def mean_from_inlet_resistance(inlet_resistance: FloatArray, capacity_rate: FloatArray) -> FloatArray:
    """Thermal resistance on the fluid's mean temperature from that on its inlet [K/W], R - 1/(2 m c).

    Parameters: `inlet_resistance` [K/W], `capacity_rate` m c of the block [W/K]; one shape. Exact by the heat balance.
    """
    return inlet_resistance - 0.5 / capacity_rate


def conductance_of_block(mean_resistance: FloatArray, capacity_rate: FloatArray) -> FloatArray:
    """Conductance from wall to fluid at which an isothermal block has its rated resistance [W/K].

    The fluid nears the wall exponentially: 1 - exp(-UA/C) = 1/(C R_inlet), R_inlet = R_mean + 1/(2 C). NaN where no
    conductance does, R_mean C <= 1/2: the fluid would leave past the wall.
    Parameters: `mean_resistance` [K/W], `capacity_rate` C [W/K]; one shape.
    """
    effectiveness = 1.0 / (mean_resistance * capacity_rate + 0.5)
    possible = effectiveness < 1.0
    return np.asarray(np.where(possible, -capacity_rate * np.log1p(-np.where(possible, effectiveness, 0.0)), np.nan))


@dataclass(frozen=True, eq=False, repr=False)
class RatedFilm:
    """The film of rated blocks; arrays (cases,).

    `film_conductance` [W/K] of one block's fluid at the rating and the block's mass flow, `solid_resistance` [K/W] of
    its metal, `modules` that one block serves. Another fluid or temperature changes the film as a curve of Nu against
    Re and Pr does: Nu ~ Re^`reynolds_exponent` Pr^`prandtl_exponent`, the first being the rated curve's own slope.
    `pressure_drop` [Pa] of one block grows as flow to the power `drop_exponent`; `in_series` blocks follow each other.
    `rated_density` [kg/m^3], `rated_viscosity` [Pa s], `rated_conductivity` [W/(m K)] and `rated_prandtl` are those of
    the rating. `flow` [m^3/s] of one block is at the rating's density.
    """

    flow: FloatArray
    film_conductance: FloatArray
    solid_resistance: FloatArray
    modules: FloatArray
    in_series: FloatArray
    reynolds_exponent: FloatArray
    prandtl_exponent: FloatArray
    pressure_drop: FloatArray
    drop_exponent: FloatArray
    rated_density: FloatArray
    rated_viscosity: FloatArray
    rated_conductivity: FloatArray
    rated_prandtl: FloatArray

    def conductance(self, heat_capacity: FloatArray, viscosity: FloatArray, conductivity: FloatArray) -> FloatArray:
        """Conductance between the fluid and the wall of one place [W/K], (rows, cases).

        Parameters: fluid's `heat_capacity` [J/(kg K)], `viscosity` [Pa s], `conductivity` [W/(m K)], (rows, cases).
        Source: similarity of Nu(Re, Pr) with Colburn's Pr^(1/3) unless another exponent is stated.
        """
        prandtl = heat_capacity * viscosity / conductivity
        film = (
            self.film_conductance
            * (conductivity / self.rated_conductivity)
            * (self.rated_viscosity / viscosity) ** self.reynolds_exponent
            * (prandtl / self.rated_prandtl) ** self.prandtl_exponent
        )
        return np.asarray(film / ((1.0 + film * self.solid_resistance) * self.modules))

    def local_pressure_drop(self, density: FloatArray, viscosity: FloatArray) -> FloatArray:
        """Pressure drop of one block with its fluid in the state of a row [Pa], (rows, cases).

        Similarity of the Euler number at equal Reynolds number: dp ~ m^2/rho Re^(n - 2), n the rated curve's slope.
        Parameters: `density` [kg/m^3], `viscosity` [Pa s], (rows, cases).
        """
        thicker = (self.rated_viscosity / viscosity) ** (self.drop_exponent - 2.0)
        return np.asarray(self.pressure_drop * (self.rated_density / density) * thicker)

    def rated_flow_of_equal_reynolds(self, viscosity: FloatArray) -> FloatArray:
        """Flow at the rating that has the Reynolds number of this fluid [m^3/s]; `viscosity` [Pa s]."""
        return np.asarray(self.flow * self.rated_viscosity / viscosity)

    def take(self, which: IntArray) -> RatedFilm:
        """Return the film of a subset of cases."""
        return replace(self, **{name: value[which] for name, value in vars(self).items()})
