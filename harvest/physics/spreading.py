"""Constriction of heat that enters a module from a larger place on a duct's wall."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harvest.physics.arrays import FloatArray, IntArray


@dataclass(frozen=True, eq=False, repr=False)
class Constriction:
    """Spreading resistance of a centred footprint on a plate, as a function of the film behind the plate.

    Rectangles are replaced by circles of equal area. `at_footprint` [K/W] multiplies the dimensionless term in the
    film's Biot number; all arrays (cases,). Zero where the wall has no thickness or the footprint fills its place.
    Source: Lee, Song, Au and Moran, Proc. IEEE SEMI-THERM (1995) 199, mean footprint temperature, uniform flux.
    """

    at_footprint: FloatArray
    decay: FloatArray
    reach: FloatArray
    biot_per_film: FloatArray

    @classmethod
    def of(
        cls, place_area: FloatArray, footprint_area: FloatArray, thickness: FloatArray, conductivity: FloatArray
    ) -> Constriction:
        """From areas [m^2], wall `thickness` [m] and `conductivity` [W/(m K)], (cases,)."""
        radius = np.sqrt(footprint_area / np.pi)
        outer = np.sqrt(place_area / np.pi)
        ratio = np.minimum(radius / outer, 1.0)
        decay = np.pi + 1.0 / (np.sqrt(np.pi) * ratio)
        reach = np.tanh(decay * thickness / outer)
        with_wall = thickness > 0
        at_footprint = np.where(with_wall, 0.5 * (1.0 - ratio) ** 1.5 / (np.sqrt(np.pi) * conductivity * radius), 0.0)
        return cls(at_footprint, decay, reach, outer / conductivity)

    def resistance(self, film_per_area: FloatArray) -> FloatArray:
        """Resistance [K/W] at `film_per_area` [W/(m^2 K)] of the plate, shape (rows, cases)."""
        biot = film_per_area * self.biot_per_film
        return self.at_footprint * (self.reach * biot + self.decay) / (biot + self.decay * self.reach)

    def take(self, which: IntArray) -> Constriction:
        """The same for a subset of cases."""
        return Constriction(self.at_footprint[which], self.decay[which], self.reach[which], self.biot_per_film[which])


def spreading_resistance(
    place_area: FloatArray,
    footprint_area: FloatArray,
    thickness: FloatArray,
    conductivity: FloatArray,
    film_per_area: FloatArray,
) -> FloatArray:
    """Spreading resistance from a place to the footprint in it [K/W]; see `Constriction`."""
    return Constriction.of(place_area, footprint_area, thickness, conductivity).resistance(film_per_area)
