"""Propagation of distributions: intervals, when it stops, what it refuses."""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.magnet.monte_carlo import coverage_interval, propagate, shortest_interval


def normal(rng, m):
    return rng.normal(5.0, 2.0, m)


def skew(rng, m):
    return rng.exponential(1.0, m)


def test_a_normal_distribution_comes_back():
    found = propagate(normal)
    assert found.settled
    assert found.value[0] == pytest.approx(5.0, abs=0.05)
    assert found.u[0] == pytest.approx(2.0, abs=0.05)
    assert found.symmetric[0] == pytest.approx([5 - 3.92, 5 + 3.92], abs=0.06)
    assert found.tolerance == pytest.approx([0.05])  # half a unit of the last digit of 2.0


def test_the_shortest_interval_of_a_skew_distribution_starts_at_its_edge():
    found = propagate(skew)
    low, high = found.shortest[0]
    assert low == pytest.approx(0.0, abs=2e-3)
    assert high == pytest.approx(-math.log(0.05), abs=0.05)
    assert found.symmetric[0] == pytest.approx([-math.log(0.975), -math.log(0.025)], abs=0.06)
    assert high - low < np.ptp(found.symmetric[0])


def test_more_digits_take_more_trials():
    assert propagate(normal, digits=1).trials == 20_000  # two blocks at least
    assert propagate(normal, digits=2).trials > 20_000


def test_the_means_stand_still_to_the_digits_asked_for():
    answers = [propagate(normal, seed=seed) for seed in range(12)]
    off = np.array([one.value[0] - 5.0 for one in answers])
    assert np.all(np.abs(off) < 2 * answers[0].tolerance[0])


def test_giving_up_is_told():
    found = propagate(normal, digits=3, most=30_000)
    assert (found.settled, found.trials) == (False, 30_000)


def test_several_outputs_and_their_correlation():
    def both(rng, m):
        x = rng.standard_normal((m, 2))
        return np.column_stack([x[:, 0], 0.6 * x[:, 0] + 0.8 * x[:, 1]])

    found = propagate(both)
    assert found.correlation == pytest.approx(np.array([[1.0, 0.6], [0.6, 1.0]]), abs=0.02)
    assert found.symmetric.shape == found.shortest.shape == (2, 2)


def test_an_output_that_does_not_vary():
    found = propagate(lambda _, m: np.full(m, 3.0))
    assert found.settled
    assert (found.value[0], found.u[0]) == (3.0, 0.0)
    assert found.symmetric[0].tolist() == [3.0, 3.0]


def test_one_seed_one_answer():
    first, again, other = (propagate(normal, seed=seed).value[0] for seed in (4, 4, 5))
    assert first == again
    assert first != other


def test_blocks_grow_with_the_coverage():
    assert propagate(normal, coverage=0.999, digits=1, most=4_000_000).trials % 100_000 == 0


@pytest.mark.parametrize(("count", "coverage"), [(3, 0.5), (20, 0.95), (101, 0.8), (1000, 0.99)])
def test_intervals_hold_their_share(count, coverage):
    values = np.random.default_rng(count).standard_normal(count)
    for low, high in (coverage_interval(values, coverage), shortest_interval(values, coverage)):
        share = np.mean((low <= values) & (values <= high))
        assert coverage - 1 / count <= share <= coverage + 1.5 / count
    symmetric = coverage_interval(values, coverage)
    below, above = (values < symmetric[0]).sum(), (values > symmetric[1]).sum()
    assert abs(int(below) - int(above)) <= 1
    assert np.ptp(shortest_interval(values, coverage)) <= np.ptp(symmetric)


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ({"digits": 0}, "argument 'digits'"),
        ({"coverage": 1.0}, "argument 'coverage'"),
        ({"block": 1}, "argument 'block'"),
        ({"most": 10_000}, "expected 20000 or more: two blocks"),
    ],
)
def test_refuses_arguments_out_of_range(more, words):
    with pytest.raises(InputError, match=words):
        propagate(normal, **more)


@pytest.mark.parametrize(
    "sample",
    [
        lambda _, m: np.zeros(m - 1),
        lambda _, m: np.zeros((m, 2, 2)),
        lambda _, m: np.zeros((m, 0)),
        lambda _, m: np.full(m, np.nan),
    ],
)
def test_refuses_outputs_that_are_none(sample):
    with pytest.raises(InputError, match="argument 'sample'"):
        propagate(sample)
