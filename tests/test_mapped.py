"""The field of a map as a source."""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldmap.bench.mapped import MappedField
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline

SPLINE = UniformSpline.covering(-0.21, 0.24, 0.02)


def line_of(b):
    return FieldLine(0, 0, -0.2, 0.23, SPLINE, b, np.zeros((SPLINE.size, SPLINE.size)))


@pytest.fixture(scope="module")
def line():
    return line_of(np.random.default_rng(1).standard_normal(SPLINE.size))


def test_field_and_integral_are_those_of_the_map(line):
    # two ways to the same spline: the map's own rows, and scipy's
    s = np.linspace(SPLINE.start, SPLINE.stop, 301)
    field = MappedField(line)
    np.testing.assert_allclose(field.field(s), line.field(s), atol=1e-13)
    for low, high in ((-0.2, 0.1), (0.0, 0.23)):
        assert field.between(low, high) == pytest.approx(line.integral(low, high)[0], abs=1e-14)


def test_beyond_the_knots_the_end_value_stays(line):
    field = MappedField(line)
    for end, side in ((SPLINE.start, -1.0), (SPLINE.stop, 1.0)):
        value = float(field.field(end))
        assert float(field.field(end + 0.3 * side)) == value
        low, high = sorted((end, end + 0.3 * side))
        assert field.between(low, high) == pytest.approx(0.3 * value, rel=1e-12)


def test_total_is_infinite_unless_the_field_ends_at_zero(line):
    assert math.isinf(MappedField(line).total)
    b = np.zeros(SPLINE.size)
    b[8] = 2.0
    assert MappedField(line_of(b)).total == pytest.approx(2.0 * SPLINE.spacing)
    assert MappedField(line).centre == pytest.approx(0.015)


def test_it_is_a_source_like_any_other(line):
    twice = (2.0 * MappedField(line)).shifted(0.1)
    assert float(twice.field(0.15)) == pytest.approx(2.0 * float(line.field(np.array([0.05]))[0]))
