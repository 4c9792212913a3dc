"""The film of one side of the stack: from a duct's geometry and the fluid's properties to a place's conductance.

A place is what one module occupies on the plate: row pitch by column pitch. Each kind of duct is one builder in
`DUCT_KINDS`, from the duct's measures to a `Film`; a film gives conductance, Reynolds number and friction.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from harvest.physics import ducts
from harvest.physics.arrays import FloatArray, IntArray


@dataclass(frozen=True, eq=False, repr=False)
class DuctMeasures:
    """What a duct is built of; all arrays (cases,), SI. `faces` is 1 or 2, the number of heated plates."""

    mass_flow: FloatArray
    gap: FloatArray
    faces: FloatArray
    length: FloatArray
    duct_width: FloatArray
    passages: FloatArray
    passage_width: FloatArray
    area_ratio: FloatArray
    place_area: FloatArray
    fouling: FloatArray
    film_factor: FloatArray
    roughness: FloatArray
    fin_pitch: FloatArray
    fin_thickness: FloatArray
    fin_conductivity: FloatArray
    strip_length: FloatArray


@dataclass(frozen=True, eq=False, repr=False)
class Film:
    """A film in rectangular passages; arrays (cases,).

    `flow_area` [m^2] of one duct, `prime_area` and `fin_area` [m^2] wetted in one place, `fin_height` [m] from the
    root to the adiabatic tip; `fin_sheet` is fin conductivity times thickness [W/K]; `film_factor` [-] multiplies what
    the correlation gives.
    """

    mass_flow: FloatArray
    flow_area: FloatArray
    hydraulic_diameter: FloatArray
    length: FloatArray
    laminar_nusselt: FloatArray
    friction_reynolds: FloatArray
    prime_area: FloatArray
    fin_area: FloatArray
    fin_height: FloatArray
    fin_sheet: FloatArray
    place_area: FloatArray
    fouling: FloatArray
    film_factor: FloatArray
    relative_roughness: FloatArray
    developing: bool
    finned: bool
    fouled: bool

    @property
    def mass_flux(self) -> FloatArray:
        """Mass flow over flow area [kg/(m^2 s)], (cases,)."""
        return self.mass_flow / self.flow_area

    def reynolds(self, viscosity: FloatArray) -> FloatArray:
        """Reynolds number on the hydraulic diameter [-], (rows, cases); `viscosity` [Pa s]."""
        return (self.mass_flux * self.hydraulic_diameter) / viscosity

    def nusselt(self, reynolds: FloatArray, prandtl: FloatArray) -> FloatArray:
        """Nusselt number [-], (rows, cases)."""
        fully_developed = ducts.nusselt(reynolds, prandtl, self.laminar_nusselt)
        if not self.developing:
            return fully_developed
        ratio = self.hydraulic_diameter / self.length
        return fully_developed * ducts.entrance_nusselt_gain(reynolds, prandtl, ratio, self.laminar_nusselt)

    def friction_factor(self, reynolds: FloatArray) -> FloatArray:
        """Darcy friction factor [-], (rows, cases)."""
        return ducts.friction_factor(reynolds, self.friction_reynolds, self.relative_roughness)

    def conductance(self, heat_capacity: FloatArray, viscosity: FloatArray, conductivity: FloatArray) -> FloatArray:
        """Conductance between the fluid and the wall of one place [W/K], fouling and fins included, (rows, cases).

        Parameters: fluid's `heat_capacity` [J/(kg K)], `viscosity` [Pa s], `conductivity` [W/(m K)], (rows, cases).
        """
        prandtl = heat_capacity * viscosity / conductivity
        nusselt = self.film_factor * self.nusselt(self.reynolds(viscosity), prandtl)
        coefficient = nusselt * conductivity / self.hydraulic_diameter
        if self.fouled:
            coefficient = coefficient / (1.0 + coefficient * self.fouling)
        if not self.finned:
            return coefficient * self.prime_area
        efficiency = ducts.fin_efficiency(coefficient, self.fin_sheet, np.ones_like(self.fin_sheet), self.fin_height)
        return coefficient * (self.prime_area + efficiency * self.fin_area)

    def take(self, which: IntArray) -> Film:
        """Return the film of a subset of cases."""
        arrays: dict[str, Any] = {
            item.name: getattr(self, item.name)[which]
            for item in fields(self)
            if not isinstance(getattr(self, item.name), bool)
        }
        return replace(self, **arrays)


@dataclass(frozen=True, eq=False, repr=False)
class OffsetStripFilm(Film):
    """A film on rectangular offset strip fins; the three shape ratios of Manglik and Bergles, (cases,)."""

    spacing_over_height: FloatArray
    thickness_over_length: FloatArray
    thickness_over_spacing: FloatArray

    def nusselt(self, reynolds: FloatArray, prandtl: FloatArray) -> FloatArray:
        """Nusselt number from the Colburn factor, j Re Pr^(1/3) [-]."""
        factor = ducts.offset_strip_colburn_factor(
            reynolds, self.spacing_over_height, self.thickness_over_length, self.thickness_over_spacing
        )
        return factor * reynolds * np.cbrt(prandtl)

    def friction_factor(self, reynolds: FloatArray) -> FloatArray:
        """Darcy friction factor [-]."""
        return 4.0 * ducts.offset_strip_friction_factor(
            reynolds, self.spacing_over_height, self.thickness_over_length, self.thickness_over_spacing
        )


def smooth_duct(measures: DuctMeasures, developing: bool) -> Film:
    """Plain rectangular passages. One passage is heated through its plates; several also through their webs.

    The laminar Nusselt number of one passage is that of parallel plates, 8.235 with both heated and 5.385 with one
    (Shah and London 1978); of several, the H1 value with all walls heated.
    """
    aspect = ducts.aspect_ratio(measures.passage_width, measures.gap)
    plates = np.where(measures.faces == 2, ducts.PARALLEL_PLATES_BOTH_HEATED, ducts.PARALLEL_PLATES_ONE_HEATED)
    diameter = ducts.hydraulic_diameter(measures.passage_width, measures.gap)
    zero = np.zeros_like(diameter)
    return Film(
        mass_flow=measures.mass_flow,
        flow_area=measures.passages * measures.passage_width * measures.gap,
        hydraulic_diameter=diameter,
        length=measures.length,
        laminar_nusselt=np.where(measures.passages > 1, ducts.laminar_nusselt_h1(aspect), plates),
        friction_reynolds=ducts.friction_reynolds_laminar(aspect),
        prime_area=measures.place_area * measures.area_ratio,
        fin_area=zero,
        fin_height=zero,
        fin_sheet=zero,
        place_area=measures.place_area,
        fouling=measures.fouling,
        film_factor=measures.film_factor,
        relative_roughness=measures.roughness / diameter,
        developing=developing,
        finned=False,
        fouled=bool(np.any(measures.fouling > 0)),
    )


def _finned_areas(measures: DuctMeasures) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Prime area and fin area over plate area [-], and fin height [m].

    Between two heated plates the fin's middle is adiabatic; above one, the far plate is a fin tip that is shared.
    """
    pitch, thickness, gap = measures.fin_pitch, measures.fin_thickness, measures.gap
    spacing = pitch - thickness
    two = measures.faces == 2
    prime = spacing / pitch
    fin = np.where(two, gap, 2.0 * gap + spacing) / pitch
    return prime, fin, np.where(two, 0.5 * gap, gap + 0.5 * pitch)


