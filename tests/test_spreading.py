"""Spreading resistance against the exact double Fourier series of a square source on a square plate."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.physics.arrays import FloatArray
from harvest.physics.spreading import Constriction, spreading_resistance

FILMS = np.array([40.0, 200.0, 1000.0, 5000.0])
FOOTPRINT = 0.040
THICKNESS = 0.003
STAINLESS_STEEL = 15.0


def exact_spreading_resistance(place: float, film: FloatArray, terms: int = 300) -> FloatArray:
    """Mean source temperature over heat, less the uniform part [K/W].

    Uniform flux into a centred square of `FOOTPRINT`; the far face gives heat to a film, the edges are adiabatic. With
    the origin in the middle the flux is a series of even cosines, each with a one-dimensional solution in depth.
    """
    order = np.arange(terms)
    weight = np.where(order == 0, 1.0, 2.0) * np.sinc(order * FOOTPRINT / place) ** 2
    wave = 2.0 * np.pi / place * np.hypot(order[:, None], order[None, :])
    product = weight[:, None] * weight[None, :]
    product[0, 0], wave[0, 0] = 0.0, 1.0
    tanh = np.tanh(wave * THICKNESS)
    conducted = STAINLESS_STEEL * wave
    return np.array(
        [np.sum(product * (conducted + h * tanh) / (conducted * tanh + h) / conducted) / place**2 for h in film]
    )


def found(place: float, film: FloatArray) -> FloatArray:
    return spreading_resistance(
        np.full_like(film, place**2),
        np.full_like(film, FOOTPRINT**2),
        np.full_like(film, THICKNESS),
        np.full_like(film, STAINLESS_STEEL),
        film,
    )


def test_the_series_has_converged() -> None:
    np.testing.assert_allclose(
        exact_spreading_resistance(0.060, FILMS, 300), exact_spreading_resistance(0.060, FILMS, 600), rtol=1e-4
    )


@pytest.mark.parametrize("place", [0.060, 0.080])
def test_wide_places_agree_with_the_exact_series(place: float) -> None:
    np.testing.assert_allclose(found(place, FILMS), exact_spreading_resistance(place, FILMS), rtol=0.06)


def test_a_narrow_margin_spreads_little() -> None:
    exact = exact_spreading_resistance(0.044, FILMS)
    np.testing.assert_allclose(found(0.044, FILMS), exact, rtol=0.5)
    assert np.all(np.abs(found(0.044, FILMS) - exact) < 0.06)


def test_nothing_spreads_where_the_footprint_fills_its_place_or_the_wall_has_no_thickness() -> None:
    one = np.ones(1)
    assert spreading_resistance(one, one, 0.003 * one, 15.0 * one, 100.0 * one) == 0.0
    assert spreading_resistance(one, 0.5 * one, 0.0 * one, 15.0 * one, 100.0 * one) == 0.0


@settings(max_examples=40)
@given(
    share=st.floats(0.05, 0.95),
    thickness=st.floats(1e-4, 0.02),
    conductivity=st.floats(1.0, 400.0),
    film=st.floats(5.0, 2e4),
)
def test_a_stronger_film_or_a_larger_footprint_lowers_it(
    share: float, thickness: float, conductivity: float, film: float
) -> None:
    place = np.full(3, 0.0036)
    resistance = spreading_resistance(
        place,
        place * np.array([share, share, min(1.0, 1.05 * share)]),
        np.full(3, thickness),
        np.full(3, conductivity),
        film * np.array([1.0, 1.1, 1.0]),
    )
    assert resistance[0] > 0.0
    assert resistance[1] <= resistance[0] * (1 + 1e-14)
    assert resistance[2] < resistance[0]


def test_a_subset_of_cases_is_the_same_constriction() -> None:
    sides = np.array([0.044, 0.060, 0.080])
    whole = Constriction.of(sides**2, np.full(3, 0.0016), np.array([0.001, 0.0, 0.004]), np.array([15.0, 200.0, 45.0]))
    which = np.array([2, 0])
    film = np.array([[50.0, 60.0, 70.0], [500.0, 600.0, 700.0]])
    np.testing.assert_array_equal(whole.resistance(film)[:, which], whole.take(which).resistance(film[:, which]))
