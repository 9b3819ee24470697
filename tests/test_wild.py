"""Wild runs in a series: found where they are, and never made of curves, corners or steps."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.wild import FEWEST, wild_runs

CHANCE = 5e-5 / 6000
AT = np.arange(1000.0)


def series(seed, noise=1e-6):
    rng = np.random.default_rng(seed)
    return np.tanh((AT - 500) / 60) + noise * rng.normal(size=len(AT)), rng


@pytest.mark.parametrize("count", [1, 2, 3])
def test_runs_are_found_where_they_are(count):
    for seed in range(10):
        values, rng = series(seed)
        start = int(rng.integers(0, 1000 - count))
        values[start : start + count] += 1e-4
        (found,) = wild_runs(AT, values, chance=CHANCE, longest=6)
        assert (found.start, found.count) == (start, count)
        assert found.size == pytest.approx(1e-4, rel=0.2)
        assert found.allowed < 5e-5


def test_a_pair_that_cancels_is_one_run():
    values = np.full(1000, 0.05)
    values[200] += 0.1
    values[201] -= 0.1
    even = np.zeros(1000)
    (found,) = wild_runs(AT, values, chance=CHANCE, grain=1e-7, steep=even)
    assert (found.start, found.count) == (200, 2)


def test_noise_alone_is_not_wild():
    # 2e5 readings at a chance of 1e-6 each: 0.2 are expected, three have a chance of 1e-3
    count = 0
    for seed in range(200):
        values, _ = series(seed)
        count += len(wild_runs(AT, values, chance=1e-6))
    assert count <= 2


SHAPES = {
    "tanh": np.tanh,
    "bell": lambda x: np.exp(-(x**2)),
    "loop": lambda x: (1 + x**2) ** -1.5,
    "corner": lambda x: np.clip(x, 0, 60),
    "parabola": lambda x: np.clip(x, 0, 60) ** 2,
    "step": lambda x: np.where(x > 0, 1.0, 0.0),
    "ramp": lambda x: np.clip(x, 0, 3),
}


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("size", [1e-3, 1.0])
def test_narrow_features_are_not_wild(shape, size):
    for seed in range(12):
        rng = np.random.default_rng(seed)
        for spacing in (0.1, 0.4, 0.8, 1.3):
            x = (np.arange(200) - 100 + rng.uniform()) * spacing
            values = size * SHAPES[shape](x) + 1e-6 * (seed % 2) * rng.normal(size=200)
            assert wild_runs(np.arange(200.0), values, chance=CHANCE, longest=6) == []


def test_uneven_spacing_and_time_that_stands_still():
    rng = np.random.default_rng(3)
    at = np.cumsum(rng.uniform(0.5, 1.5, 1000))
    values = np.tanh((at - 500) / 60) + 1e-6 * rng.normal(size=1000)
    assert wild_runs(at, values, chance=CHANCE) == []
    values[321] += 1e-4
    (found,) = wild_runs(at, values, chance=CHANCE)
    assert (found.start, found.count) == (321, 1)
    stamped, _ = series(3)
    assert wild_runs(np.floor(AT / 3) * 3, stamped, chance=CHANCE) == []


def test_coarse_numbers_are_not_wild():
    values, _ = series(5)
    for step in (1e-6, 1e-4, 1e-2):
        rounded = np.round(values / step) * step
        assert wild_runs(AT, rounded, chance=CHANCE, grain=step) == []


@pytest.mark.parametrize("values", [np.zeros(100), np.ones(100), np.arange(100.0)])
def test_exact_series_and_short_ones(values):
    assert wild_runs(np.arange(100.0), values, chance=CHANCE) == []
    assert wild_runs(np.arange(10.0), np.eye(10)[3], chance=CHANCE) == []
    assert FEWEST > 10
