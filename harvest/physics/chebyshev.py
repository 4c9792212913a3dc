"""Chebyshev expansions of smooth functions on an interval."""

from __future__ import annotations

import numpy as np

from harvest.physics.arrays import FloatArray


def chebyshev_nodes(lower: float, upper: float, count: int) -> FloatArray:
    """Zeros of the Chebyshev polynomial of degree `count`, mapped to `lower` .. `upper` and rising, (count,).

    Source: Trefethen, Approximation Theory and Approximation Practice, 2013, chapter 2 (points of the first kind).
    """
    x = np.cos(np.pi * (np.arange(count)[::-1] + 0.5) / count)
    return np.asarray(0.5 * (lower + upper) + 0.5 * (upper - lower) * x)


def chebyshev_coefficients(values: FloatArray) -> FloatArray:
    """Coefficients (..., count) of the polynomials through `values` (..., count) at `chebyshev_nodes`.

    Source: discrete orthogonality of the polynomials at their zeros; Trefethen 2013, chapter 3.
    """
    count = values.shape[-1]
    angles = np.pi * (np.arange(count)[::-1] + 0.5) / count
    coefficients = 2.0 / count * values @ np.cos(np.outer(angles, np.arange(count)))
    coefficients[..., 0] *= 0.5
    return np.asarray(coefficients)


def without_tail(coefficients: FloatArray, tolerance: float) -> FloatArray:
    """Set the last coefficients that are all below `tolerance` times the largest one to zero; shape (terms,)."""
    size = np.abs(coefficients)
    needed = np.flatnonzero(size > tolerance * size.max())
    kept = np.zeros_like(coefficients)
    if needed.size:
        kept[: needed[-1] + 1] = coefficients[: needed[-1] + 1]
    return kept


def derivative(coefficients: FloatArray, lower: float, upper: float) -> FloatArray:
    """Coefficients of the derivative, as many as given (the last is zero), (terms,)."""
    slope = np.zeros_like(coefficients)
    if len(coefficients) > 1:
        slope[:-1] = np.polynomial.chebyshev.chebder(coefficients) * (2.0 / (upper - lower))
    return slope


def integral(coefficients: FloatArray, lower: float, upper: float) -> FloatArray:
    """Coefficients (terms + 1,) of the integral that is zero in the middle of the interval."""
    return np.asarray(np.polynomial.chebyshev.chebint(coefficients, scl=0.5 * (upper - lower)))


def expansion_value(coefficients: FloatArray, x: FloatArray) -> FloatArray:
    """Value of one expansion (terms,) at `x`, -1 to 1, any shape."""
    return np.asarray(np.polynomial.chebyshev.chebval(x, coefficients))
