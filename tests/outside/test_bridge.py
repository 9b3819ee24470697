"""A drift taken off by pinning both ends leaves a bridge.

Source: the covariance of a random walk tied down at both ends, σ² T (t/T)(1 - t/T); any text on
stochastic processes, e.g. P. Billingsley, Convergence of Probability Measures (memory).
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.bins import bin_pass
from fieldmap.estimate.noise import read_part, walk_part
from fieldmap.readings import Integrator, Pass, Wire

N, RATE, WALK = 401, 20.0, 2e-7
TIME = np.arange(N) / RATE
T = TIME[-1]


def bins_of_single_readings():
    position = np.linspace(0.0, 1.0, N)
    one = Pass("p", Wire("w", 1, 1), Integrator("i"), TIME, position, np.zeros(N))
    bins = bin_pass(one, 1e-9)
    assert np.all(bins.count == 1)
    return bins


def dense(part):
    return np.diag(part.diagonal) + np.diag(part.off, 1) + np.diag(part.off, -1)


def accumulated(increments):
    """Covariance of the integral at each reading, from that of the increments."""
    total = np.tril(np.ones((len(increments), len(increments))))
    return total @ increments @ total.T


def pinned(covariance):
    """Covariance after the line through first and last reading is taken off."""
    share = TIME[1:] / T
    tie = np.eye(len(share))
    tie[:, -1] -= share
    return tie @ covariance @ tie.T


def test_bridge_of_the_walk():
    integral = accumulated(WALK**2 * dense(walk_part(bins_of_single_readings())))
    left = np.diag(pinned(integral))
    t = TIME[1:]
    np.testing.assert_allclose(left, WALK**2 * T * (t / T) * (1 - t / T), rtol=1e-9, atol=1e-28)
    # worst in the middle, a quarter of the variance at the end
    assert left.max() == pytest.approx(WALK**2 * T / 4, rel=1e-9)


def test_neighbours_on_the_bridge():
    integral = accumulated(WALK**2 * dense(walk_part(bins_of_single_readings())))
    bridge = pinned(integral)
    s, t = TIME[101], TIME[301]
    assert bridge[100, 300] == pytest.approx(WALK**2 * s * (T - t) / T, rel=1e-9)


def test_read_noise_is_not_bridged():
    # pinning adds the noise of the pins: (1 + (t/T)² + (1 - t/T)²) in units of one reading
    bins = bins_of_single_readings()
    integral = accumulated(dense(read_part(bins, np.ones(N))))
    t = TIME[100:300] / T
    left = np.diag(pinned(integral))[99:299]
    np.testing.assert_allclose(left, 1 + t**2 + (1 - t) ** 2, rtol=1e-9)


def test_the_bridge_of_a_bin_mean_is_the_mean_of_its_bridge():
    # a bin mean's share of the walk that averages out, w(1 - 1/c²)/6, is the mean over the bin
    # of the bridge between its ends as the readings get dense
    position = np.linspace(0.0, 1.0, N)
    one = Pass("p", Wire("w", 1, 1), Integrator("i"), TIME, position, np.zeros(N))
    bins = bin_pass(one, 0.1)
    inner = slice(1, -1)
    width = bins.count[inner] / RATE
    mean_bridge = width / 6  # mean of w (t/w)(1 - t/w) over 0 … w
    np.testing.assert_allclose(bins.bridge[inner], mean_bridge, rtol=2 / bins.count.min() ** 2)
