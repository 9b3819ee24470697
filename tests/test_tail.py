"""Tails of lines fitted to known fields: exact parts, modelled parts, one total."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import EngeMagnet, Loop, Plates, Solenoid, TanhMagnet, Uniform
from fieldmap.magnet.functional import covariance
from fieldmap.magnet.length import length_results
from fieldmap.magnet.tails.tail import HIDDEN, LAW, map_end, tail_results
from fieldmap.readings import Axis
from tests.profiles import line_through, smooth_noise

SOLENOID = Solenoid(0.1, 0.4, turns=500, current=10.0)
FLAT = (-0.02, 0.02)


def solenoid_line(reach=1.0, covariance=None, source=SOLENOID):
    return line_through(source.field, -reach, reach, 0.01, covariance)


def tails(line, axis, gap=0.2):
    return tail_results(line, axis, gap, length_results(line, axis))


def test_what_is_mapped_beyond_a_limit_is_measured():
    # limits within the flat field: nearly all is beyond them, and exactly known
    axis = Axis("z", (-0.1, 0.3), FLAT)
    found = tails(solenoid_line(), axis)
    whole = tails(solenoid_line(), replace(axis, integrate=(-1.0, 1.0)))
    before, after = SOLENOID.between(-1.0, -0.1), SOLENOID.between(0.3, 1.0)
    assert found["tail_in"].value == pytest.approx(before + whole["tail_in"].value, rel=1e-7)
    assert found["tail_out"].value == pytest.approx(after + whole["tail_out"].value, rel=1e-7)
    total, same = (one["integrated_field_total"] for one in (found, whole))
    assert total.value == pytest.approx(same.value, rel=1e-10)
    assert total.u == pytest.approx(same.u, rel=1e-10)
    assert total.value == pytest.approx(SOLENOID.total, rel=3e-5)


def test_the_measured_part_keeps_its_correlation():
    line = solenoid_line()
    root = smooth_noise(line.spline.size, 1e-5)
    line = replace(line, covariance=root @ root.T)
    short = tails(line, Axis("z", (-0.3, 0.3), FLAT))
    long = tails(line, Axis("z", (-0.9, 0.9), FLAT))
    for key in ("value", "u"):
        one, other = (getattr(found["integrated_field_total"], key) for found in (short, long))
        assert one == pytest.approx(other, rel=1e-9)


def test_the_total_is_the_sum_with_its_correlations():
    line = solenoid_line()
    root = smooth_noise(line.spline.size, 1e-6)
    line = replace(line, covariance=root @ root.T)
    axis = Axis("z", (-0.9, 0.9), FLAT)
    length = length_results(line, axis)
    found = tail_results(line, axis, 0.2, length)
    parts = {"integrated_field": length["integrated_field"], **found}
    matrix = covariance(line, parts)
    assert found["integrated_field_total"].value == pytest.approx(
        sum(one.value for key, one in parts.items() if not key.endswith("total")), rel=1e-12
    )
    ones = np.array([1.0, 1.0, 1.0, -1.0])
    assert ones @ matrix @ ones == pytest.approx(0.0, abs=1e-6 * matrix[3, 3])


def test_one_wrong_law_is_one_error_at_both_ends():
    found = tails(solenoid_line(), Axis("z", (-1.0, 1.0), FLAT))
    law = [found[key].besides[LAW] for key in ("tail_in", "tail_out", "integrated_field_total")]
    assert law[0] + law[1] == pytest.approx(law[2], rel=1e-12)
    assert min(law) > 0
    turned = tails(solenoid_line(source=-SOLENOID), Axis("z", (-1.0, 1.0), FLAT))
    assert turned["tail_in"].besides[LAW] == pytest.approx(-law[0], rel=1e-6)
    assert turned["tail_in"].value == pytest.approx(-found["tail_in"].value, rel=1e-6)


def test_a_mirrored_magnet_has_its_tails_exchanged():
    source = SOLENOID + 0.3 * Loop(0.06, 3000.0).shifted(0.15)
    mirrored = SOLENOID + 0.3 * Loop(0.06, 3000.0).shifted(-0.15)
    one = tails(solenoid_line(source=source), Axis("z", (-0.9, 0.8), FLAT))
    other = tails(solenoid_line(source=mirrored), Axis("z", (-0.8, 0.9), FLAT))
    assert one["tail_in"].value == pytest.approx(other["tail_out"].value, rel=1e-6)
    assert one["tail_out"].u == pytest.approx(other["tail_in"].u, rel=1e-6)
    assert one["tail_in"].value != pytest.approx(one["tail_out"].value, rel=1e-2)


def test_a_shift_along_the_travel_changes_nothing():
    one = tails(solenoid_line(), Axis("z", (-0.9, 0.8), FLAT))
    far = line_through(lambda s: SOLENOID.field(s - 7.0), 6.0, 8.0, 0.01)
    other = tails(far, Axis("z", (6.1, 7.8), (6.98, 7.02)))
    for key, result in one.items():
        assert other[key].value == pytest.approx(result.value, rel=1e-6), key
        assert other[key].u == pytest.approx(result.u, rel=1e-6), key


def test_limits_half_a_knot_beyond_the_map():
    line = solenoid_line()
    found = tails(line, Axis("z", (-1.004, 1.004), FLAT))
    end = map_end(line, Axis("z", (-1.004, 1.0), FLAT), 0.2, "in")
    assert (end.position, end.direction) == (-1.004, -1.0)
    true = SOLENOID.total / 2 - SOLENOID.between(0.0, 1.004)
    assert found["tail_out"].value == pytest.approx(true, rel=5e-3)


def test_uncertainty_is_that_of_drawn_profiles():
    line = solenoid_line()
    root = smooth_noise(line.spline.size, 3e-7)
    line = replace(line, covariance=root @ root.T)
    axis = Axis("z", (-0.9, 0.9), FLAT)
    found = tails(line, axis)
    rng = np.random.default_rng(4)
    drawn = [
        tails(replace(line, b=line.b + root @ rng.normal(size=line.spline.size)), axis)
        for _ in range(400)
    ]
    for key, one in found.items():
        spread = np.std([results[key].value for results in drawn])
        assert line.u(one.gradient) == pytest.approx(spread, rel=0.12), key


@pytest.mark.parametrize(
    "source",
    [
        TanhMagnet(0.5, 0.3, 0.02),
        EngeMagnet(0.5, 0.3, 0.03, (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111)),
    ],
)
def test_a_field_below_the_noise_has_a_small_tail_and_an_honest_uncertainty(source):
    line = line_through(source.field, -0.4, 0.4, 0.005)
    rng = np.random.default_rng(1)
    root = smooth_noise(line.spline.size, 1e-5)
    errors = []
    for _ in range(100):
        noisy = replace(
            line, b=line.b + root @ rng.normal(size=line.spline.size), covariance=root @ root.T
        )
        found = tails(noisy, Axis("z", (-0.4, 0.4), FLAT), gap=0.03)
        if "tail_out" in found:
            errors.append(found["tail_out"].value / found["tail_out"].u)
            assert found["tail_out"].u < 1e-4 * source.total
    assert len(errors) > 95
    assert 0.5 < np.sqrt(np.mean(np.square(errors))) < 1.2


def test_noise_hides_a_far_field():
    # the exponential alone would be too sure of itself
    line = line_through(TanhMagnet(0.5, 0.3, 0.05).field, -0.3, 0.3, 0.005)
    loud = replace(line, covariance=1e-10 * np.eye(line.spline.size))
    axis = Axis("z", (-0.3, 0.3), FLAT)
    quiet, found = (tails(one, axis, gap=0.03)["tail_out"] for one in (line, loud))
    assert quiet.besides[HIDDEN] < 1e-12
    assert found.besides[HIDDEN] > 1e-7
    assert found.value == pytest.approx(quiet.value, rel=1e-2)


def test_slow_fields_have_neither_tail_nor_total():
    edges = Plates(0.5, 0.03).shifted(0.2)  # and the map ends within the magnet upstream
    line = line_through(edges.field, -0.4, 0.5, 0.005)
    assert tails(line, Axis("z", (-0.4, 0.5), FLAT), gap=0.03) == {}
    background = TanhMagnet(0.5, 0.3, 0.02) + Uniform(50e-6)
    line = line_through(background.field, -0.4, 0.4, 0.005)
    assert tails(line, Axis("z", (-0.4, 0.4), FLAT), gap=0.03) == {}


def test_no_tails_without_a_central_field():
    line = line_through(lambda s: 0 * s + 1e-6, -0.3, 0.3, 0.01, 1e-8 * np.eye(63))
    assert tails(line, Axis("z", (-0.3, 0.3), FLAT)) == {}


def test_given_tails_stand_for_the_model():
    axis = Axis("z", (-0.9, 0.9), FLAT, tail_in=2e-5, u_tail_in=1e-6)
    line, modelled = solenoid_line(), Axis("z", (-0.9, 0.9), FLAT)
    found, without = tails(line, axis), tails(line, modelled)
    assert (found["tail_in"].value, found["tail_in"].u) == (2e-5, 1e-6)
    assert found["tail_in"].besides == {"tail in as given": 1e-6}
    assert found["tail_out"].value == without["tail_out"].value
    integral = length_results(line, axis)["integrated_field"]
    total = integral.value + 2e-5 + found["tail_out"].value
    assert found["integrated_field_total"].value == pytest.approx(total, rel=1e-12)


def test_given_tails_make_a_total_where_the_field_falls_too_slowly():
    edges = Plates(0.5, 0.03).shifted(0.2)
    line = line_through(edges.field, -0.4, 0.5, 0.005)
    limits = {"integrate": (-0.4, 0.5), "flat": FLAT}
    one = tails(line, Axis("z", **limits, tail_out=1e-3, u_tail_out=1e-4), gap=0.03)
    assert list(one) == ["tail_out"]
    both = Axis("z", **limits, tail_in=0.0, u_tail_in=0.0, tail_out=1e-3, u_tail_out=1e-4)
    found = tails(line, both, gap=0.03)
    assert list(found) == ["tail_in", "tail_out", "integrated_field_total"]
    assert found["integrated_field_total"].u == pytest.approx(1e-4, rel=1e-9)


def test_a_tail_that_is_given_does_not_hold_for_another_limit():
    axis = Axis("z", (-0.4, 0.5), FLAT, tail_in=1e-3, u_tail_in=1e-4, tail_out=2e-3, u_tail_out=0.0)
    moved = axis.moved(integrate=(-0.3, 0.5))
    assert (moved.tail_in, moved.u_tail_in) == (None, None)
    assert (moved.tail_out, moved.u_tail_out) == (2e-3, 0.0)
    assert axis.moved(flat=(0.0, 0.01)) == replace(axis, flat=(0.0, 0.01))
