"""The field along one line: values, derivatives, integrals and their uncertainties."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline

SPLINE = UniformSpline.covering(-0.1, 0.1, 0.02)
RNG = np.random.default_rng(7)
ROOT = RNG.normal(size=(SPLINE.size, SPLINE.size)) * 1e-3
LINE = FieldLine(0.0, 0.0, -0.1, 0.1, SPLINE, RNG.normal(size=SPLINE.size), ROOT @ ROOT.T)
S = np.linspace(-0.1, 0.1, 9)


def test_field_and_its_derivative():
    np.testing.assert_allclose(LINE.field(S), SPLINE.field_rows(S) @ LINE.b, rtol=1e-14)
    h = 1e-6
    inner = S[1:-1] + 0.001
    numeric = (LINE.field(inner + h) - LINE.field(inner - h)) / (2 * h)
    np.testing.assert_allclose(LINE.field(inner, 1), numeric, rtol=1e-6)


def test_uncertainties_are_those_of_drawn_profiles():
    draws = ROOT @ RNG.normal(size=(SPLINE.size, 20_000))
    spread = (SPLINE.field_rows(S) @ draws).std(axis=1)
    np.testing.assert_allclose(LINE.u_field(S), spread, rtol=0.03)
    _, u = LINE.integral(-0.05, 0.08)
    assert u == pytest.approx((SPLINE.integral_row(-0.05, 0.08) @ draws).std(), rel=0.03)


def test_integral_is_that_of_the_field():
    fine = np.linspace(-0.05, 0.08, 20_001)
    value, _ = LINE.integral(-0.05, 0.08)
    assert value == pytest.approx(np.trapezoid(LINE.field(fine), fine), abs=1e-9)
    assert LINE.integral(0.08, -0.05)[0] == -value


def test_what_is_common_to_all_coefficients_is_no_noise_of_the_shape():
    common = FieldLine(0.0, 0.0, -0.1, 0.1, SPLINE, np.ones(13), 1e-6 * np.ones((13, 13)))
    np.testing.assert_allclose(common.u_field(S), 1e-3, rtol=1e-12)
    difference = SPLINE.field_rows(np.array([0.05]))[0] - SPLINE.field_rows(np.array([0.0]))[0]
    assert common.u(difference) == pytest.approx(0.0, abs=1e-9)


def test_covers_up_to_half_a_knot():
    assert LINE.covers(-0.1, 0.1)
    assert LINE.covers(-0.109, 0.109)
    assert not LINE.covers(-0.111, 0.1)
    assert not LINE.covers(-0.1, 0.111)


def test_draws_spread_like_the_covariance():
    """400 draws: a variance is known to a relative 1/sqrt(200), 7 %."""
    drawn = LINE.draws
    assert drawn.shape == (400, SPLINE.size)
    assert LINE.draws is drawn  # drawn once
    rows = SPLINE.field_rows(S)
    np.testing.assert_allclose((rows @ drawn.T).std(axis=1), LINE.u_field(S), rtol=0.2)
    again = FieldLine(0.0, 0.0, -0.1, 0.1, SPLINE, LINE.b, LINE.covariance.copy())
    np.testing.assert_array_equal(again.draws, drawn)  # the same map, the same digits


def test_draws_of_what_is_known_exactly_are_none():
    sure = FieldLine(0.0, 0.0, -0.1, 0.1, SPLINE, LINE.b, np.zeros_like(LINE.covariance))
    assert not sure.draws.any()


def test_u_of_the_field_is_that_of_whole_rows():
    """The quick sum over the few coefficients that bear on a point leaves none out."""
    s = np.linspace(-0.12, 0.12, 101)  # beyond both ends, too
    expected = [LINE.u(row) for row in SPLINE.field_rows(s)]
    np.testing.assert_allclose(LINE.u_field(s), expected, rtol=1e-12)
