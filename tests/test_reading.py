"""From true positions to what the bench shows."""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors
from fieldmap.bench.reading import shown, true_gain, true_position, true_probe, warmed, whole_steps
from fieldmap.readings import Coil, Integrator, Wire
from fieldmap.readings.records import undo_droop

WIRE = Wire("wire", 20, 0.05, temperature_coefficient=2e-5, reference_temperature=22.0)
COIL = Coil("coil", "round", 0.3, window=0.01)


def test_positions():
    errors = Errors(scale=1e-3, offset=2e-4, backlash=4e-5)
    s = np.array([-0.1, 0.2])
    sense = np.array([1.0, -1.0])
    np.testing.assert_allclose(
        true_position(s, sense, errors), s + 1e-3 * s + 2e-4 + 2e-5 * sense, rtol=1e-14
    )
    np.testing.assert_array_equal(true_position(s, 1.0, Errors()), s)


def test_gain_is_size_times_angle_times_warmth():
    errors = Errors(gain={"wire": 1e-3}, tilt={"wire": 0.05}, warmth={"wire": 3.0})
    expected = (1 + 1e-3) * math.cos(0.05) * (1 + 6e-5)
    assert true_gain(WIRE, errors) == pytest.approx(expected, rel=1e-15)
    assert true_gain(COIL, errors) == 1.0  # the errors of another probe


def test_window_changes_and_the_area_stays():
    wrong = true_probe(COIL, Errors(window={"coil": 1e-4}))
    assert (wrong.window, wrong.effective_area) == (pytest.approx(0.0101), 0.3)
    assert true_probe(COIL, Errors(window={"other": 1e-4})) == COIL
    assert true_probe(WIRE, Errors(window={"wire": 1e-4})) == WIRE


def test_warm_probes_grow():
    np.testing.assert_allclose(warmed(WIRE, np.array([22.0, 32.0])), [1.0, 1.0 + 2e-4])
    np.testing.assert_array_equal(warmed(COIL, np.array([0.0, 99.0])), [1.0, 1.0])


def test_droop_is_what_the_reader_undoes():
    old = Integrator("old", kind="analog", leak_time=100.0)
    time = np.linspace(0.0, 20.0, 2001)
    integral = 0.1 * np.tanh((time - 10.0) / 2.0)
    held = shown(integral, time, old, np.zeros_like(time))
    assert np.ptp(held - integral) > 1e-3
    np.testing.assert_allclose(undo_droop(held, time, 100.0), integral, atol=2e-8)


def test_a_clock_that_stands_loses_nothing():
    old = Integrator("old", kind="analog", leak_time=100.0)
    time = np.array([0.0, 1.0, 1.0, 2.0])
    held = shown(np.array([0.0, 0.0, 0.5, 0.5]), time, old, np.zeros(4))
    np.testing.assert_allclose(held, [0.0, 0.0, 0.5, 0.5 * math.exp(-0.01)])


def test_steps_and_full_scale():
    coarse = Integrator("main", resolution=1e-3, full_scale=0.01)
    values = shown(np.array([0.0, 0.00149, 0.5, -0.5]), np.arange(4.0), coarse, np.zeros(4))
    np.testing.assert_allclose(values, [0.0, 0.001, 0.01, -0.01])
    np.testing.assert_array_equal(whole_steps(np.array([0.123]), 0.0), [0.123])
    np.testing.assert_allclose(whole_steps(np.array([0.7, 1.6]), 0.3), [0.6, 1.5])
