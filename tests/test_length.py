"""Integrated field, central field, length and boundaries from hand-made lines."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import TanhMagnet
from fieldmap.errors import RefusedError
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline
from fieldmap.magnet.length import length_results
from fieldmap.readings import Axis

SPLINE = UniformSpline.covering(-0.3, 0.3, 0.005)
AXIS = Axis("z", (-0.25, 0.28), (-0.03, 0.05))
RNG = np.random.default_rng(3)


def line_of(field, covariance=None):
    """A line whose spline passes through a function of position."""
    middles = SPLINE.start + (np.arange(SPLINE.size) - 1) * SPLINE.spacing
    s = np.linspace(SPLINE.start, SPLINE.stop, 4 * SPLINE.size)
    b = np.linalg.lstsq(SPLINE.field_rows(s), field(s), rcond=None)[0]
    if covariance is None:
        covariance = 1e-12 * np.exp(-np.abs(np.subtract.outer(middles, middles)) / 0.02)
    return FieldLine(0.0, 0.0, -0.3, 0.3, SPLINE, b, covariance)


def block(s):
    """1 T between -0.1 and 0.15 m with linear flanks of 20 mm, so that all is known by hand."""
    return np.interp(s, [-0.11, -0.09, 0.14, 0.16], [0, 1, 1, 0])


def test_a_block_of_field_by_hand():
    found = length_results(line_of(block), AXIS)
    expected = {
        "integrated_field": (0.25, "T m"),
        "central_field": (1.0, "T"),
        "magnetic_length": (0.25, "m"),
        "boundary_in": (-0.1, "m"),
        "boundary_out": (0.15, "m"),
        "magnetic_centre": (0.025, "m"),
    }
    assert list(found) == list(expected)
    for key, (value, unit) in expected.items():
        assert found[key].value == pytest.approx(value, abs=3e-5), key
        assert found[key].unit == unit


def test_a_magnet_in_closed_form():
    magnet = TanhMagnet(0.5, 0.3, 0.02)
    found = length_results(line_of(magnet.field), AXIS)
    total = magnet.between(*AXIS.integrate)
    level = magnet.between(*AXIS.flat) / 0.08
    assert found["integrated_field"].value == pytest.approx(total, rel=1e-6)
    assert found["central_field"].value == pytest.approx(level, rel=1e-6)
    assert found["magnetic_length"].value == pytest.approx(total / level, rel=1e-6)
    middle = 0.01
    inwards = magnet.between(-0.25, middle) / level
    assert found["boundary_in"].value == pytest.approx(middle - inwards, abs=1e-7)


def test_the_pieces_fit_together():
    found = length_results(line_of(block), AXIS)
    width = found["boundary_out"].value - found["boundary_in"].value
    assert width == pytest.approx(found["magnetic_length"].value, rel=1e-12)
    centre = (found["boundary_out"].value + found["boundary_in"].value) / 2
    assert centre == pytest.approx(found["magnetic_centre"].value, rel=1e-12)


def test_uncertainties_are_those_of_drawn_profiles():
    root = RNG.normal(size=(SPLINE.size, SPLINE.size)) * 2e-5
    line = line_of(block, root @ root.T)
    found = length_results(line, AXIS)
    drawn = [
        length_results(replace(line, b=line.b + root @ RNG.normal(size=SPLINE.size)), AXIS)
        for _ in range(2000)
    ]
    for key, one in found.items():
        spread = np.std([results[key].value for results in drawn])
        assert one.u == pytest.approx(spread, rel=0.07), key


def test_a_common_gain_cancels_in_lengths_and_a_stretch_does_not():
    b = line_of(block).b
    gain = line_of(block, 1e-6 * np.outer(b, b))
    found = length_results(gain, AXIS)
    assert found["integrated_field"].u == pytest.approx(1e-3 * 0.25, rel=1e-4)
    for key in ("magnetic_length", "boundary_in", "boundary_out", "magnetic_centre"):
        assert found[key].u < 1e-9, key

    # the profile stretched by 1e-3 about zero: db = -1e-3 s dB/ds
    middles = SPLINE.start + (np.arange(SPLINE.size) - 1) * SPLINE.spacing
    stretch = 1e-3 * middles * np.gradient(b, SPLINE.spacing)
    found = length_results(line_of(block, np.outer(stretch, stretch)), AXIS)
    assert found["magnetic_length"].u == pytest.approx(1e-3 * 0.25, rel=0.01)
    assert found["boundary_in"].u == pytest.approx(1e-3 * 0.1, rel=0.02)
    assert found["boundary_out"].u == pytest.approx(1e-3 * 0.15, rel=0.02)


def test_no_length_without_a_central_field():
    quiet = line_of(lambda s: 0 * s + 1e-6, 1e-10 * np.eye(SPLINE.size))
    assert list(length_results(quiet, AXIS)) == ["integrated_field", "central_field"]


def test_a_negative_field_has_a_positive_length():
    found = length_results(line_of(lambda s: -block(s)), AXIS)
    assert found["magnetic_length"].value == pytest.approx(0.25, abs=3e-5)
    assert found["integrated_field"].value == pytest.approx(-0.25, abs=3e-5)
    assert found["boundary_in"].value == pytest.approx(-0.1, abs=3e-5)


@pytest.mark.parametrize(
    ("axis", "where"),
    [
        (Axis("z", (-0.31, 0.2), (-0.03, 0.05)), "[axis] integrate"),
        (Axis("z", (-0.2, 0.31), (-0.03, 0.05)), "[axis] integrate"),
        (Axis("z", (-0.2, 0.2), (-0.4, 0.05)), "[axis] flat"),
    ],
)
def test_refuses_windows_outside_the_map(axis, where):
    with pytest.raises(RefusedError, match="-300 to 300 mm") as caught:
        length_results(line_of(block), axis)
    assert (caught.value.code, caught.value.where) == ("limits-outside-map", where)


def test_limits_at_the_very_ends_are_inside():
    found = length_results(line_of(block), Axis("z", (-0.3, 0.3), (-0.03, 0.05)))
    assert found["integrated_field"].value == pytest.approx(0.25, abs=3e-5)
