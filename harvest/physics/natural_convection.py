"""Room air at a heat sink: vertical plate fins in natural convection with radiation, or a rated resistance."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from harvest.physics.arrays import FloatArray, IntArray
from harvest.physics.ducts import fin_efficiency
from harvest.physics.fluids import FluidBatch

GRAVITY = 9.80665
STEFAN_BOLTZMANN = 5.670374419e-8
LAMINAR_EXPONENT = 0.25
"""Exponent of the temperature rise in laminar natural convection on plates."""
SMALLEST_RISE = 1e-6
"""Rise of a plate over the air below which its film no longer falls [K]."""


def channel_rayleigh_number(
    rise: FloatArray,
    spacing: FloatArray,
    height: FloatArray,
    temperature: FloatArray,
    density: FloatArray,
    heat_capacity: FloatArray,
    viscosity: FloatArray,
    conductivity: FloatArray,
) -> FloatArray:
    """Rayleigh number of a channel between vertical plates, g beta dT s^4/(nu alpha H) [-]; beta = 1/T of a gas.

    Parameters: `rise` of the plates over the air [K]; `spacing` between and `height` of the plates [m]; film
    `temperature` [K] and the air's `density` [kg/m^3], `heat_capacity` [J/(kg K)], `viscosity` [Pa s] and
    `conductivity` [W/(m K)] at it; one shape. With `spacing` equal to `height` it is the plate's own number.
    """
    buoyancy = GRAVITY * np.abs(rise) / temperature * spacing**4 / height
    return np.asarray(buoyancy * density**2 * heat_capacity / (viscosity * conductivity))


def isothermal_channel_nusselt(rayleigh: FloatArray) -> FloatArray:
    """Nusselt number h s/k of two vertical plates at one temperature, on their rise over the air [-].

    Parameters: `rayleigh`, number of the channel [-], above 0. Ra/24 in narrow channels, 0.59 Ra^(1/4) in wide ones.
    Source: Bar-Cohen and Rohsenow, J. Heat Transfer 106 (1984) 116 (from memory).
    """
    return np.asarray((576.0 / rayleigh**2 + 2.873 / np.sqrt(rayleigh)) ** -0.5)


def isolated_plate_nusselt(rayleigh: FloatArray) -> FloatArray:
    """Nusselt number h H/k of a vertical plate alone, 0.59 Ra^(1/4) [-]: the wide limit of the channel.

    Parameters: `rayleigh`, number on the plate's height [-], about 1e4 to 1e9.
    Source: as `isothermal_channel_nusselt`.
    """
    return np.asarray(rayleigh**0.25 / np.sqrt(2.873))


def optimum_plate_spacing(rayleigh: FloatArray, spacing: FloatArray) -> FloatArray:
    """Spacing at which thin isothermal plates on a given base give most heat, 2.714 s/Ra^(1/4) [m].

    Parameters: `rayleigh`, number of the channel [-] at any `spacing` [m]. Source: as `isothermal_channel_nusselt`.
    """
    return np.asarray(2.714 * spacing / rayleigh**0.25)


def parallel_rectangle_view_factor(width: FloatArray, length: FloatArray, distance: FloatArray) -> FloatArray:
    """View factor between two equal aligned rectangles face to face [-].

    Parameters: sides `width`, `length` and `distance` [m], above 0, one shape.
    Source: Incropera et al., Fundamentals of Heat and Mass Transfer, 7th ed., Table 13.2 (from memory).
    """
    x, y = width / distance, length / distance
    x2, y2 = 1.0 + x * x, 1.0 + y * y
    terms = (
        0.5 * np.log(x2 * y2 / (x2 + y * y))
        + x * np.sqrt(y2) * np.arctan(x / np.sqrt(y2))
        + y * np.sqrt(x2) * np.arctan(y / np.sqrt(x2))
        - x * np.arctan(x)
        - y * np.arctan(y)
    )
    return np.asarray(2.0 / (np.pi * x * y) * terms)


def channel_radiation_area(
    spacing: FloatArray, depth: FloatArray, height: FloatArray, emissivity: FloatArray
) -> FloatArray:
    """Area of a black surface that radiates to the room as one channel of a fin array does [m^2].

    A channel is a box with two fins and a base of one temperature, and three openings to the room: in front, above and
    below. What the walls see of the openings follows from the view factors between facing sides and the symmetry of a
    box; reflections are followed as in a grey enclosure of even radiosity.
    Parameters: `spacing` of the fins, their `depth` from base to tip, and `height` [m]; `emissivity` [-], above 0.
    """
    fin, base, top = depth * height, spacing * height, spacing * depth
    between_fins = fin * parallel_rectangle_view_factor(depth, height, spacing)
    base_to_front = base * parallel_rectangle_view_factor(spacing, height, depth)
    top_to_bottom = top * parallel_rectangle_view_factor(spacing, depth, height)
    # exchange areas of adjacent sides: each side sees the opposite one and two pairs of neighbours
    of_fin, of_base, of_top = fin - between_fins, base - base_to_front, top - top_to_bottom
    fin_to_base = 0.25 * (of_fin + of_base - of_top)
    fin_to_top = 0.25 * (of_fin - of_base + of_top)
    base_to_top = 0.25 * (of_base + of_top - of_fin)
    seen = 2.0 * fin_to_base + 4.0 * fin_to_top + base_to_front + 2.0 * base_to_top
    walls = 2.0 * fin + base
    return np.asarray(1.0 / ((1.0 - emissivity) / (emissivity * walls) + 1.0 / seen))


def radiation_coefficient(surface_temperature: FloatArray, room_temperature: FloatArray) -> FloatArray:
    """Heat of a black surface to its room over area and temperature difference [W/(m^2 K)]; temperatures [K]."""
    total = surface_temperature + room_temperature
    return np.asarray(STEFAN_BOLTZMANN * total * (surface_temperature**2 + room_temperature**2))


@dataclass(frozen=True, eq=False, repr=False)
class RatedSink:
    """A heat sink by its thermal resistance [K/W] at one temperature rise [K]; arrays (cases,).

    Its conductance grows as the rise to the power `exponent` [-].
    """

    resistance: FloatArray
    rated_rise: FloatArray
    exponent: FloatArray

    def conductance(self, wall_temperature: FloatArray, air_temperature: FloatArray) -> FloatArray:
        """Conductance from the wall to the room [W/K]; temperatures [K], (rows, cases)."""
        rise = np.maximum(np.abs(wall_temperature - air_temperature), SMALLEST_RISE)
        return np.asarray((rise / self.rated_rise) ** self.exponent / self.resistance)

    def take(self, which: IntArray) -> RatedSink:
        """Return the sink of a subset of cases."""
        return replace(self, **{name: value[which] for name, value in vars(self).items()})


@dataclass(frozen=True, eq=False, repr=False)
class FinnedSink:
    """A base with vertical plate fins in still air; arrays (cases,), lengths [m].

    `fin_height` is from base to tip, `base_height` along the vertical. The channels convect as isothermal ones, the two
    outer sides as plates alone; tips are left out. The fins' efficiency is that of convection and radiation together.
    `film_factor` [-] multiplies the film of convection, not the radiation.
    """

    air: FluidBatch
    base_height: FloatArray
    base_width: FloatArray
    fin_count: FloatArray
    fin_spacing: FloatArray
    fin_height: FloatArray
    fin_thickness: FloatArray
    fin_conductivity: FloatArray
    emissivity: FloatArray
    film_factor: FloatArray

    def conductance(self, wall_temperature: FloatArray, air_temperature: FloatArray) -> FloatArray:
        """Conductance from the base to the room [W/K]; temperatures [K], (rows, cases)."""
        height, spacing = self.base_height, self.fin_spacing
        rise = np.maximum(np.abs(wall_temperature - air_temperature), SMALLEST_RISE)
        film_temperature = 0.5 * (wall_temperature + air_temperature)
        heat_capacity, viscosity, conductivity = self.air.film_properties(film_temperature)
        air = (film_temperature, self.air.density(film_temperature), heat_capacity, viscosity, conductivity)
        between = isothermal_channel_nusselt(channel_rayleigh_number(rise, spacing, height, *air))
        alone = isolated_plate_nusselt(channel_rayleigh_number(rise, height, height, *air)) / height
        convection = self.film_factor * conductivity
        channel_film, outer_film = between * convection / spacing, alone * convection
        black = radiation_coefficient(wall_temperature, air_temperature)
        channels, side = self.fin_count - 1.0, self.fin_height * height
        bottom = spacing * height
        seen = channel_radiation_area(spacing, self.fin_height, height, self.emissivity) / (2.0 * side + bottom)
        inner = channel_film + black * seen
        outer = outer_film + black * self.emissivity
        efficiency = [
            fin_efficiency(film, self.fin_conductivity, self.fin_thickness, self.fin_height)
            for film in (inner, 0.5 * (inner + outer))
        ]
        # an outer fin has a channel on one side and the open room on the other
        inside = np.maximum(channels - 1.0, 0.0) * 2.0 * side * inner * efficiency[0]
        outermost = 2.0 * side * (inner + outer) * efficiency[1]
        return np.asarray(channels * bottom * inner + inside + outermost)

    def optimum_spacing(self, wall_temperature: FloatArray, air_temperature: FloatArray) -> FloatArray:
        """Spacing at which thin fins would convect most heat from this base [m]; temperatures [K], (cases,)."""
        film_temperature = 0.5 * (wall_temperature + air_temperature)
        heat_capacity, viscosity, conductivity = self.air.film_properties(film_temperature)
        density = self.air.density(film_temperature)
        air = (film_temperature, density, heat_capacity, viscosity, conductivity)
        rise = np.maximum(np.abs(wall_temperature - air_temperature), SMALLEST_RISE)
        number = channel_rayleigh_number(rise, self.fin_spacing, self.base_height, *air)
        return optimum_plate_spacing(number, self.fin_spacing)

    def take(self, which: IntArray) -> FinnedSink:
        """Return the sink of a subset of cases."""
        arrays = {name: value[which] for name, value in vars(self).items() if name != "air"}
        return replace(self, air=self.air.take(which), **arrays)


RoomSink = RatedSink | FinnedSink
