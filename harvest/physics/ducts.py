"""Heat transfer and friction of flow in rectangular passages, and the kinds of duct that are built from them.

Friction factors named `friction_factor` are Darcy factors (four times the Fanning factor) throughout; the products
`friction_reynolds_*` and the offset-strip friction factor are Fanning values, as their sources print them.
"""

from __future__ import annotations

import numpy as np

from harvest.physics.arrays import FloatArray

LAMINAR_LIMIT = 2300.0
TURBULENT_LIMIT = 4000.0
PARALLEL_PLATES_BOTH_HEATED = 8.235
PARALLEL_PLATES_ONE_HEATED = 5.385
OFFSET_STRIP_REYNOLDS_RANGE = (120.0, 1e4)


def hydraulic_diameter(width: FloatArray, height: FloatArray) -> FloatArray:
    """Hydraulic diameter of a rectangular passage, 2 w b / (w + b) [m].

    Parameters: `width`, `height` [m], any one shape, positive.
    """
    return 2.0 * width * height / (width + height)


def aspect_ratio(width: FloatArray, height: FloatArray) -> FloatArray:
    """Short side over long side of a rectangular passage [-], 0 to 1."""
    return np.minimum(width, height) / np.maximum(width, height)


def laminar_nusselt_h1(aspect_ratio: FloatArray) -> FloatArray:
    """Nusselt number of fully developed laminar flow, all walls heated, axially constant heat flux [-].

    Parameters: `aspect_ratio` [-], 0 (parallel plates) to 1 (square).
    Source: Shah and London, Laminar Flow Forced Convection in Ducts, 1978, polynomial for the H1 condition.
    """
    a = aspect_ratio
    return 8.235 * (1 + a * (-2.0421 + a * (3.0853 + a * (-2.4765 + a * (1.0578 - 0.1861 * a)))))


def laminar_nusselt_t(aspect_ratio: FloatArray) -> FloatArray:
    """Nusselt number of fully developed laminar flow at constant wall temperature [-].

    Parameters: `aspect_ratio` [-], 0 to 1. Source: Shah and London 1978, polynomial for the T condition.
    """
    a = aspect_ratio
    return 7.541 * (1 + a * (-2.610 + a * (4.970 + a * (-5.119 + a * (2.702 - 0.548 * a)))))


def friction_reynolds_laminar(aspect_ratio: FloatArray) -> FloatArray:
    """Fanning friction factor times Reynolds number of fully developed laminar flow [-].

    Parameters: `aspect_ratio` [-], 0 to 1. Source: Shah and London 1978.
    """
    a = aspect_ratio
    return 24.0 * (1 + a * (-1.3553 + a * (1.9467 + a * (-1.7012 + a * (0.9564 - 0.2537 * a)))))


def friction_factor_smooth(reynolds: FloatArray) -> FloatArray:
    """Darcy friction factor of turbulent flow in a smooth duct [-].

    Parameters: `reynolds` [-], 3000 to 5e6.
    Source: Petukhov, Advances in Heat Transfer 6 (1970) 503; f = (0.790 ln Re - 1.64)^-2.
    """
    return (0.790 * np.log(reynolds) - 1.64) ** -2.0


def friction_factor_rough(reynolds: FloatArray, relative_roughness: FloatArray) -> FloatArray:
    """Darcy friction factor of turbulent flow in a rough duct [-], explicit.

    Parameters: `reynolds` [-], 4000 to 1e8; `relative_roughness`, height over hydraulic diameter [-], 0 to 0.05.
    Source: Haaland, J. Fluids Eng. 105 (1983) 89; within 1.4 % of Colebrook.
    """
    return (-1.8 * np.log10(6.9 / reynolds + (relative_roughness / 3.7) ** 1.11)) ** -2.0