def plain_fin_duct(measures: DuctMeasures, developing: bool) -> Film:
    """Straight continuous fins from plate to plate; each passage between two fins has all walls heated."""
    spacing = measures.fin_pitch - measures.fin_thickness
    aspect = ducts.aspect_ratio(spacing, measures.gap)
    diameter = ducts.hydraulic_diameter(spacing, measures.gap)
    prime, fin, height = _finned_areas(measures)
    return Film(
        mass_flow=measures.mass_flow,
        flow_area=measures.duct_width * measures.gap * spacing / measures.fin_pitch,
        hydraulic_diameter=diameter,
        length=measures.length,
        laminar_nusselt=ducts.laminar_nusselt_h1(aspect),
        friction_reynolds=ducts.friction_reynolds_laminar(aspect),
        prime_area=measures.place_area * prime,
        fin_area=measures.place_area * fin,
        fin_height=height,
        fin_sheet=measures.fin_conductivity * measures.fin_thickness,
        place_area=measures.place_area,
        fouling=measures.fouling,
        film_factor=measures.film_factor,
        relative_roughness=measures.roughness / diameter,
        developing=developing,
        finned=True,
        fouled=bool(np.any(measures.fouling > 0)),
    )


def offset_strip_fin_duct(measures: DuctMeasures, developing: bool) -> OffsetStripFilm:
    """Rectangular offset strip fins; the correlation holds its own entrance effects, so `developing` changes nothing.

    Wetted area adds the strips' leading and trailing edges, as the correlation's hydraulic diameter does.
    """
    plain = plain_fin_duct(measures, developing=False)
    spacing = measures.fin_pitch - measures.fin_thickness
    edges = 1.0 + measures.fin_thickness / measures.strip_length
    inherited: dict[str, Any] = {item.name: getattr(plain, item.name) for item in fields(plain)}
    inherited["fin_area"] = plain.fin_area * edges
    inherited["hydraulic_diameter"] = ducts.offset_strip_hydraulic_diameter(
        spacing, measures.gap, measures.strip_length, measures.fin_thickness
    )
    return OffsetStripFilm(
        **inherited,
        spacing_over_height=spacing / measures.gap,
        thickness_over_length=measures.fin_thickness / measures.strip_length,
        thickness_over_spacing=measures.fin_thickness / spacing,
    )


@dataclass(frozen=True, eq=False, repr=False)
class DuctKind:
    """One entry of `DUCT_KINDS`: what it is, and the builder of its film."""

    meaning: str
    build: Callable[[DuctMeasures, bool], Film]


DUCT_KINDS: dict[str, DuctKind] = {
    "smooth": DuctKind("rectangular passages without fins", smooth_duct),
    "plain fins": DuctKind("straight continuous fins across the gap", plain_fin_duct),
    "offset strip fins": DuctKind("fins cut into short strips, each offset from the one before", offset_strip_fin_duct),
}
