"""The uniform spline against scipy's B-splines: values, derivatives, integrals, roughness."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.interpolate import BSpline

from fieldmap.estimate.spline import DEGREE, UniformSpline, piece_polynomials

SPLINE = UniformSpline(start=-0.07, spacing=0.013, size=17)
RNG = np.random.default_rng(4)
COEFFICIENTS = RNG.normal(size=SPLINE.size)
INSIDE = np.sort(np.append(RNG.uniform(SPLINE.start, SPLINE.stop, 200), SPLINE.start))


def reference(spline=SPLINE, coefficients=COEFFICIENTS, pad=4):
    """The same spline as scipy's, with zeros around it so that it may be integrated anywhere."""
    count = spline.size + 2 * pad + DEGREE + 1
    knots = spline.start + spline.spacing * (np.arange(count) - DEGREE - pad)
    return BSpline(knots, np.pad(coefficients, pad), DEGREE)


sizes = st.integers(min_value=4, max_value=40)
starts = st.floats(min_value=-3, max_value=3)
spacings = st.floats(min_value=1e-4, max_value=0.5)


@st.composite
def splines(draw):
    spline = UniformSpline(draw(starts), draw(spacings), draw(sizes))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    return spline, rng.normal(size=spline.size), rng.uniform(spline.start, spline.stop, 20)


@pytest.mark.parametrize("degree", [1, 2, 3, 4, 5])
def test_piece_polynomials_are_those_of_the_basis_element(degree):
    x = np.linspace(0, 1, 7)
    table = piece_polynomials(degree)
    element = BSpline.basis_element(np.arange(degree + 2), extrapolate=False)
    for m in range(degree + 1):  # the m-th function from the left is in its piece degree - m
        expected = np.nan_to_num(element(x + degree - m))
        np.testing.assert_allclose(
            np.polynomial.polynomial.polyval(x, table[:, m]), expected, atol=1e-14
        )


@given(splines())
def test_values_agree_with_scipy(drawn):
    spline, b, s = drawn
    np.testing.assert_allclose(
        spline.field_rows(s) @ b, reference(spline, b)(s), rtol=0, atol=1e-11 * np.abs(b).max()
    )


@given(splines())
def test_integrals_agree_with_scipy(drawn):
    spline, b, s = drawn
    got = spline.integral_row(s[0], s[1]) @ b
    expected = float(reference(spline, b).integrate(s[0], s[1]))
    scale = np.abs(b).max() * (spline.stop - spline.start)
    assert got == pytest.approx(expected, rel=0, abs=1e-11 * scale)


@given(splines())
def test_integrals_add_up_and_turn_their_sign(drawn):
    spline, _, s = drawn
    first, middle, last = s[:3]
    whole = spline.integral_row(first, last)
    scale = spline.stop - spline.start
    parts = spline.integral_row(first, middle) + spline.integral_row(middle, last)
    np.testing.assert_allclose(parts, whole, rtol=0, atol=1e-13 * scale)
    np.testing.assert_array_equal(spline.integral_row(last, first), -whole)
    assert not spline.integral_row(first, first).any()


@given(starts, st.floats(min_value=1e-3, max_value=10), st.floats(min_value=1e-3, max_value=3))
def test_covering_covers_with_the_spacing_asked_for(low, width, share):
    spacing = share * width
    spline = UniformSpline.covering(low, low + width, spacing)
    rounding = 1e-10 * (abs(low) + width)
    assert spline.spacing == spacing
    assert spline.start <= low + rounding
    assert spline.stop >= low + width - rounding
    assert spline.stop - spline.start < width + spacing + rounding
    assert spline.start + spline.stop == pytest.approx(2 * low + width, abs=rounding)


@pytest.mark.parametrize("derivative", [1, 2, 3])
def test_derivatives_agree_with_scipy(derivative):
    s = INSIDE[1:]  # the third derivative jumps at the knots
    got = SPLINE.field_rows(s, derivative) @ COEFFICIENTS
    expected = reference().derivative(derivative)(s)
    np.testing.assert_allclose(got, expected, rtol=0, atol=1e-11 * np.abs(expected).max())


def test_running_integral_starts_at_the_left_end_of_the_first_function():
    left = SPLINE.start - DEGREE * SPLINE.spacing
    antiderivative = reference().antiderivative()
    expected = antiderivative(INSIDE) - antiderivative(left)
    got = SPLINE.running_rows(INSIDE) @ COEFFICIENTS
    np.testing.assert_allclose(got, expected, rtol=0, atol=1e-14)


def test_running_integral_of_ones_is_the_length():
    ones = np.ones(SPLINE.size)
    got = (SPLINE.running_rows(INSIDE) - SPLINE.running_rows(INSIDE[:1])) @ ones
    np.testing.assert_allclose(got, INSIDE - INSIDE[0], rtol=0, atol=1e-15)


def test_from_running_is_a_running_sum_of_the_columns_to_the_right():
    rows = np.array([[1.0, 2.0, 3.0, 4.0]])
    got = UniformSpline(0.0, 0.5, 3).from_running(rows)
    np.testing.assert_array_equal(got, [[0.5 * 9, 0.5 * 7, 0.5 * 4]])


def test_rows_have_their_few_entries_where_the_position_is():
    rows = SPLINE.field_rows(np.array([SPLINE.start + 5.4 * SPLINE.spacing]))[0]
    assert np.flatnonzero(rows).tolist() == [5, 6, 7, 8]
    assert rows.sum() == pytest.approx(1.0, abs=1e-15)


def test_ends_of_the_domain_belong_to_the_outermost_pieces():
    piece, x = SPLINE.locate(np.array([SPLINE.start, SPLINE.stop]))
    assert piece.tolist() == [0, SPLINE.size - DEGREE - 1]
    np.testing.assert_allclose(x, [0.0, 1.0], atol=1e-12)


def test_roughness_is_the_third_derivative_of_b():
    got = SPLINE.roughness() @ COEFFICIENTS
    middles = SPLINE.start + SPLINE.spacing * (np.arange(SPLINE.size - DEGREE) + 0.5)
    expected = reference().derivative(3)(middles) * SPLINE.spacing**3
    np.testing.assert_allclose(got, expected, rtol=0, atol=1e-12)
    np.testing.assert_allclose(got, np.diff(COEFFICIENTS, 3), rtol=0, atol=1e-14)


def test_roughness_lets_parabolas_pass():
    places = np.arange(SPLINE.size, dtype=float)
    assert not (SPLINE.roughness() @ (2 - places + 3 * places**2)).any()


@pytest.mark.parametrize("derivative", [0, 1, 2])
def test_parts_of_rows_are_all_of_them_that_is_not_zero(derivative):
    columns, values = SPLINE.field_parts(INSIDE, derivative)
    rows = SPLINE.field_rows(INSIDE, derivative)
    assert columns.shape == values.shape == (len(INSIDE), DEGREE + 1)
    np.testing.assert_array_equal(np.take_along_axis(rows, columns, axis=1), values)
    np.testing.assert_allclose(rows.sum(axis=1), values.sum(axis=1), atol=1e-9)