def nusselt_gnielinski(reynolds: FloatArray, prandtl: FloatArray) -> FloatArray:
    """Nusselt number of fully developed turbulent flow in a smooth duct [-].

    Parameters: `reynolds` [-], 3000 to 5e6; `prandtl` [-], 0.5 to 2000; shapes broadcast.
    Source: Gnielinski, Int. Chem. Eng. 16 (1976) 359, with Petukhov's friction factor.
    """
    return _gnielinski(reynolds, prandtl, friction_factor_smooth(reynolds))


def _gnielinski(reynolds: FloatArray, prandtl: FloatArray, friction: FloatArray) -> FloatArray:
    eighth = 0.125 * friction
    return eighth * (reynolds - 1000.0) * prandtl / (1.0 + 12.7 * np.sqrt(eighth) * (np.cbrt(prandtl) ** 2 - 1.0))


def turbulent_share(reynolds: FloatArray) -> FloatArray:
    """Weight of the turbulent end in the transition region [-]: 0 at Re 2300 and below, 1 at 4000 and above.

    Source: Gnielinski, Int. J. Heat Mass Transfer 63 (2013) 134, linear in the Reynolds number.
    """
    return np.clip((reynolds - LAMINAR_LIMIT) * (1.0 / (TURBULENT_LIMIT - LAMINAR_LIMIT)), 0.0, 1.0)


def nusselt(reynolds: FloatArray, prandtl: FloatArray, laminar_nusselt: FloatArray) -> FloatArray:
    """Nusselt number over all flow regimes, fully developed [-].

    Laminar below Re 2300, Gnielinski above 4000, linear in Re between the two ends: continuous, with kinks.

    Parameters: `reynolds`, `prandtl` [-], shape (rows, cases); `laminar_nusselt` [-], (cases,).
    Source: Gnielinski 1976 and 2013.
    """
    share = turbulent_share(reynolds)
    turbulent = nusselt_gnielinski(np.maximum(reynolds, TURBULENT_LIMIT), prandtl)
    return laminar_nusselt + share * (turbulent - laminar_nusselt)


def friction_factor(
    reynolds: FloatArray, friction_reynolds: FloatArray, relative_roughness: FloatArray | float = 0.0
) -> FloatArray:
    """Darcy friction factor over all flow regimes, fully developed [-].

    Parameters: `reynolds` [-], (rows, cases); `friction_reynolds`, the laminar FANNING product [-], (cases,);
    `relative_roughness` [-], (cases,), acts on turbulent flow only.
    Source: Shah and London 1978; Petukhov 1970, or Haaland 1983 where the duct is rough; Gnielinski 2013 between.
    """
    share = turbulent_share(reynolds)
    laminar = 4.0 * friction_reynolds / np.minimum(reynolds, LAMINAR_LIMIT)
    fast = np.maximum(reynolds, TURBULENT_LIMIT)
    turbulent = friction_factor_smooth(fast)
    if np.any(np.asarray(relative_roughness) > 0):
        turbulent = np.where(
            np.asarray(relative_roughness) > 0,
            np.maximum(turbulent, friction_factor_rough(fast, np.asarray(relative_roughness))),
            turbulent,
        )
    return laminar + share * (turbulent - laminar)


def graetz_number(reynolds: FloatArray, prandtl: FloatArray, diameter_over_length: FloatArray) -> FloatArray:
    """Graetz number of a passage, Re Pr D / L [-]."""
    return reynolds * prandtl * diameter_over_length


