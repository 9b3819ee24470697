"""Bins partition the readings; rows and noise of their means are those of the single readings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.estimate.bins import MAX_BLOCKS, bin_pass, bin_starts, mean_rows
from fieldmap.estimate.noise import walk_part
from fieldmap.estimate.response import response
from fieldmap.estimate.spline import UniformSpline
from fieldmap.readings import Coil, Integrator, Pass, Wire
from fieldmap.readings.records import integrate_voltage

WIRE = Wire("wire", turns=20, active_length=0.05)
PROBES = [
    WIRE,
    replace(WIRE, name="bundle", width=0.4e-3),
    Coil("rect", "rectangular", effective_area=0.3, window=0.01),
    Coil("round", "round", effective_area=0.3, window=0.01),
    Coil("point", "round", effective_area=0.3),
]
STEP = 0.0015


def smooth_out(n=800):
    return np.linspace(-0.1, 0.1, n)


def out_and_back(n=800):
    return 0.1 * np.sin(np.linspace(-np.pi / 2, 1.6 * np.pi, n))


def with_dwells(n=800):
    return np.concatenate(
        [np.full(n // 4, -0.1), np.linspace(-0.1, 0.1, n // 2), np.full(n // 4, 0.1)]
    )


def jittery(n=800):
    return smooth_out(n) + np.random.default_rng(3).normal(size=n) * 2e-4


MOTIONS = [smooth_out, out_and_back, with_dwells, jittery]


def scan(position, probe=WIRE, time=None, record="cumulative", **more):
    n = len(position)
    time = np.arange(n) / 50.0 if time is None else time
    flux = np.random.default_rng(8).normal(size=n).cumsum()
    return Pass("p", probe, Integrator("main"), time, position, flux, record=record, **more)


def in_bins(bins, values):
    """Mean of each bin, one bin at a time."""
    ends = np.append(bins.starts[1:], int(bins.count.sum()))
    return np.array([values[a:b].mean(axis=0) for a, b in zip(bins.starts, ends, strict=True)])


# clocks repeat a stamp, yet do not tell less than a nanosecond
gaps = st.just(0.0) | st.floats(min_value=1e-9, max_value=1)
times = st.lists(gaps, min_size=3, max_size=60).map(np.cumsum)


@given(times, st.floats(min_value=1e-4, max_value=10), st.integers(0, 2**32 - 1))
def test_bins_partition_the_readings(time, step, seed):
    position = np.random.default_rng(seed).normal(size=len(time)).cumsum()
    starts = bin_starts(time, position, step)
    assert starts[0] == 0
    assert np.all(np.diff(starts) > 0)
    assert starts[-1] < len(time)
    bins = bin_pass(scan(position, time=time), step)
    assert bins.count.sum() == len(time)
    assert np.all(bins.count >= 1)


@pytest.mark.parametrize("n", [100, MAX_BLOCKS, 3 * MAX_BLOCKS + 7])
def test_a_bin_closes_after_its_step_of_travel(n):
    position = np.linspace(-0.6, 0.6, n)
    bins = bin_pass(scan(position), 0.02)
    ends = np.append(bins.starts[1:], n - 1)
    lengths = position[ends] - position[bins.starts]
    block = 1.2 / min(n, MAX_BLOCKS)
    assert np.all(lengths[:-1] >= 0.02 - 1e-12)
    assert np.all(lengths <= 0.02 + 2 * block)


def test_a_dwell_is_cut_into_slices():
    position = with_dwells(2000)
    bins = bin_pass(scan(position), STEP)
    standing = bins.position < -0.0999
    duration = 40.0
    assert standing.sum() >= 8  # a quarter of the time
    assert np.all(np.diff(bins.time[standing]) < duration / 30)


def test_a_probe_that_stands_still_is_cut_into_slices_too():
    assert len(bin_starts(np.arange(640) / 10, np.zeros(640), STEP)) >= 2


@pytest.mark.parametrize("motion", MOTIONS)
def test_means_of_time_position_flux_and_current(motion):
    current = 85 + np.random.default_rng(1).normal(size=800)
    one = scan(motion(), current=current)
    bins = bin_pass(one, STEP, nominal_current=85.0)
    np.testing.assert_allclose(bins.time, in_bins(bins, one.time), rtol=1e-13)
    np.testing.assert_allclose(bins.position, in_bins(bins, one.position), rtol=0, atol=1e-15)
    np.testing.assert_allclose(np.diff(bins.flux), np.diff(in_bins(bins, one.flux)), atol=1e-12)
    np.testing.assert_allclose(bins.strength, in_bins(bins, current / 85), rtol=1e-14)
    assert bin_pass(one, STEP).strength is None


def test_a_warm_probe_reads_more():
    warm = 20 + 5 * np.random.default_rng(2).random(800)
    probe = replace(WIRE, temperature_coefficient=2e-5, reference_temperature=22.0)
    one = replace(scan(smooth_out(), temperature=warm), probe=probe)
    bins = bin_pass(one, STEP)
    np.testing.assert_allclose(bins.strength, in_bins(bins, 1 + 2e-5 * (warm - 22.0)), rtol=1e-14)
    current = np.full(800, 86.0)
    both = bin_pass(replace(one, current=current), STEP, nominal_current=85.0)
    np.testing.assert_allclose(both.strength, bins.strength * 86 / 85, rtol=1e-14)
    assert bin_pass(replace(one, probe=WIRE), STEP).strength is None


def test_speed_is_that_of_the_motion():
    one = scan(smooth_out())
    np.testing.assert_allclose(bin_pass(one, STEP).speed, 0.2 / 799 * 50, rtol=1e-9)
    back = bin_pass(scan(smooth_out()[::-1]), STEP)
    np.testing.assert_allclose(back.speed, -0.2 / 799 * 50, rtol=1e-9)
    still = bin_pass(scan(with_dwells()), STEP)
    assert np.all(still.speed[still.position == -0.1][:-1] == 0)


@pytest.mark.parametrize("probe", PROBES, ids=lambda p: p.name)
@pytest.mark.parametrize("motion", MOTIONS)
def test_averaged_rows_are_the_mean_of_the_rows_of_every_reading(probe, motion):
    spline = UniformSpline.covering(-0.11, 0.11, 2 * STEP)
    one = scan(motion(), probe)
    bins = bin_pass(one, STEP)
    nodes = response(probe, spline.spacing)
    running, direct, slope = mean_rows(bins, one.position, nodes, spline)
    whole, bent = 0, 0
    for offset, weight in zip(nodes.offsets, nodes.weights, strict=True):
        s = one.position + offset
        if nodes.of_integral:
            whole = whole + weight * spline.running_rows(s)
            bent = bent + weight * spline.field_rows(s)
        else:
            whole = whole + weight * spline.field_rows(s)
            bent = bent + weight * spline.field_rows(s, 1)
    expected = in_bins(bins, whole)
    got = spline.from_running(running.toarray()) + direct.toarray()
    np.testing.assert_allclose(got, expected, rtol=0, atol=1e-12 * np.abs(expected).max())
    expected = in_bins(bins, bent)
    np.testing.assert_allclose(
        slope.toarray(), expected, rtol=0, atol=1e-12 * np.abs(expected).max()
    )


def test_bridge_of_evenly_spaced_readings_is_the_design_formula():
    one = scan(smooth_out(1000))
    bins = bin_pass(one, 0.005)
    width = bins.count / 50.0
    np.testing.assert_allclose(bins.bridge, width * (1 - 1 / bins.count**2) / 6, rtol=1e-9)


@given(times, st.integers(0, 2**32 - 1))
def test_bridge_of_uneven_readings_is_the_double_sum(time, seed):
    # mean time less the variance of the mean: half the mean distance between two readings
    position = np.random.default_rng(seed).normal(size=len(time)).cumsum()
    bins = bin_pass(scan(position, time=time), 3.0)
    ends = np.append(bins.starts[1:], len(time))
    for a, b, bridge in zip(bins.starts, ends, bins.bridge, strict=True):
        apart = np.abs(time[a:b, None] - time[a:b])
        assert bridge == pytest.approx(0.5 * apart.mean(), rel=1e-9, abs=1e-12)


def bin_means(bins):
    """Matrix that averages readings in bins."""
    owner = np.repeat(np.arange(len(bins.starts)), bins.count.astype(int))
    return (owner == np.arange(len(bins.starts))[:, None]) / bins.count[:, None]


def voltage_covariance(bins, integrate, n, rate):
    """Covariance of the increments where every voltage sample has independent noise."""
    shares = np.array([integrate(sample) for sample in np.eye(n)]).T * np.sqrt(rate)
    steps = np.diff(bin_means(bins) @ shares, axis=0)
    return steps @ steps.T


# step 1e-6 would put each reading into a bin of its own: of a voltage a bin holds two at least
@pytest.mark.parametrize(
    ("step", "count", "near"),
    [(1e-6, 2, 0.03), (9e-4, 2, 0.03), (0.004, 8, 0.02), (0.011, 14, 0.02)],
)
def test_voltage_record_as_it_is_integrated(step, count, near):
    n, rate = 400, 50.0
    one = scan(np.linspace(-0.1, 0.1, n), record="voltage")
    bins = bin_pass(one, step)
    assert np.median(bins.count) == count
    expected = voltage_covariance(bins, lambda v: integrate_voltage(v, one.time), n, rate)
    part = walk_part(bins)
    inner = slice(2, -2)
    np.testing.assert_allclose(part.diagonal[inner], np.diag(expected)[inner], rtol=0.02)
    np.testing.assert_allclose(part.off[inner], np.diag(expected, 1)[inner], rtol=near)
