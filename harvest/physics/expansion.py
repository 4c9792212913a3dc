"""Thermal expansion of the plates between which modules are clamped."""

from __future__ import annotations

import numpy as np

from harvest.physics.arrays import FloatArray

EXPANSION = {"stainless steel": 17e-6, "copper": 17e-6, "aluminium": 23e-6}
"""Coefficients of linear thermal expansion near room temperature [1/K], from memory."""


def differential_expansion(
    length: FloatArray,
    hot_expansion: float,
    hot_temperature: FloatArray,
    cold_expansion: float,
    cold_temperature: FloatArray,
    assembly_temperature: FloatArray,
) -> FloatArray:
    """How much a hot plate outgrows a cold one of the same length [m], (cases,).

    Parameters: `length` [m]; coefficients of linear expansion [1/K] and mean temperatures [K] of both plates;
    `assembly_temperature` [K], at which they were of equal length. Source: definition of the coefficient.
    """
    hot = hot_expansion * (hot_temperature - assembly_temperature)
    cold = cold_expansion * (cold_temperature - assembly_temperature)
    return np.asarray(length * (hot - cold))
