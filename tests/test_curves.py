"""Property curves: tables hit their points, polynomials agree with numpy's."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harvest.physics.curves import Curve, PolynomialCurve, TableCurve

TABLE = TableCurve(np.array([300.0, 350.0, 450.0]), np.array([2.0, 1.0, 4.0]))


def test_a_table_hits_its_points() -> None:
    value, _ = TABLE.value_and_slope(TABLE.temperatures)
    np.testing.assert_array_equal(value, TABLE.values)


def test_a_table_is_straight_between_its_points() -> None:
    value, slope = TABLE.value_and_slope(np.array([325.0, 400.0, 425.0]))
    np.testing.assert_allclose(value, [1.5, 2.5, 3.25], rtol=1e-15)
    np.testing.assert_allclose(slope, [-0.02, 0.03, 0.03], rtol=1e-15)


def test_a_table_is_held_constant_outside() -> None:
    value, slope = TABLE.value_and_slope(np.array([1.0, 299.9, 450.1, 2000.0]))
    np.testing.assert_array_equal(value, [2.0, 2.0, 4.0, 4.0])
    np.testing.assert_array_equal(slope, 0.0)


@settings(max_examples=40)
@given(
    coefficients=st.lists(st.floats(-5.0, 5.0), min_size=1, max_size=5),
    temperatures=st.lists(st.floats(200.0, 900.0), min_size=1, max_size=4),
)
def test_a_polynomial_agrees_with_numpy(coefficients: list[float], temperatures: list[float]) -> None:
    at = np.array(temperatures)
    curve = PolynomialCurve(np.repeat(np.array(coefficients)[:, None], len(at), axis=1))
    reference = np.polynomial.Polynomial(coefficients)
    value, slope = curve.value_and_slope(at)
    size = np.polynomial.Polynomial(np.abs(coefficients))(np.abs(at - 300.0)) + 1.0
    assert np.all(np.abs(value - reference(at - 300.0)) <= 1e-14 * size)
    assert np.all(np.abs(slope - reference.deriv()(at - 300.0)) <= 1e-13 * size)


def test_a_constant_has_no_slope() -> None:
    value, slope = PolynomialCurve.constant(np.array([3.0, 5.0])).value_and_slope(np.full((4, 2), 500.0))
    np.testing.assert_array_equal(value, np.tile([3.0, 5.0], (4, 1)))
    np.testing.assert_array_equal(slope, np.zeros((4, 2)))


@pytest.mark.parametrize(
    "curve",
    [PolynomialCurve(np.array([[1.0, 2.0, 3.0], [0.1, 0.2, 0.3], [1e-3, 0.0, -1e-3]])), TABLE],
    ids=["polynomial", "table"],
)
def test_a_subset_of_cases_is_the_same_curve(curve: Curve) -> None:
    which = np.array([2, 0])
    at = np.array([[310.0, 340.0, 420.0], [305.0, 351.0, 449.0]])
    for whole, part in zip(curve.value_and_slope(at), curve.take(which).value_and_slope(at[:, which]), strict=True):
        np.testing.assert_array_equal(whole[:, which], part)
