"""Spectrum and Allan deviation of a dwell."""

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.estimate.dwell import Dwell
from fieldmap.estimate.spectrum import (
    allan_curve,
    noise_allan,
    noise_density,
    voltage_spectrum,
)

RATE = 200.0


def dwell(flux, rate=RATE):
    n = len(flux)
    return Dwell(1, 0, n, np.arange(n) / rate, np.zeros(n), flux)


def noisy(seed, count, walk, read, rate=RATE):
    rng = np.random.default_rng(seed)
    steps = walk / np.sqrt(rate) * rng.standard_normal(count)
    return dwell(np.cumsum(steps) + read * rng.standard_normal(count), rate)


@pytest.mark.parametrize(("walk", "read"), [(2e-7, 0.0), (0.0, 5e-8), (2e-7, 5e-8)])
def test_noise_has_the_density_of_its_levels(walk, read):
    found = voltage_spectrum(noisy(1, 40_000, walk, read), segments=80)
    expected = noise_density(found.frequency, walk, read, 1 / RATE)
    # 80 segments of half overlap average to about 12 % a point
    assert np.mean(found.density[2:-1] / expected[2:-1]) == pytest.approx(1.0, abs=0.03)
    assert np.std(found.density[2:-1] / expected[2:-1]) < 0.2


def test_a_drift_is_no_part_of_it():
    still = noisy(2, 4000, 2e-7, 0.0)
    moved = dwell(still.flux + 1e-3 * still.time)
    np.testing.assert_allclose(
        voltage_spectrum(moved).density, voltage_spectrum(still).density, rtol=1e-6
    )


def test_frequencies_segments_and_width():
    found = voltage_spectrum(noisy(3, 1001, 1e-7, 0.0), segments=9)
    assert found.frequency[-1] == pytest.approx(RATE / 2)
    assert found.frequency[0] == found.width == pytest.approx(1.0)  # 200 voltages a segment
    assert found.segments == 9


def test_a_short_dwell_gives_fewer_segments():
    found = voltage_spectrum(noisy(3, 20, 1e-7, 0.0))
    assert found.segments == 1
    assert len(found.frequency) == 8


def test_no_segments_are_refused():
    with pytest.raises(InputError, match="segments: found 0, expected a whole number above zero"):
        voltage_spectrum(noisy(3, 100, 1e-7, 0.0), segments=0)


@pytest.mark.parametrize(("walk", "read"), [(2e-7, 0.0), (0.0, 5e-8), (2e-7, 5e-8)])
def test_allan_deviation_is_that_of_the_levels(walk, read):
    curve = allan_curve(noisy(4, 20_000, walk, read))
    expected = noise_allan(curve.time, walk, read)
    early = slice(None, 12)
    np.testing.assert_allclose(curve.deviation[early], expected[early], rtol=0.08)


def test_uncertainty_of_the_allan_deviation():
    curves = [allan_curve(noisy(seed, 300, 2e-7, 0.0)) for seed in range(80)]
    errors = [(one.deviation - noise_allan(one.time, 2e-7, 0.0)) / one.u for one in curves]
    assert np.all(np.abs(np.std(errors, axis=0) - 1) < 0.4)


def test_averaging_times_end_at_a_third_of_the_dwell():
    curve = allan_curve(noisy(5, 901, 1e-7, 0.0))
    assert curve.time[0] == pytest.approx(1 / RATE)
    assert 150 / RATE < curve.time[-1] <= 300 / RATE
    assert np.all(np.isfinite(curve.deviation))
    assert np.all(curve.u > 0)
