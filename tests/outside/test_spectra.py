"""Power spectral density: white noise, Parseval's theorem, a sine, against plain transforms.

White voltage of density w² over positive and negative frequencies has 2w² over the positive ones
alone (common practice for one-sided densities), and its integral has a random walk of w per root
second, since the variance of its integral over a time t is w²·t (Wiener process). Parseval's
theorem: the area below a one-sided density is the variance.
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.dwell import Dwell
from fieldmap.estimate.spectrum import noise_density, voltage_spectrum

RATE, W = 500.0, 3e-7


def still(voltage):
    flux = np.concatenate([[0.0], np.cumsum(voltage)]) / RATE
    n = len(flux)
    return Dwell(1, 0, n, np.arange(n) / RATE, np.zeros(n), flux)


def white(seed, count=60_000):
    """Samples of white voltage averaged over a step: variance w²/step."""
    return W * np.sqrt(RATE) * np.random.default_rng(seed).standard_normal(count)


def test_white_noise_of_density_w_squared():
    found = voltage_spectrum(still(white(1)), segments=100)
    assert np.mean(found.density[1:-1]) == pytest.approx(2 * W**2, rel=0.02)
    assert noise_density(np.array([0.1, 200.0]), W, 0.0, 1 / RATE).tolist() == [2 * W**2] * 2


def test_the_variance_of_the_integral_grows_as_w_squared_t():
    ends = [still(white(seed, 500)).flux[-1] for seed in range(400)]  # after one second
    assert np.std(ends) == pytest.approx(W, rel=0.1)


def test_area_is_the_variance():
    voltage = white(2)
    found = voltage_spectrum(still(voltage), segments=200)
    assert found.density.sum() * found.width == pytest.approx(np.var(voltage), rel=0.02)


def test_area_of_a_line_is_its_mean_square():
    time = np.arange(20_000) / RATE
    voltage = 2e-6 * np.sqrt(2) * np.sin(2 * np.pi * 50 * time)
    found = voltage_spectrum(still(voltage))
    near = np.abs(found.frequency - 50) < 5 * found.width
    assert found.density[near].sum() * found.width == pytest.approx((2e-6) ** 2, rel=1e-3)


def test_read_noise_is_differenced():
    """Differences of white readings have the power 2 - 2 cos ωΔt = 4 sin²(ωΔt/2) of them."""
    read = 5e-8
    flux = read * np.random.default_rng(3).standard_normal(60_001)
    n = len(flux)
    one = Dwell(1, 0, n, np.arange(n) / RATE, np.zeros(n), flux)
    found = voltage_spectrum(one, segments=100)
    expected = 2 * read**2 * RATE * 4 * np.sin(np.pi * found.frequency / RATE) ** 2
    assert np.mean((found.density / expected)[5:-1]) == pytest.approx(1.0, abs=0.02)
