"""Propagation of distributions against the examples of the GUM and its first supplement.

Sources: JCGM 101:2008, 9.2.3 (four rectangular inputs); JCGM 100:2008, H.2 (simultaneous
resistance and reactance). Figures of H.2 from memory; the arithmetic of the guide is repeated here
from its observations, so a figure misremembered would not be reproduced.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldmap.magnet.monte_carlo import propagate

# JCGM 101:2008, 9.2.3: ±2·√3·(2 − 0.6^¼) (design figure 3.8794)
FOUR_RECTANGLES = 2 * math.sqrt(3) * (2 - 0.6**0.25)

# JCGM 100:2008, table H.2 (memory): V, mA, rad
V = [5.007, 4.994, 5.005, 4.990, 4.999]
CURRENT = [19.663, 19.639, 19.640, 19.685, 19.678]
PHASE = [1.0456, 1.0438, 1.0468, 1.0428, 1.0433]
# table H.4 (memory): value and standard uncertainty, ohm
RXZ = {"R": (127.732, 0.071), "X": (219.847, 0.295), "Z": (254.260, 0.236)}
# table H.4 (memory)
CORRELATION = {("R", "X"): -0.588, ("R", "Z"): -0.485, ("X", "Z"): 0.993}


def impedance(observed):
    """R, X and Z of voltages (V), currents (A) and phases (rad)."""
    v, current, phase = observed.T
    z = v / current
    return np.column_stack([z * np.cos(phase), z * np.sin(phase), z])


@pytest.fixture(scope="module")
def observed():
    return np.column_stack([V, np.array(CURRENT) * 1e-3, PHASE])


@pytest.fixture(scope="module")
def propagated(observed):
    mean, covariance = observed.mean(axis=0), np.cov(observed, rowvar=False) / len(observed)

    def sample(rng, m):
        return impedance(rng.multivariate_normal(mean, covariance, m))

    return propagate(sample, most=4_000_000)


def test_four_rectangular_inputs():
    def sample(rng, m):
        return rng.uniform(-math.sqrt(3), math.sqrt(3), (m, 4)).sum(axis=1)

    assert pytest.approx(3.8794, abs=5e-5) == FOUR_RECTANGLES
    found = propagate(sample, digits=2)
    assert found.settled
    assert found.u[0] == pytest.approx(2.0, abs=found.tolerance[0])
    assert found.value[0] == pytest.approx(0.0, abs=found.tolerance[0])
    for interval in (found.symmetric[0], found.shortest[0]):
        assert interval == pytest.approx([-FOUR_RECTANGLES, FOUR_RECTANGLES], abs=0.1)
    assert found.symmetric[0] == pytest.approx(
        [-FOUR_RECTANGLES, FOUR_RECTANGLES], abs=1.5 * found.tolerance[0]
    )
    # 9.2.3: the normal distribution would say ±3.92: the trials must tell the two apart
    many = propagate(sample, digits=2, block=1_000_000, most=4_000_000)
    assert np.abs(many.symmetric[0]) == pytest.approx([FOUR_RECTANGLES] * 2, abs=0.012)


def test_means_of_the_observations(observed):
    # table H.2 (memory): means 4.9990 V, 19.6610 mA, 1.04446 rad and their u and correlations
    mean, covariance = observed.mean(axis=0), np.cov(observed, rowvar=False) / 5
    u = np.sqrt(np.diagonal(covariance))
    assert mean == pytest.approx([4.9990, 19.6610e-3, 1.04446], abs=5e-6)
    assert u == pytest.approx([0.0032, 0.0095e-3, 0.00075], rel=0.02)
    r = covariance / np.outer(u, u)
    assert [r[0, 1], r[0, 2], r[1, 2]] == pytest.approx([-0.36, 0.86, -0.65], abs=0.006)


def test_the_guide_s_own_arithmetic(observed):
    # H.2.4, approach 2: R, X and Z of each set of observations
    sets = impedance(observed)
    mean, covariance = sets.mean(axis=0), np.cov(sets, rowvar=False) / 5
    u = np.sqrt(np.diagonal(covariance))
    for i, (value, standard) in enumerate(RXZ.values()):
        assert mean[i] == pytest.approx(value, abs=1.5e-3)
        assert u[i] == pytest.approx(standard, abs=1.5e-3)
    names = list(RXZ)
    for (one, other), expected in CORRELATION.items():
        i, j = names.index(one), names.index(other)
        assert covariance[i, j] / (u[i] * u[j]) == pytest.approx(expected, abs=2e-3)


def test_simultaneous_resistance_and_reactance(propagated):
    assert propagated.settled
    for i, (value, standard) in enumerate(RXZ.values()):
        assert propagated.value[i] == pytest.approx(value, abs=propagated.tolerance[i])
        assert propagated.u[i] == pytest.approx(standard, abs=propagated.tolerance[i] + 5e-4)
    names = list(RXZ)
    for (one, other), expected in CORRELATION.items():
        found = propagated.correlation[names.index(one), names.index(other)]
        assert found == pytest.approx(expected, abs=0.005)
