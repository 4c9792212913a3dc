"""Pressure losses at the ends of a duct, in fittings and pipes, and the power that drives a flow."""

from __future__ import annotations

import numpy as np

from harvest.physics.arrays import FloatArray

LAMINAR_MOMENTUM_FACTOR = 1.2
TURBULENT_MOMENTUM_FACTOR = 1.0


def velocity_head(mass_flow: FloatArray, area: FloatArray, density: FloatArray) -> FloatArray:
    """Dynamic pressure of a flow, m^2 / (2 rho A^2) [Pa]; `mass_flow` [kg/s], `area` [m^2], `density` [kg/m^3]."""
    return 0.5 * (mass_flow / area) ** 2 / density


def contraction_coefficient(frontal_area_ratio: FloatArray) -> FloatArray:
    """Area of the jet behind a sharp entrance over that of the passage [-].

    Parameters: `frontal_area_ratio`, free flow area over area ahead of it [-], 0 to 1.
    Source: fit to Kays' curve for parallel plates, as used with Kays 1950 (from memory).
    """
    return np.asarray(4.374e-4 * np.exp(6.737 * np.sqrt(frontal_area_ratio)) + 0.621)


def entrance_loss_coefficient(frontal_area_ratio: FloatArray, momentum_factor: FloatArray) -> FloatArray:
    """Loss coefficient of a sharp entrance into a parallel-plate core, on the core's velocity head [-].

    Parameters: `frontal_area_ratio` [-], 0 to 1; `momentum_factor` [-], about 1.2 laminar, 1 turbulent.
    Source: Kays, Trans. ASME 72 (1950) 1067 (from memory).
    """
    jet = contraction_coefficient(frontal_area_ratio)
    return (1.0 - 2.0 * jet + jet**2 * (2.0 * momentum_factor - 1.0)) / jet**2


def exit_loss_coefficient(frontal_area_ratio: FloatArray, momentum_factor: FloatArray) -> FloatArray:
    """Loss coefficient of a sudden enlargement behind a core, 1 - 2 Kd s + s^2, on the core's velocity head [-].

    Parameters as `entrance_loss_coefficient`. Source: Kays 1950.
    """
    return 1.0 - 2.0 * momentum_factor * frontal_area_ratio + frontal_area_ratio**2


def drive_power(
    mass_flow: FloatArray, pressure_drop: FloatArray, density: FloatArray, efficiency: FloatArray
) -> FloatArray:
    """Electrical power of a pump or fan, m dp / (rho eta) [W].

    Parameters: `mass_flow` [kg/s], `pressure_drop` [Pa], inlet `density` [kg/m^3], `efficiency` of the drive with
    its motor [-], 0 to 1; one shape.
    """
    return mass_flow * pressure_drop / (density * efficiency)
