"""Symmetric positive definite systems against dense linear algebra, however they are scaled."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.estimate.normal import NormalSystem


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
