"""One side of the stack during the iteration: films, capacity rates and their slopes, made linear row by row."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from harvest.model.stack.problem import StackSide, take_cases
from harvest.physics.arrays import FloatArray, IntArray

SLOPE_STEP = 0.05
"""Warming by which slopes are taken [K]."""

SINK_STEP = 1e-4
"""Part of a sink's rise over the room by which its slope is taken, since films in still air change with ln(rise)."""
SMALLEST_RISE = 1e-3
"""Rise below which a sink's slope is taken as at this one [K]."""


class FilmTerms(NamedTuple):
    """Effective conductance from stream to wall face, heat capacity rate and film conductance, (rows, cases)."""

    conductance: FloatArray
    capacity: FloatArray
    film: FloatArray


class StreamLine(NamedTuple):
    """A row's stream made linear: outlet = p inlet - r heat + w, heat = a inlet - b wall + c."""

    p: FloatArray
    r: FloatArray
    w: FloatArray
    a: FloatArray
    b: FloatArray
    c: FloatArray


class SideWork:
    """One side during the iteration: film terms at the latest temperatures, with secant slopes."""

    def __init__(self, side: StackSide, other_inlet: FloatArray, active: FloatArray | None, against_rows: bool) -> None:
        self.side = side
        self.active = active
        self.against_rows = against_rows
        self.mean: FloatArray | None = None
        self.terms: FilmTerms | None = None
        self.constriction_slope: FloatArray | None = None
        self.derivative: FloatArray | None = None
        cases = len(side.inlet_temperature)
        self.conductance_slope = np.zeros((1, cases))
        self.capacity_slope = np.zeros((1, cases))
        if side.film is not None:
            # two temperatures, at the inlet and half way to the other stream, give the first films and slopes
            assert side.fluid is not None
            self.ends = np.stack([side.inlet_temperature, 0.5 * (side.inlet_temperature + other_inlet)])
            heat_capacity, viscosity, conductivity = side.fluid.film_properties(self.ends)
            self.end_films = side.film.conductance(heat_capacity, viscosity, conductivity)
            self.end_capacities = side.mass_flow * heat_capacity
            span = self.ends[1] - self.ends[0]
            self.inverse_span = np.where(np.abs(span) > 1e-6, 1.0 / np.where(span == 0, 1.0, span), 0.0)
            conductance = self._combine(self.end_films, self.end_capacities).conductance
            self.conductance_slope = np.diff(conductance, axis=0) * self.inverse_span
            self.capacity_slope = np.diff(self.end_capacities, axis=0) * self.inverse_span

    def take(self, which: IntArray) -> None:
        """Keep a subset of cases."""
        for name, value in self.__dict__.items():
            if isinstance(value, FilmTerms):
                setattr(self, name, FilmTerms(*(item[:, which] for item in value)))
            else:
                setattr(self, name, take_cases(value, which))

    def ends_of_rows(self, boundaries: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Values at the boundary where the stream enters each row, and where it leaves."""
        before, after = boundaries[:-1], boundaries[1:]
        return (after, before) if self.against_rows else (before, after)

    def _combine(self, film: FloatArray, capacity: FloatArray) -> FilmTerms:
        """Join film and wall: the stream nears the metal exponentially (or by the arithmetic mean) within a row."""
        transfer_units = film / capacity
        if self.side.arithmetic:
            effective = film / (1.0 + 0.5 * transfer_units)
        else:
            effective = -capacity * np.expm1(-transfer_units)
        return FilmTerms(effective / (1.0 + effective * self.side.wall_resistance), capacity, film)

    def guess(self, stream: FloatArray, wall: FloatArray) -> None:
        """Take films and capacities from the straight line through the two first evaluations."""
        if self.side.film is None:
            self._still(stream, wall)
            return
        mean = 0.5 * (stream[:-1] + stream[1:])
        share = np.clip((mean - self.ends[0]) * self.inverse_span, -0.2, 2.0)
        film = self.end_films[0] + share * (self.end_films[1] - self.end_films[0])
        capacity = self.end_capacities[0] + share * (self.end_capacities[1] - self.end_capacities[0])
        self.terms = self._combine(
            np.maximum(film, 0.2 * self.end_films[0]), np.maximum(capacity, 0.2 * self.end_capacities[0])
        )
        self.mean = mean

    def evaluate(self, stream: FloatArray, wall: FloatArray, renew_slopes: bool, exact_slopes: bool) -> None:
        """Evaluate films and capacities at the streams' temperatures.

        Slopes are renewed from the step since the last evaluation, or by evaluating a second time a little warmer.
        """
        side = self.side
        if side.film is None or side.fluid is None:
            self._still(stream, wall)
            return
        mean = 0.5 * (stream[:-1] + stream[1:])
        heat_capacity, viscosity, conductivity = side.fluid.film_properties(mean)
        enthalpy = side.fluid.enthalpy(stream)
        fall = stream[:-1] - stream[1:]
        enough = np.abs(fall) > 1e-3
        secant = np.where(enough, (enthalpy[:-1] - enthalpy[1:]) / np.where(enough, fall, 1.0), heat_capacity)
        film = side.film.conductance(heat_capacity, viscosity, conductivity)
        terms = self._combine(film, side.mass_flow * np.where(secant > 0, secant, heat_capacity))
        if exact_slopes:
            warmer = side.fluid.film_properties(mean + SLOPE_STEP)
            capacity = terms.capacity + side.mass_flow * (warmer[0] - heat_capacity)
            warmer_terms = self._combine(side.film.conductance(*warmer), capacity)
            self.conductance_slope = (warmer_terms.conductance - terms.conductance) / SLOPE_STEP
            if np.any(side.constriction.at_footprint > 0):
                change = self._constriction(warmer_terms.film) - self._constriction(terms.film)
                self.constriction_slope = change / SLOPE_STEP
            self.capacity_slope = (capacity - terms.capacity) / SLOPE_STEP
        elif renew_slopes and self.terms is not None and self.mean is not None:
            change = mean - self.mean
            moved = np.abs(change) > 1e-3
            step = np.where(moved, change, 1.0)
            self.conductance_slope = np.where(
                moved, (terms.conductance - self.terms.conductance) / step, self.conductance_slope
            )
            self.capacity_slope = np.where(moved, (terms.capacity - self.terms.capacity) / step, self.capacity_slope)
        self.terms, self.mean = terms, mean

    def _still(self, stream: FloatArray, wall: FloatArray) -> None:
        """Take the conductance of a reservoir, once, or of a sink at the latest wall temperature, with its slope."""
        side = self.side
        if self.terms is None or side.sink is not None:
            conductance, film = side.still_conductance(wall)
            self.terms = FilmTerms(conductance, np.ones_like(film), film)
            self.mean = stream[1:]
            if side.sink is not None:
                rise = wall - side.inlet_temperature
                step = SINK_STEP * np.where(np.abs(rise) < SMALLEST_RISE, SMALLEST_RISE, rise)
                self.conductance_slope = (side.still_conductance(wall + step)[0] - conductance) / step

    def line(self, stream: FloatArray, wall: FloatArray) -> StreamLine:
        """Return the stream's linear model around the latest temperatures."""
        assert self.terms is not None and self.mean is not None
        conductance, capacity, _ = self.terms
        if self.side.film is None:
            one = np.ones_like(conductance)
            zero = np.zeros_like(conductance)
            if self.side.sink is None:
                return StreamLine(one, zero, zero, conductance, conductance, zero)
            s = self.conductance_slope * (self.side.inlet_temperature - wall)
            return StreamLine(one, zero, zero, conductance, conductance - s, -s * wall)
        entering, leaving = self.ends_of_rows(stream)
        half = 0.5 * self.capacity_slope * (entering - leaving)
        r = 1.0 / (capacity - half)
        p = (capacity + half) * r
        w = (-2.0 * half * self.mean) * r
        if self.active is not None:
            p = np.where(self.active > 0, p, 1.0)
            r = r * self.active
            w = w * self.active
        s = self.conductance_slope * (entering - wall)
        d = 1.0 / (1.0 + 0.5 * s * r)
        return StreamLine(
            p, r, w, (conductance + 0.5 * s * (1.0 + p)) * d, conductance * d, s * (0.5 * w - self.mean) * d
        )

    def module_resistance(self) -> FloatArray:
        """Resistance from the wall face to the junctions of a module [K/W], (rows, cases)."""
        assert self.terms is not None
        return self.side.module_resistance + self._constriction(self.terms.film)

    def keep_derivative(self, of_boundaries: FloatArray) -> None:
        """Keep the derivative of the rows' mean stream temperature, where the constriction's change is followed."""
        if self.constriction_slope is not None:
            self.derivative = 0.5 * (of_boundaries[:, :-1] + of_boundaries[:, 1:])

    def constriction_shift(self, heat: FloatArray) -> FloatArray | float:
        """Change of the junctions' wall-side temperature with each current, for the `heat` of a module [W]."""
        if self.constriction_slope is None or self.derivative is None:
            return 0.0
        return self.constriction_slope * heat * self.derivative

    def _constriction(self, film: FloatArray) -> FloatArray:
        return self.side.constriction.resistance(film / self.side.place_area)
