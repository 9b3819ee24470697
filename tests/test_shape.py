"""Peak and homogeneity: extremes by hand, their spread by draws of our own."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline
from fieldmap.magnet.shape import _summits, shape_results
from fieldmap.readings import Axis

SPLINE = UniformSpline.covering(-0.3, 0.3, 0.01)
AXIS = Axis("z", (-0.25, 0.25), (-0.05, 0.05))
MIDDLES = SPLINE.start + (np.arange(SPLINE.size) - 1) * SPLINE.spacing


def line_of(field, covariance):
    s = np.linspace(SPLINE.start, SPLINE.stop, 4 * SPLINE.size)
    b = np.linalg.lstsq(SPLINE.field_rows(s), field(s), rcond=None)[0]
    return FieldLine(0.0, 0.0, -0.3, 0.3, SPLINE, b, covariance)


def parabola(s):
    return 1.2 - 5.0 * (s - 0.0123) ** 2


TINY = 1e-16 * np.eye(SPLINE.size)


def test_summit_of_a_parabola():
    found = shape_results(line_of(parabola, TINY), AXIS)
    assert found["peak_field"].value == pytest.approx(1.2, abs=1e-9)
    assert found["peak_position"].value == pytest.approx(0.0123, abs=1e-6)
    assert (found["peak_field"].unit, found["peak_position"].unit) == ("T", "m")


def test_the_largest_field_may_be_negative():
    found = shape_results(line_of(lambda s: -parabola(s), TINY), AXIS)
    assert found["peak_field"].value == pytest.approx(-1.2, abs=1e-9)
    assert found["peak_position"].value == pytest.approx(0.0123, abs=1e-6)


def test_a_peak_at_the_end_of_the_limits():
    found = shape_results(line_of(lambda s: 1.0 + s, TINY), AXIS)
    assert found["peak_position"].value == pytest.approx(0.25, abs=1e-12)
    assert found["peak_field"].value == pytest.approx(1.25, abs=1e-9)


def test_homogeneity_by_hand():
    found = shape_results(line_of(lambda s: 2.0 + s, TINY), AXIS)
    # (max - min) / (2 B0) over ±50 mm: 0.1 / 4
    assert found["homogeneity"].value == pytest.approx(0.025, rel=1e-9)
    assert found["homogeneity"].unit == "1"
    turned = shape_results(line_of(lambda s: -2.0 - s, TINY), AXIS)
    assert turned["homogeneity"].value == pytest.approx(0.025, rel=1e-9)


def test_spreads_are_those_of_other_draws():
    covariance = (1e-4) ** 2 * np.exp(-np.abs(np.subtract.outer(MIDDLES, MIDDLES)) / 0.05)
    line = line_of(parabola, covariance)
    found = shape_results(line, AXIS)
    rng = np.random.default_rng(99)
    draws = rng.multivariate_normal(line.b, covariance, 2000)
    s = np.linspace(-0.25, 0.25, 2001)
    profiles = draws @ SPLINE.field_rows(s).T
    top = profiles.max(axis=1)
    assert found["peak_field"].u == pytest.approx(np.sqrt(np.mean((top - 1.2) ** 2)), rel=0.15)
    flat = profiles[:, np.abs(s) <= 0.05 + 1e-9]
    ratio = np.ptp(flat, axis=1) / (2 * flat.mean(axis=1))
    value = found["homogeneity"].value
    assert found["homogeneity"].u == pytest.approx(np.sqrt(np.mean((ratio - value) ** 2)), rel=0.15)


def test_the_place_of_a_peak_on_a_flat_top_is_unknown():
    covariance = (1e-5) ** 2 * np.eye(SPLINE.size)
    found = shape_results(line_of(lambda s: 1.0 + 0 * s, covariance), AXIS)
    assert found["peak_position"].u > 0.1
    assert found["peak_field"].u < 5e-5


def test_the_same_map_gives_the_same_digits():
    line = line_of(parabola, 1e-8 * np.eye(SPLINE.size))
    np.random.default_rng(1)  # draws elsewhere change nothing
    assert shape_results(line, AXIS) == shape_results(line, AXIS)


def test_a_covariance_of_low_rank_is_no_trouble():
    common = 1e-6 * np.ones((SPLINE.size, SPLINE.size))
    found = shape_results(line_of(parabola, common), AXIS)
    assert found["peak_field"].u == pytest.approx(1e-3, rel=0.15)
    assert found["peak_position"].u < 1e-6


def by_hand(s, b):
    """Place and height of one summit, point by point."""
    i = int(np.argmax(np.abs(b)))
    if not 0 < i < len(s) - 1 or not np.isclose(s[i + 1] - s[i], s[i] - s[i - 1]):
        return s[i], b[i]
    bend = b[i - 1] - 2 * b[i] + b[i + 1]
    if bend == 0:
        return s[i], b[i]
    shift = np.clip(0.5 * (b[i - 1] - b[i + 1]) / bend, -0.5, 0.5)
    return s[i] + shift * (s[i + 1] - s[i]), b[i] - 0.25 * (b[i - 1] - b[i + 1]) * shift


@pytest.mark.parametrize("count", [1, 2, 3, 9])
def test_summits_of_many_profiles_are_those_of_each(count):
    rng = np.random.default_rng(5)
    s = np.linspace(0.0, 1.0, count)
    if count > 5:
        s = np.delete(s, 3)  # an uneven step
    profiles = np.vstack([rng.normal(size=(60, len(s))), np.ones((1, len(s)))])
    places, heights = _summits(s, profiles)
    expected = np.array([by_hand(s, one) for one in profiles])
    np.testing.assert_allclose(places, expected[:, 0], rtol=1e-12)
    np.testing.assert_allclose(heights, expected[:, 1], rtol=1e-12)


def test_a_moved_limit_changes_no_uncertainty_that_it_does_not_bear_on():
    covariance = (1e-4) ** 2 * np.exp(-np.abs(np.subtract.outer(MIDDLES, MIDDLES)) / 0.05)
    line = line_of(parabola, covariance)
    u = [
        shape_results(line, AXIS.moved(integrate=(low, 0.25)))["peak_field"].u
        for low in (-0.25, -0.245, -0.24)
    ]
    np.testing.assert_allclose(u, u[0], rtol=1e-3)
