"""Fields beside the axis against closed forms, and what cannot be expanded."""

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import Loop, Solenoid, loop_field
from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline
from fieldmap.magnet.comparison.design_profile import design_profile
from fieldmap.magnet.handover.expansion import FARTHEST, expansion_range, off_axis
from fieldmap.readings import Axis, Magnet

AXIS = Axis("z", (-0.3, 0.3), (-0.05, 0.05))
COIL = Magnet("solenoid", "Bz", gap=0.2)
DIPOLE = Magnet("dipole", "By", gap=0.2)
S = np.linspace(-0.25, 0.25, 101)


def exact_line(field, step=0.002):
    grid = np.arange(-0.4, 0.4 + step / 2, step)
    return design_profile(grid, field(grid)).line


@pytest.mark.parametrize("r", [0.005, 0.02, 0.05])
def test_beside_the_axis_of_a_loop(r):
    loop = Loop(0.1, 1000.0)
    found = off_axis(exact_line(loop.field), COIL, AXIS, S, r)
    radial, axial = loop_field(0.1, 1000.0, r, S)
    top = loop.field(0.0)
    # first terms left out, from the derivatives of (1 + x^2)^(-3/2): at most 45 and 207
    fourth, fifth = (45 / 64 * (r / 0.1) ** 4, 207 / 384 * (r / 0.1) ** 5)
    assert np.abs(found.mapped.value - axial).max() < top * (1.5 * fourth + 2e-6)
    assert np.abs(found.other.value - radial).max() < top * (1.5 * fifth + 2e-5)
    assert (found.mapped.name, found.other.name, found.direction) == ("Bz", "Br", "r")


def test_the_next_term_tells_what_is_left_out():
    loop = Loop(0.1, 1000.0)
    found = off_axis(exact_line(loop.field), COIL, AXIS, S, 0.03)
    radial, axial = loop_field(0.1, 1000.0, 0.03, S)
    for one, true in ((found.mapped, axial), (found.other, radial)):
        worst = np.abs(one.value - true).max()
        assert 0.5 * worst < one.next_term.max() < 2 * worst


def test_it_is_better_than_the_field_on_the_axis():
    solenoid = Solenoid(0.1, 0.2, 500, 10.0)
    found = off_axis(exact_line(solenoid.field), COIL, AXIS, S, 0.02)
    places = (np.arange(400) + 0.5) / 400 * 0.2 - 0.1  # the sheet as many loops
    radial, axial = loop_field(0.1, 5000.0 / 400, 0.02, S[:, None] - places)
    radial, axial = radial.sum(axis=1), axial.sum(axis=1)
    assert np.abs(found.mapped.value - axial).max() < 0.05 * np.abs(solenoid.field(S) - axial).max()
    assert np.abs(found.other.value - radial).max() < 0.01 * np.abs(radial).max()


@pytest.mark.parametrize("y", [0.004, -0.01, 0.03])
def test_beside_the_median_plane(y):
    # any analytic f continues to a plane field B_y + i B_z = f(z + i y)
    a = 0.12

    def continued(z):
        return 0.5 / (1 + (z / a) ** 2) ** 2

    found = off_axis(exact_line(continued), DIPOLE, AXIS, S, y)
    true = continued(S + 1j * y)
    assert np.abs(found.mapped.value - true.real).max() < 3 * abs(y / a) ** 4 + 1e-6
    assert np.abs(found.other.value - true.imag).max() < 3 * abs(y / a) ** 5 + 1e-5
    assert (found.mapped.name, found.other.name, found.direction) == ("By", "Bz", "y")
    ahead = off_axis(exact_line(continued), DIPOLE, AXIS, S, -y)
    np.testing.assert_allclose(found.other.value, -ahead.other.value, atol=1e-15)


def round_field(line, s, r):
    found = off_axis(line, COIL, AXIS, s, r)
    return found.mapped.value, found.other.value


