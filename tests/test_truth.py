"""True results against closed forms worked out by hand."""

from __future__ import annotations

import json
import math

import pytest
from scipy.constants import mu_0

from fieldmap.bench.sources import Solenoid, TanhMagnet, Uniform
from fieldmap.bench.truth import true_results, truth_text
from fieldmap.readings import Axis


def test_solenoid_by_its_formula():
    solenoid = Solenoid(radius=0.1, length=0.4, turns=500, current=10.0)
    results = true_results(solenoid, Axis("z", (-1.0, 1.0), (-0.05, 0.05)))

    def partial(z):  # integral from -z to z
        ends = math.hypot(0.1, z + 0.2) - math.hypot(0.1, z - 0.2)
        return mu_0 * 500 * 10.0 / 0.4 * ends

    assert results["integrated_field"] == pytest.approx(partial(1.0), rel=1e-12)
    assert results["central_field"] == pytest.approx(partial(0.05) / 0.1, rel=1e-12)
    assert results["magnetic_length"] == pytest.approx(
        partial(1.0) / (partial(0.05) / 0.1), rel=1e-12
    )
    assert results["magnetic_centre"] == pytest.approx(0.0, abs=1e-15)
    peak = mu_0 * 500 * 10.0 / math.hypot(0.4, 0.2)
    assert results["peak_field"] == pytest.approx(peak, rel=1e-12)


def test_boundaries_follow_a_shift_and_an_uneven_window():
    magnet = TanhMagnet(-0.5, 0.4, 0.004).shifted(0.03)
    results = true_results(magnet, Axis("z", (-0.5, 0.5), (-0.05, 0.15)))
    assert results["boundary_in"] == pytest.approx(-0.17, abs=1e-12)
    assert results["boundary_out"] == pytest.approx(0.23, abs=1e-12)
    assert results["magnetic_centre"] == pytest.approx(0.03, abs=1e-12)
    assert results["peak_field"] == pytest.approx(-0.5, rel=1e-12)
    assert results["integrated_field"] == pytest.approx(-0.2, rel=1e-12)


def test_tails_and_total_by_the_formula():
    solenoid = Solenoid(radius=0.1, length=0.4, turns=500, current=10.0).shifted(0.1)
    results = true_results(solenoid, Axis("z", (-0.9, 0.6), (0.05, 0.15)))
    total = mu_0 * 500 * 10.0

    def tail(z):  # beyond z from the middle
        return total / 2 - total / 0.8 * (math.hypot(0.1, z + 0.2) - math.hypot(0.1, z - 0.2))

    assert results["tail_in"] == pytest.approx(tail(1.0), rel=1e-9)
    assert results["tail_out"] == pytest.approx(tail(0.5), rel=1e-9)
    assert results["integrated_field_total"] == pytest.approx(total, rel=1e-12)


def test_no_tails_where_the_integral_diverges():
    results = true_results(Uniform(0.3), Axis("z", (-1.0, 1.0), (-0.1, 0.1)), gap=0.03)
    assert not {"tail_in", "tail_out", "integrated_field_total"} & set(results)


def test_fringe_integrals_by_the_formula():
    # tanh: lam/2g
    magnet = TanhMagnet(0.5, 0.4, 0.02).shifted(0.03)
    results = true_results(magnet, Axis("z", (-0.5, 0.5), (-0.02, 0.08)), gap=0.04)
    # the mean over the window is 3e-6 below the field of an endless magnet
    assert results["fringe_integral_in"] == pytest.approx(0.25, rel=1e-4)
    assert results["fringe_integral_out"] == pytest.approx(0.25, rel=1e-4)
    assert "fringe_integral_in" not in true_results(magnet, Axis("z", (-0.5, 0.5), (-0.02, 0.08)))


def test_a_sharp_peak_off_the_grid_is_found():
    sharp = TanhMagnet(1.0, 0.001, 0.001).shifted(0.12345)
    results = true_results(sharp, Axis("z", (-1.0, 1.0), (0.0, 0.2)))
    assert results["peak_field"] == pytest.approx(math.tanh(0.5), rel=1e-9)


def test_text_holds_values_units_and_purpose():
    axis = Axis("z", (-1.0, 1.0), (-0.1, 0.1))
    content = json.loads(truth_text(Uniform(1 / 3), axis, "a trial"))
    assert content["format"] == "fieldmap-truth/1"
    assert content["about"] == "a trial"
    assert content["results"]["central_field"] == {"value": 0.333333333333, "unit": "T"}
    assert content["results"]["magnetic_length"]["unit"] == "m"
    assert set(content["results"]) == {
        "integrated_field",
        "central_field",
        "magnetic_length",
        "boundary_in",
        "boundary_out",
        "magnetic_centre",
        "peak_field",
    }