def entrance_nusselt_gain(
    reynolds: FloatArray, prandtl: FloatArray, diameter_over_length: FloatArray, laminar_nusselt: FloatArray
) -> FloatArray:
    """Mean Nusselt number over the length with the thermal entrance, over its fully developed value [-], 1 or more.

    Laminar: Hausen's entrance term, 0.0668 Gz / (1 + 0.04 Gz^(2/3)), added to the fully developed value. Turbulent:
    1 + (D/L)^(2/3). Between, the Nusselt number with its entrance is linear from Re 2300 to 4000, as in `nusselt`.

    Parameters: `reynolds`, `prandtl` [-], (rows, cases); `diameter_over_length`, `laminar_nusselt` [-], (cases,).
    Source: Hausen, Z. VDI Beih. Verfahrenstechnik 4 (1943) 91, made for tubes (from memory), within 6 % of
    Wibulswas' square duct from Gz 10 to 200; Gnielinski 1976 for turbulent flow, 2013 between.
    """
    graetz = graetz_number(np.minimum(reynolds, LAMINAR_LIMIT), prandtl, diameter_over_length)
    laminar = 1.0 + 0.0668 * graetz / (1.0 + 0.04 * np.cbrt(graetz) ** 2) / laminar_nusselt
    turbulent = 1.0 + np.cbrt(diameter_over_length) ** 2
    # Weighted by heat transfer, so that gain times `nusselt` is linear in Re and joins both ends.
    fast = nusselt_gnielinski(np.maximum(reynolds, TURBULENT_LIMIT), prandtl)
    weight = turbulent_share(reynolds) * fast / nusselt(reynolds, prandtl, laminar_nusselt)
    return laminar + weight * (turbulent - laminar)


def fin_efficiency(
    film_coefficient: FloatArray, conductivity: FloatArray, thickness: FloatArray, height: FloatArray
) -> FloatArray:
    """Efficiency of a straight fin with an adiabatic tip, tanh(mL)/(mL), m = sqrt(2 h / (k t)) [-].

    Parameters: `film_coefficient` [W/(m^2 K)], fouling included, (rows, cases); `conductivity` [W/(m K)],
    `thickness`, `height` [m], (cases,). Source: Incropera et al., Fundamentals of Heat and Mass Transfer, 7th ed.,
    eq. 3.94.
    """
    reach = np.sqrt(2.0 * film_coefficient / (conductivity * thickness)) * height
    small = reach < 1e-4
    safe = np.where(small, 1.0, reach)
    return np.where(small, 1.0 - reach * reach / 3.0, np.tanh(safe) / safe)


def offset_strip_colburn_factor(
    reynolds: FloatArray,
    spacing_over_height: FloatArray,
    thickness_over_length: FloatArray,
    thickness_over_spacing: FloatArray,
) -> FloatArray:
    """Colburn j factor of rectangular offset strip fins [-].

    Parameters: `reynolds` [-], 120 to 1e4, (rows, cases); the three shape ratios [-], (cases,).
    Source: Manglik and Bergles, Exp. Thermal Fluid Sci. 10 (1995) 171; +-20 % against their data.
    """
    a, d, g = spacing_over_height, thickness_over_length, thickness_over_spacing
    laminar = 0.6522 * reynolds**-0.5403 * (a**-0.1541 * d**0.1499 * g**-0.0678)
    return laminar * (1.0 + 5.269e-5 * reynolds**1.340 * (a**0.504 * d**0.456 * g**-1.055)) ** 0.1


def offset_strip_friction_factor(
    reynolds: FloatArray,
    spacing_over_height: FloatArray,
    thickness_over_length: FloatArray,
    thickness_over_spacing: FloatArray,
) -> FloatArray:
    """FANNING friction factor of rectangular offset strip fins [-].

    Parameters and source as `offset_strip_colburn_factor`.
    """
    a, d, g = spacing_over_height, thickness_over_length, thickness_over_spacing
    laminar = 9.6243 * reynolds**-0.7422 * (a**-0.1856 * d**0.3053 * g**-0.2659)
    return laminar * (1.0 + 7.669e-8 * reynolds**4.429 * (a**0.920 * d**3.767 * g**0.236)) ** 0.1


def offset_strip_hydraulic_diameter(
    spacing: FloatArray, height: FloatArray, strip_length: FloatArray, thickness: FloatArray
) -> FloatArray:
    """Hydraulic diameter of offset strip fins, 4 s h l / (2 (s l + h l + t h) + t s) [m].

    Parameters: clear `spacing`, clear `height`, `strip_length`, `thickness` [m], (cases,).
    Source: Manglik and Bergles 1995, eq. 1.
    """
    s, h, length, t = spacing, height, strip_length, thickness
    return 4.0 * s * h * length / (2.0 * (s * length + h * length + t * h) + t * s)
