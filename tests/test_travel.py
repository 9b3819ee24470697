"""The stage's motion: where, how fast, how long."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.bench.travel import (
    RAMP,
    direction,
    duration,
    nominal_position,
    nominal_speed,
    reading_times,
)
from fieldmap.readings import Integrator, PlannedPass, Wire

WIRE = Wire("wire", turns=20, active_length=0.05)


def planned(start=-0.2, stop=0.3, speed=0.05, rate=100.0, dwell=2.0):
    return PlannedPass("out", WIRE, Integrator("main"), start, stop, speed, rate, dwell)


@pytest.mark.parametrize("ends", [(-0.2, 0.3), (0.3, -0.2), (0.0, 0.004)])
def test_travel_leads_from_start_to_stop(ends):
    one = planned(*ends)
    at = nominal_position(one, np.array([-1.0, 0.0, 2.0, duration(one) - 2.0, duration(one), 99.0]))
    np.testing.assert_allclose(at, [ends[0]] * 3 + [ends[1]] * 3, atol=1e-15)
    assert direction(one) == np.sign(ends[1] - ends[0])


def test_speed_is_the_derivative_of_position_and_reaches_what_is_planned():
    one = planned()
    time = np.linspace(-1.0, duration(one) + 1.0, 4001)
    h = 1e-5
    quotient = (nominal_position(one, time + h) - nominal_position(one, time - h)) / (2 * h)
    speed = nominal_speed(one, time)
    np.testing.assert_allclose(speed, quotient, atol=1e-9)
    cruise = (time > 2.0 + RAMP) & (time < duration(one) - 2.0 - RAMP)
    np.testing.assert_allclose(speed[cruise], 0.05, rtol=1e-14)
    assert speed.max() <= 0.05 * (1 + 1e-14)


def test_speed_never_jumps():
    time = np.linspace(0.0, duration(planned()), 20001)
    speed = nominal_speed(planned(), time)
    steepest = 1.875 * 0.05 / RAMP  # largest slope of the ramp: 15/8
    assert np.abs(np.diff(speed)).max() <= 1.001 * steepest * (time[1] - time[0])


def test_duration_holds_dwells_travel_and_ramp():
    assert duration(planned()) == pytest.approx(2 * 2.0 + 0.5 / 0.05 + RAMP)
    short = planned(0.0, 0.004)  # 0.08 s at full speed: the ramp is as short
    assert duration(short) == pytest.approx(2 * 2.0 + 2 * 0.08)


def test_readings_fill_the_pass_at_the_planned_rate():
    time = reading_times(planned())
    assert time[0] == 0.0
    np.testing.assert_allclose(np.diff(time), 0.01, rtol=1e-9)
    assert duration(planned()) - 0.01 < time[-1] <= duration(planned()) + 1e-9


def test_no_dwell_starts_at_once():
    one = planned(dwell=0.0)
    assert nominal_position(one, np.array([0.1]))[0] > -0.2
