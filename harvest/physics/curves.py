"""A property against temperature: a polynomial, or straight lines between the points of a table."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from harvest.physics.arrays import FloatArray, IntArray

REFERENCE_TEMPERATURE = 300.0


class Curve(Protocol):
    """A property against temperature, with its slope; one curve a case, or one for all."""

    def value_and_slope(self, temperature: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Value and derivative at `temperature` [K], shape (..., cases)."""

    def take(self, which: IntArray) -> Curve:
        """Return the curve of a subset of cases."""


@dataclass(frozen=True, eq=False, repr=False)
class PolynomialCurve:
    """Polynomial in (T - `reference`); `coefficients` (terms, cases), or (terms, 1) for all, lowest power first, SI."""

    coefficients: FloatArray
    reference: float = REFERENCE_TEMPERATURE

    @classmethod
    def constant(cls, value: FloatArray) -> PolynomialCurve:
        """Return a property that does not depend on temperature; `value` (cases,)."""
        return cls(value[None, :])

    def value_and_slope(self, temperature: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Value and derivative by Horner's rule."""
        terms = self.coefficients
        value = np.broadcast_to(terms[-1], temperature.shape)
        slope = np.zeros_like(temperature)
        if len(terms) > 1:
            x = temperature - self.reference
            for coefficient in terms[-2::-1]:
                slope = slope * x + value
                value = value * x + coefficient
        return value, slope

    def take(self, which: IntArray) -> PolynomialCurve:
        """Return the curve of a subset of cases."""
        shared = self.coefficients.shape[1] == 1
        return self if shared else PolynomialCurve(self.coefficients[:, which], self.reference)


@dataclass(frozen=True, eq=False, repr=False)
class TableCurve:
    """Straight lines between points; held constant beyond the first and the last. One table for all cases.

    `temperatures` [K], rising, and `values` [SI], both (points,), two points or more.
    """

    temperatures: FloatArray
    values: FloatArray

    def value_and_slope(self, temperature: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Value and derivative of the segment that `temperature` lies in."""
        at = np.clip(temperature, self.temperatures[0], self.temperatures[-1])
        segment = np.clip(np.searchsorted(self.temperatures, at, side="right") - 1, 0, len(self.temperatures) - 2)
        slopes = np.diff(self.values) / np.diff(self.temperatures)
        slope = slopes[segment]
        value = self.values[segment] + slope * (at - self.temperatures[segment])
        return value, np.where(at == temperature, slope, 0.0)

    def take(self, which: IntArray) -> TableCurve:
        """Return itself: the table is shared."""
        return self


@dataclass(frozen=True, eq=False, repr=False)
class HeldCurve:
    """A curve within its range, held constant below `lower` and above `upper` [K]."""

    curve: Curve
    lower: float
    upper: float

    def value_and_slope(self, temperature: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Value and derivative; no slope outside of the range."""
        at = np.clip(temperature, self.lower, self.upper)
        value, slope = self.curve.value_and_slope(at)
        return value, np.where(at == temperature, slope, 0.0)

    def take(self, which: IntArray) -> HeldCurve:
        """Return the curve of a subset of cases."""
        return HeldCurve(self.curve.take(which), self.lower, self.upper)
