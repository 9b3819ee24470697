"""The step of recorded numbers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.resolution import common_step, counted_step, flux_step, unswung
from fieldmap.readings.records import integrate_voltage
from tests.faulty import bench, coarse


def smooth(count, seed):
    rng = np.random.default_rng(seed)
    return 0.3 * np.tanh(np.linspace(-5, 5, count)) + 5e-8 * rng.normal(size=count)


@pytest.mark.parametrize("step", [1e-9, 1e-7, 3.7e-6, 1e-5, 1e-4])
def test_the_step_is_found(step):
    for seed, count in enumerate((30, 300, 2000, 50000)):
        if step * count > 1:
            continue  # from one reading to the next it changes by one step or by none
        values = np.round(smooth(count, seed) / step) * step
        assert common_step(values) == pytest.approx(step, rel=1e-6)


def test_a_sum_of_rounded_increments_has_the_step_of_the_increments():
    increments = np.round(np.diff(smooth(500, 1)) / 2e-7) * 2e-7
    assert common_step(np.cumsum(increments)) == pytest.approx(2e-7, rel=1e-6)


@pytest.mark.parametrize(
    "values",
    [np.zeros(50), np.full(50, 0.3), np.linspace(0, 1, 200), smooth(400, 2), np.arange(3.0)],
    ids=["zero", "constant", "ramp", "noise", "three"],
)
def test_where_there_is_none(values):
    assert common_step(values) == 0.0


def test_the_flux_of_a_pass():
    assert flux_step(bench()[0]) == pytest.approx(1e-9, rel=1e-6)
    assert flux_step(coarse(bench()[0], 1e-6)) == pytest.approx(1e-6, rel=1e-6)
    assert counted_step(coarse(bench()[0], 1e-6)) == pytest.approx(1e-6, rel=1e-6)
    assert counted_step(coarse(bench()[0], 1e-3)) == 0.0
    assert flux_step(bench("voltage")[0]) == 0.0
    droops = replace(bench()[0].integrator, kind="analog", leak_time=1000.0)
    assert flux_step(replace(bench()[0], integrator=droops)) == 0.0


def test_a_wild_voltage_touches_four_of_the_freed_increments():
    voltage = np.zeros(40)
    voltage[20] = 24.0
    freed = unswung(np.diff(integrate_voltage(voltage, np.arange(40.0))))
    np.testing.assert_allclose(freed[17:21], [1, 11, 11, 1], atol=1e-6)
    rest = np.delete(freed, range(17, 21))
    np.testing.assert_allclose(rest, 0.0, atol=1e-6)
