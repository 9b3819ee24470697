"""What each correction does, against a new solution without it."""

from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.bench.bench_errors import Errors
from fieldmap.estimate.map import map_lines
from fieldmap.magnet.corrections import TOGETHER, corrections
from fieldmap.magnet.functionals import line_functionals
from fieldmap.readings import PointReference
from fieldmap.readings.probe import Integrator

from .shop import AXIS, DIPOLE, MAGNET, MAIN, RECT, STAGE, WIRE, measured, planned, remade

SCANS = (
    *planned((-0.4, 0.1), (0.4, -0.1), rate=20.0),
    *planned((-0.4, 0.4), probe=RECT, rate=20.0),
)
POINT = PointReference(0.0, float(DIPOLE.field(0.0)), 1e-5)
SPACING = 6e-3
TINY = 1e-6  # a prior this much narrower holds a nuisance at its mean
KEYS = ("integrated_field", "central_field", "magnetic_length", "boundary_in")


def stitched(campaign):
    return fieldmap.stitch(campaign, knot_spacing=SPACING)


def results_of(campaign):
    return line_functionals(map_lines(stitched(campaign))[0], AXIS, MAGNET.gap)


@pytest.fixture(scope="module")
def campaign():
    errors = Errors(gain={"coil": 3e-4}, lag=1.5e-3)
    drifting = measured(SCANS, [POINT], errors=errors)
    rates = iter((1.2e-6, -0.8e-6, 0.5e-6))

    def drift(one):
        return replace(one, flux=one.flux + next(rates) * one.time)

    return remade(drifting, drift)


@pytest.fixture(scope="module")
def found(campaign):
    return corrections(stitched(campaign))


def item(found, cause, where=""):
    (one,) = [one for one in found.items if (one.cause, one.where) == (cause, where)]
    return one


def held(campaign, name, value):
    """The campaign with one probe's gain, or all drifts, certain."""
    if name == "drift":
        sure = replace(MAIN, u_drift=TINY * MAIN.u_drift)
        return remade(campaign, lambda one: replace(one, integrator=sure))
    probe = replace(RECT, u_effective_area=TINY * RECT.u_effective_area)
    return remade(campaign, lambda one: replace(one, probe=probe) if one.probe == value else one)


@pytest.mark.parametrize("key", KEYS)
def test_drifts_taken_for_zero(campaign, found, key):
    without = results_of(held(campaign, "drift", None))
    shift = without[key].value - found.results[key].value
    one = item(found, "integrator drift", TOGETHER)
    if key in {"integrated_field", "magnetic_length"}:
        assert abs(shift) > 0.5 * found.results[key].u
    # smoothness and slopes are solved anew, which moves results by a part of u
    assert one.shift[key] == pytest.approx(shift, rel=0.1, abs=0.15 * found.results[key].u)


def test_an_area_taken_as_stated(campaign, found):
    without = results_of(held(campaign, "gain", RECT))
    key = "integrated_field"
    shift = without[key].value - found.results[key].value
    one = item(found, "effective area", "coil")
    assert one.value == pytest.approx(3e-4, abs=4 * one.u_value)
    assert one.shift[key] == pytest.approx(shift, rel=0.1, abs=0.1 * found.results[key].u)


def test_a_drift_by_itself_has_its_value_and_unit(campaign, found):
    one = item(found, "integrator drift", campaign.passes[0].name)
    assert one.unit == "V s/s"
    assert one.value == pytest.approx(1.2e-6, abs=4 * one.u_value)
    assert one.u_value < MAIN.u_drift


def test_what_readings_do_not_tell_is_zero_with_its_uncertainty(found):
    one = item(found, "position scale")
    key = "magnetic_length"
    assert one.shift[key] == pytest.approx(0.0, abs=1e-3 * found.results[key].u)
    # a length of 0.3 m grows by the scale
    assert one.u[key] == pytest.approx(STAGE.u_scale * 0.3, rel=0.02)
    assert one.u_value == pytest.approx(STAGE.u_scale, rel=5e-3)


def test_largest_first(found):
    shifts = [abs(one.shift["integrated_field"]) for one in found.largest_first("integrated_field")]
    assert shifts == sorted(shifts, reverse=True)
    assert len(shifts) == len(found.items)


def test_readings_without_anything_applied_are_not_solved_again(campaign, monkeypatch):
    fmap = stitched(campaign)
    monkeypatch.setattr("fieldmap.magnet.corrections.stitch", lambda *_, **__: 1 / 0)
    causes = {one.cause for one in corrections(fmap, campaign).items}
    assert not any("reading" in cause or "droop" in cause for cause in causes)


def test_current_of_each_reading():
    magnet = replace(MAGNET, current=100.0)
    plain = measured(SCANS[:2], magnet=magnet)

    def low(one):
        return replace(one, flux=0.999 * one.flux, current=np.full(len(one.time), 99.9))

    campaign = remade(plain, low)
    told = []
    found = corrections(stitched(campaign), campaign, tell=told.append)
    one = item(found, "current of each reading")
    share = one.shift["integrated_field"] / found.results["integrated_field"].value
    assert share == pytest.approx(-1e-3, abs=5e-5)
    assert one.shift["magnetic_length"] == pytest.approx(0.0, abs=2e-6)
    assert np.isnan(one.u["integrated_field"])
    assert told == ["solving without the current of each reading"]


def test_temperature_of_each_reading():
    wire = replace(WIRE, temperature_coefficient=17e-6)

    def warm(one):
        return replace(one, probe=wire, temperature=np.full(len(one.time), 30.0))

    campaign = remade(measured(SCANS[:2]), warm)
    found = corrections(stitched(campaign), campaign)
    one = item(found, "temperature of each reading")
    share = one.shift["integrated_field"] / found.results["integrated_field"].value
    # ten kelvin of 17e-6 each: the wire is longer than stated and reads more
    assert share == pytest.approx(1.7e-4, abs=1e-5)


def test_droop_of_the_integrator():
    leaky = Integrator("main", "analog", 50e-9, 200e-9, u_drift=1e-6, leak_time=4000.0)
    campaign = remade(measured(SCANS[:2]), lambda one: replace(one, integrator=leaky))
    found = corrections(stitched(campaign), campaign)
    one = item(found, "droop of the integrator")
    key = "integrated_field"
    # the flux of half a pass of 10 s droops by about 10/4000/2
    share = one.shift[key] / found.results[key].value
    assert -4e-3 < share < -1e-4