def test_no_divergence_and_no_curl():
    line, r, d = exact_line(Loop(0.1, 1000.0).field), 0.01, 1e-4
    (z_up, r_up), (z_down, r_down) = (round_field(line, S + e, r) for e in (d, -d))
    (z_out, r_out), (z_in, r_in) = (round_field(line, S, r + e) for e in (d, -d))
    along = (z_up - z_down) / (2 * d)
    divergence = ((r + d) * r_out - (r - d) * r_in) / (2 * d * r) + along
    curl = (r_up - r_down) / (2 * d) - (z_out - z_in) / (2 * d)
    assert np.abs(divergence).max() < 2e-3 * np.abs(along).max()
    assert np.abs(curl).max() < 2e-2 * np.abs(z_out - z_in).max() / (2 * d)


def test_uncertainty_goes_through_the_rows():
    rng = np.random.default_rng(3)
    spline = UniformSpline.covering(-0.4, 0.4, 0.02)
    root = rng.standard_normal((spline.size, 6)) * 1e-5
    line = FieldLine(0, 0, -0.4, 0.4, spline, np.ones(spline.size), root @ root.T)
    found = off_axis(line, COIL, AXIS, S, 0.03)
    drawn = [
        off_axis(replace(line, b=line.b + root @ rng.standard_normal(6)), COIL, AXIS, S, 0.03)
        for _ in range(400)
    ]
    for name in ("mapped", "other"):
        values = np.array([getattr(one, name).value for one in drawn])
        np.testing.assert_allclose(values.std(axis=0), getattr(found, name).u, rtol=0.2)


@pytest.mark.parametrize(
    ("magnet", "travel"),
    [
        (replace(COIL, component="By"), "z"),
        (replace(COIL, component="Bx"), "z"),
        (replace(DIPOLE, component="Bz"), "z"),
        (replace(COIL, kind="quadrupole"), "z"),
        (replace(DIPOLE, kind="other"), "z"),
        (replace(DIPOLE, component="the field"), "z"),
        (replace(DIPOLE, component=""), "z"),
    ],
)
def test_other_magnets_and_components_are_refused(magnet, travel):
    line = exact_line(Loop(0.1, 1000.0).field)
    with pytest.raises(RefusedError) as caught:
        off_axis(line, magnet, replace(AXIS, travel=travel), S, 0.01)
    assert caught.value.code == "expansion-not-known"
    assert str(caught.value).count("\n") == 0


def test_lines_beside_the_axis_are_refused():
    line = exact_line(Loop(0.1, 1000.0).field)
    with pytest.raises(RefusedError, match="5 mm off the axis"):
        off_axis(replace(line, x=0.005), COIL, AXIS, S, 0.01)
    with pytest.raises(RefusedError, match="5 mm off the median plane"):
        off_axis(replace(line, y=-0.005), DIPOLE, AXIS, S, 0.01)
    off_axis(replace(line, x=0.005), DIPOLE, AXIS, S, 0.01)  # still in the plane


def test_distances_beyond_a_quarter_of_the_gap_are_refused():
    line = exact_line(Loop(0.1, 1000.0).field)
    with pytest.raises(RefusedError) as caught:
        off_axis(line, COIL, AXIS, S, 0.0501)
    assert caught.value.code == "expansion-too-far"
    assert pytest.approx(0.05) == FARTHEST * 0.2


@pytest.mark.parametrize("distance", [0.0, -0.01, np.nan, np.inf])
def test_distances_that_are_none(distance):
    with pytest.raises((InputError, RefusedError)):
        off_axis(exact_line(Loop(0.1, 1.0).field), COIL, AXIS, S, distance)


def test_the_ends_are_refused():
    line = exact_line(Loop(0.1, 1000.0).field)
    low, high = expansion_range(line, COIL, AXIS, 0.02)
    assert (low, high) == pytest.approx((-0.37, 0.37))
    off_axis(line, COIL, AXIS, np.array([low, high]), 0.02)
    with pytest.raises(RefusedError) as caught:
        off_axis(line, COIL, AXIS, np.array([low - 1e-4, high]), 0.02)
    assert caught.value.code == "expansion-near-end"
    with pytest.raises(RefusedError) as caught:
        expansion_range(replace(line, low=-0.01, high=0.01), COIL, AXIS, 0.02)
    assert caught.value.code == "expansion-near-end"
