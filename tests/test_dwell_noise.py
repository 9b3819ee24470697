"""Drift and noise of a dwell: true values within their uncertainties, lines left out."""

import numpy as np
import pytest

from fieldmap.estimate.dwell import find_dwells
from fieldmap.estimate.dwell_noise import dwell_noise, jitter_seen
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline
from fieldmap.readings import Coil, Wire, make_pass

WIRE = Wire("w", 1, 0.05)
DRIFT, WALK, READ = 3e-7, 2e-7, 5e-8


def flux_of(rng, count, rate, walk=WALK, read=READ, drift=DRIFT):
    steps = walk / np.sqrt(rate) * rng.standard_normal(count)
    return np.cumsum(steps) + read * rng.standard_normal(count) + drift * np.arange(count) / rate


def only_dwell(flux, rate, record="cumulative"):
    zeros = np.zeros(len(flux))
    (one,) = find_dwells(make_pass(zeros, flux, rate=rate, probe=WIRE, record=record))
    return one


def off(found):
    """Errors over their standard uncertainties."""
    pairs = [(found.drift - DRIFT, found.u_drift), (found.walk - WALK, found.u_walk)]
    if found.read is not None:
        pairs.append((found.read - READ, found.u_read))
    return [error / u for error, u in pairs]


@pytest.mark.parametrize("rate", [20.0, 100.0])
def test_errors_are_as_large_as_stated(rate):
    rng = np.random.default_rng(11)
    errors = np.array(
        [off(dwell_noise(only_dwell(flux_of(rng, 300, rate), rate))) for _ in range(120)]
    )
    size = np.sqrt(np.mean(errors**2, axis=0))
    # the standard error of an rms of 120 is 6.5 %; levels near zero are skew
    assert np.all(size > 0.8)
    assert np.all(size < 1.3)
    assert np.all(np.abs(errors.mean(axis=0)) < 0.35)


def test_samples_of_a_voltage():
    rng = np.random.default_rng(12)
    errors = []
    for _ in range(120):
        voltage = DRIFT + WALK * np.sqrt(100.0) * rng.standard_normal(300)
        found = dwell_noise(only_dwell(voltage, 100.0, "voltage"))
        assert (found.read, found.u_read) == (None, None)
        errors.append(off(found))
    size = np.sqrt(np.mean(np.square(errors), axis=0))
    assert np.all(size > 0.8)
    assert np.all(size < 1.2)


@pytest.mark.parametrize(("walk", "read"), [(WALK, 0.0), (0.0, READ)])
def test_a_noise_that_is_not_there(walk, read):
    flux = flux_of(np.random.default_rng(4), 2000, 50.0, walk, read)
    found = dwell_noise(only_dwell(flux, 50.0))
    assert found.walk == pytest.approx(walk, abs=3 * found.u_walk)
    assert found.read == pytest.approx(read, abs=3 * found.u_read)


def test_hum_is_told_and_left_out():
    rng = np.random.default_rng(6)
    rate, hum = 1000.0, 4e-6
    time = np.arange(4000) / rate
    quiet = flux_of(rng, 4000, rate)
    wave = hum * np.sqrt(2) * np.cos(2 * np.pi * 50.0 * time)
    loud = quiet + np.cumsum(wave) / rate
    found, without = (dwell_noise(only_dwell(flux, rate)) for flux in (loud, quiet))
    assert found.lines[0].frequency == pytest.approx(50.0, abs=0.3)
    assert found.lines[0].voltage == pytest.approx(hum, rel=0.2)
    assert found.walk == pytest.approx(without.walk, abs=2 * without.u_walk)
    assert without.lines == ()


def test_lines_are_rare_in_noise():
    rng = np.random.default_rng(7)
    told = sum(len(dwell_noise(only_dwell(flux_of(rng, 400, 50.0), 50.0)).lines) for _ in range(60))
    assert told <= 1


def test_nothing_but_a_drift():
    found = dwell_noise(only_dwell(DRIFT * np.arange(100) / 50.0, 50.0))
    assert found.drift == pytest.approx(DRIFT)
    assert (found.walk, found.read) == (pytest.approx(0, abs=1e-18), pytest.approx(0, abs=1e-18))


def test_a_dead_channel():
    found = dwell_noise(only_dwell(np.full(100, 2e-3), 50.0))
    assert (found.drift, found.walk, found.read, found.u_read) == (0.0, 0.0, 0.0, 0.0)


def test_jitter_is_seen_through_the_slope_of_the_flux():
    spline = UniformSpline.covering(-0.1, 0.1, 0.01)
    middles = spline.middles()
    line = FieldLine(0, 0, -0.1, 0.1, spline, 0.5 + 2.0 * middles, np.eye(spline.size))
    wire = Wire("w", 20, 0.05)  # cuts 20 * 0.05 m of the field at each place
    assert jitter_seen(line, wire, 0.05, 4e-6) == pytest.approx(0.6 * 4e-6)
    coil = Coil("c", "rectangular", 0.3, window=0.01)  # reads 0.3 m² of the mean field
    assert jitter_seen(line, coil, 0.0, 4e-6) == pytest.approx(0.3 * 2.0 * 4e-6)
