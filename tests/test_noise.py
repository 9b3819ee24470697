"""Tridiagonal algebra against dense matrices; noise of increments against brute force."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.estimate.bins import bin_pass
from fieldmap.estimate.noise import Tridiagonal, allan_deviation, read_part, walk_part
from fieldmap.readings import Integrator, Pass, Wire


def dense(part):
    return np.diag(part.diagonal) + np.diag(part.off, 1) + np.diag(part.off, -1)


@st.composite
def matrices(draw, smallest=2):
    """Positive definite tridiagonal matrices, products of bidiagonal ones."""
    n = draw(st.integers(smallest, 30))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    low = rng.uniform(-1, 1, n)
    pivots = rng.uniform(0.1, 2, n)
    diagonal = pivots.copy()
    diagonal[1:] += low[1:] ** 2 * pivots[:-1]
    return Tridiagonal(diagonal, low[1:] * pivots[:-1]), rng


@given(matrices())
def test_solve_and_product(drawn):
    part, rng = drawn
    n = len(part.diagonal)
    for right in (rng.normal(size=n), rng.normal(size=(n, 3))):
        np.testing.assert_allclose(part @ right, dense(part) @ right, rtol=1e-12, atol=1e-12)
        np.testing.assert_allclose(
            part.solve(right), np.linalg.solve(dense(part), right), rtol=1e-8, atol=1e-8
        )


@given(matrices())
def test_determinant_inverse_and_whitening(drawn):
    part, rng = drawn
    full = dense(part)
    sign, logarithm = np.linalg.slogdet(full)
    assert sign == 1
    assert part.log_determinant() == pytest.approx(logarithm, rel=1e-9, abs=1e-9)
    main, off = part.inverse_bands()
    inverse = np.linalg.inv(full)
    np.testing.assert_allclose(main, np.diag(inverse), rtol=1e-8, atol=1e-10)
    np.testing.assert_allclose(off, np.diag(inverse, 1), rtol=1e-7, atol=1e-9)
    y = rng.normal(size=len(full))
    white = part.whiten(y)
    assert white @ white == pytest.approx(y @ np.linalg.solve(full, y), rel=1e-8)


@given(matrices())
def test_whitening_makes_independent_unit_normals(drawn):
    part, _ = drawn
    W = np.array([part.whiten(column) for column in np.eye(len(part.diagonal))]).T
    np.testing.assert_allclose(W @ dense(part) @ W.T, np.eye(len(W)), atol=1e-8)


def test_sum_and_multiple():
    one = Tridiagonal(np.array([2.0, 3.0]), np.array([0.5]))
    other = 2.0 * one + one * 0.5
    np.testing.assert_array_equal(other.diagonal, [5.0, 7.5])
    np.testing.assert_array_equal(other.off, [1.25])


def test_a_matrix_of_one_row():
    one = Tridiagonal(np.array([4.0]), np.zeros(0))
    np.testing.assert_array_equal(one.solve(np.array([2.0])), [0.5])
    np.testing.assert_array_equal(one.whiten(np.array([2.0])), [1.0])
    assert one.log_determinant() == pytest.approx(np.log(4))
    np.testing.assert_array_equal(one.inverse_bands()[0], [0.25])


def test_refuses_what_is_not_positive_definite():
    with pytest.raises(np.linalg.LinAlgError, match="not positive definite"):
        Tridiagonal(np.array([1.0, 1.0]), np.array([2.0])).factor()


def uneven_pass(record="cumulative", n=90):
    """Uneven times, a few of them equal, and a probe that also turns back."""
    rng = np.random.default_rng(17)
    time = np.cumsum(rng.exponential(0.02, n) * (rng.uniform(size=n) > 0.1))
    position = 0.03 * np.sin(np.linspace(0, 5, n))
    return Pass("p", Wire("w", 1, 1), Integrator("i"), time, position, np.zeros(n), record=record)


def averaging(bins):
    owner = np.repeat(np.arange(len(bins.starts)), bins.count.astype(int))
    means = (owner == np.arange(len(bins.starts))[:, None]) / bins.count[:, None]
    return np.diff(means, axis=0)


def test_walk_part_is_the_covariance_of_the_increments_of_a_random_walk():
    one = uneven_pass()
    bins = bin_pass(one, 0.003)
    assert (bins.count > 1).sum() > 10
    steps = averaging(bins)
    expected = steps @ np.minimum.outer(one.time, one.time) @ steps.T
    np.testing.assert_allclose(dense(walk_part(bins)), expected, rtol=0, atol=1e-12)


def test_read_part_is_the_covariance_of_the_increments_of_independent_noise():
    one = uneven_pass()
    bins = bin_pass(one, 0.003)
    variance = np.random.default_rng(2).uniform(1, 2, len(bins.count))
    each = np.repeat(variance, bins.count.astype(int))
    steps = averaging(bins)
    expected = steps @ np.diag(each) @ steps.T
    np.testing.assert_allclose(dense(read_part(bins, variance)), expected, rtol=0, atol=1e-14)


def test_both_parts_are_the_design_formula_for_even_readings():
    n, rate = 300, 100.0
    one = Pass(
        "p",
        Wire("w", 1, 1),
        Integrator("i"),
        np.arange(n) / rate,
        np.linspace(0, 0.3, n),
        np.zeros(n),
    )
    bins = bin_pass(one, 0.01)
    walk, read = 2e-7, 5e-8
    c, w = bins.count, bins.count / rate
    e = w * (1 - 1 / c**2) / 6
    got = walk**2 * walk_part(bins) + read_part(bins, np.full(len(c), read**2))
    diagonal = walk**2 * (np.diff(bins.time) - e[1:] - e[:-1]) + read**2 * (1 / c[1:] + 1 / c[:-1])
    off = walk**2 * e[1:-1] - read**2 / c[1:-1]
    np.testing.assert_allclose(got.diagonal, diagonal, rtol=1e-9)
    np.testing.assert_allclose(got.off, off, rtol=1e-9)


def test_allan_deviation_by_hand():
    values = np.array([1.0, 3.0, 2.0, 6.0])
    # averages of two: 2, 4 apart; 2, 2.5, 4 overlapping
    assert allan_deviation(values, 2, overlapping=False) == pytest.approx(np.sqrt(2))
    assert allan_deviation(values, 1) == pytest.approx(np.sqrt((4 + 1 + 16) / 6))
    assert allan_deviation(values, 2) == pytest.approx(np.sqrt(2))


def test_allan_deviation_of_too_few_readings_is_no_number():
    assert np.isnan(allan_deviation(np.array([1.0, 2.0, 3.0]), 2))


def test_allan_deviation_of_a_still_integrator_tells_its_walk():
    rng = np.random.default_rng(5)
    rate, walk = 100.0, 2e-7
    voltage = rng.normal(size=20000) * walk * np.sqrt(rate)
    for size in (1, 10, 100):
        assert allan_deviation(voltage, size) * np.sqrt(size / rate) == pytest.approx(
            walk, rel=0.15
        )
