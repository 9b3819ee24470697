"""Symmetric positive definite systems against dense linear algebra, however they are scaled."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.estimate.normal import NormalSystem, Undetermined


@st.composite
def systems(draw):
    """A well-conditioned matrix whose unknowns have units many decades apart."""
    n = draw(st.integers(1, 12))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    rows = rng.normal(size=(n + 4, n))
    units = 10.0 ** rng.uniform(-8, 8, n)
    return rows.T @ rows + 0.1 * np.eye(n), units, rng


@given(systems())
def test_solution_inverse_and_determinant(drawn):
    plain, units, rng = drawn
    system = NormalSystem(plain * np.outer(units, units))
    x = rng.normal(size=(len(units), 2)) / units[:, None]
    right = units[:, None] * (plain @ (units[:, None] * x))
    for got, expected in ((system.solve(right), x), (system.solve(right[:, 0]), x[:, 0])):
        size = units[:, None] if got.ndim == 2 else units
        np.testing.assert_allclose(got * size, expected * size, rtol=1e-9, atol=1e-10)
    covariance = system.inverse() * np.outer(units, units)
    np.testing.assert_allclose(covariance, np.linalg.inv(plain), rtol=1e-8, atol=1e-9)
    np.testing.assert_allclose(covariance, covariance.T, rtol=1e-12)
    logarithm = np.linalg.slogdet(plain)[1] + 2 * np.log(units).sum()
    assert system.log_determinant() == pytest.approx(logarithm, rel=1e-9, abs=1e-8)


def test_matrix_is_left_as_it_was():
    matrix = np.array([[4.0, 1.0], [1.0, 3.0]])
    NormalSystem(matrix).inverse()
    np.testing.assert_array_equal(matrix, [[4.0, 1.0], [1.0, 3.0]])


def test_refinement_gains_digits():
    # a Hilbert matrix of order 8: condition 1e10
    n = 8
    matrix = 1 / (1 + np.add.outer(np.arange(n), np.arange(n)))
    system = NormalSystem(matrix)
    x = np.ones(n)
    refined = np.abs(system.solve(matrix @ x) - x).max()
    assert refined < 1e-5


@pytest.mark.parametrize(
    "matrix",
    [
        np.diag([1.0, 0.0]),
        np.diag([1.0, -1.0]),
        np.array([[1.0, 1.0], [1.0, 1.0]]),
        np.array([[1.0, 2.0], [2.0, 1.0]]),
        np.diag([1.0, np.nan]),
    ],
)
def test_refuses_what_is_not_determined(matrix):
    with pytest.raises(np.linalg.LinAlgError):
        NormalSystem(matrix)


def hilbert(n):
    return 1 / (1 + np.add.outer(np.arange(n), np.arange(n)))


def test_reciprocal_condition_of_the_scaled_matrix():
    units = 10.0 ** np.arange(-3, 3)
    system = NormalSystem(hilbert(6) * np.outer(units, units))
    scaled = hilbert(6) * np.outer(*2 * [1 / np.sqrt(np.diagonal(hilbert(6)))])
    exact = 1 / np.linalg.cond(scaled, 1)
    assert exact * 0.99 < system.reciprocal_condition() < 3 * exact


def test_rounding_is_what_a_change_in_the_last_digit_makes():
    # the same system with every entry changed by a rounding: the variance moves within the bound
    matrix, rng = hilbert(7), np.random.default_rng(4)
    rows = np.eye(7)
    system = NormalSystem(matrix)
    _, variances = system.rounding(rows, np.ones(7))
    spread = np.zeros(7)
    for _ in range(50):
        change = rng.uniform(-1, 1, (7, 7)) * np.finfo(float).eps
        other = NormalSystem(matrix * (1 + change + change.T) / 1.0)
        spread = np.maximum(spread, np.abs(np.diagonal(other.inverse() - system.inverse())))
    relative = spread / np.diagonal(system.inverse())
    assert np.all(relative < 10 * variances)
    assert np.all(relative > variances / 1000)


def test_a_well_told_result_keeps_its_digits_beside_one_that_is_not():
    # two unknowns whose sum alone is told well: the sum keeps its digits, the difference has none
    matrix = np.array([[1.0, 1.0 - 1e-12], [1.0 - 1e-12, 1.0]])
    system = NormalSystem(matrix)
    values, variances = system.rounding(np.array([[1.0, 1.0], [1.0, -1.0]]), np.ones(2))
    assert variances[0] < 1e-15
    assert variances[1] > 1e-5
    assert values[0] < 1e-15
    weakest = system.weakest()
    assert abs(weakest @ np.array([1.0, -1.0])) / np.sqrt(2) == pytest.approx(1.0, abs=1e-3)


def test_names_the_direction_that_is_not_determined():
    with pytest.raises(Undetermined) as error:
        NormalSystem(np.array([[1.0, 1.0, 0.0], [1.0, 1.0, 0.0], [0.0, 0.0, 1.0]]))
    np.testing.assert_allclose(np.abs(error.value.direction), [0.5**0.5, 0.5**0.5, 0], atol=1e-7)
    with pytest.raises(Undetermined) as error:
        NormalSystem(np.diag([1.0, 0.0]))
    np.testing.assert_array_equal(error.value.direction, [0.0, 1.0])
