"""Dwells: found where the probe stands, without the readings of a travel."""

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.estimate.dwell import Dwell, dwell_of, find_dwells
from fieldmap.readings import Wire, make_pass

from .shop import measured, planned

WIRE = Wire("w", 1, 0.05)


def passed(position, rate=50.0):
    return make_pass(position, np.zeros(len(position)), rate=rate, probe=WIRE, name="a.csv")


def stop_and_go(rng, jitter, count=400, stand=100, step=1e-3):
    travel = np.concatenate([np.zeros(stand), step * np.arange(1, count), np.full(stand, 0.4)])
    return travel + jitter * rng.standard_normal(len(travel))


@pytest.mark.parametrize("jitter", [0.0, 5e-6, 1e-4])
def test_both_ends_of_a_travel(jitter):
    position = stop_and_go(np.random.default_rng(3), jitter)
    before, after = find_dwells(passed(position))
    assert (before.number, after.number) == (1, 2)
    assert before.start == 0
    assert 60 <= before.stop <= 100
    assert len(position) - 100 <= after.start <= len(position) - 60
    assert after.stop == len(position)
    assert before.at == pytest.approx(0.0, abs=3e-5)
    assert after.at == pytest.approx(0.4, abs=3e-5)


def test_readings_of_a_soft_start_are_left_out():
    (one,) = measured(planned((-0.4, 0.4), rate=50.0, dwell=3.0)).passes
    for dwell in find_dwells(one):
        assert np.ptp(dwell.position) < 1e-9
        assert 135 <= len(dwell.time) <= 151
    times = [(d.time[0], d.time[-1]) for d in find_dwells(one)]
    assert times[0][0] == 0.0
    assert times[0][1] < 3.0


def test_fast_readings_of_a_jittery_stage():
    """At 5 kHz a reading moves by less than the jitter; a window of many tells the travel."""
    rng = np.random.default_rng(5)
    travel = np.concatenate([np.zeros(5000), 2e-6 * np.arange(20_000), np.full(5000, 0.04)])
    found = find_dwells(passed(travel + 5e-6 * rng.standard_normal(len(travel)), 5000.0))
    assert [round(one.at, 4) for one in found] == [0.0, 0.04]
    assert all(4000 < len(one.time) <= 5000 for one in found)


def test_steps_of_an_encoder():
    travel = np.concatenate([np.zeros(200), 1e-3 * np.arange(300), np.full(200, 0.3)])
    found = find_dwells(passed(np.round(travel / 5e-6) * 5e-6))
    assert [one.at for one in found] == pytest.approx([0.0, 0.3])


def test_a_pass_without_dwells():
    assert find_dwells(passed(1e-3 * np.arange(500))) == ()


@pytest.mark.parametrize("jitter", [0.0, 1e-5])
def test_a_probe_that_only_stands(jitter):
    rng = np.random.default_rng(2)
    (one,) = find_dwells(passed(0.1 + jitter * rng.standard_normal(300)))
    assert (one.start, one.stop) == (0, 300)


def test_a_stop_on_the_way():
    parts = [1e-3 * np.arange(200), np.full(60, 0.2), 0.2 + 1e-3 * np.arange(200)]
    (one,) = find_dwells(passed(np.concatenate(parts)))
    assert one.at == pytest.approx(0.2)
    assert 50 <= len(one.time) <= 60


def test_a_short_stop_is_none():
    parts = [1e-3 * np.arange(200), np.full(8, 0.2), 0.2 + 1e-3 * np.arange(200)]
    assert find_dwells(passed(np.concatenate(parts))) == ()


def test_by_number():
    one = passed(stop_and_go(np.random.default_rng(3), 0.0))
    assert dwell_of(one, 2).at == pytest.approx(0.4)
    with pytest.raises(InputError, match=r"a.csv, dwell 3: found dwells 1 to 2, expected one"):
        dwell_of(one, 3)
    with pytest.raises(InputError, match="found no dwell of 16 readings"):
        dwell_of(passed(1e-3 * np.arange(500)))


def test_numbers_of_a_dwell():
    flux = np.array([0.0, 1.0, 3.0])
    one = Dwell(1, 0, 3, np.array([5.0, 5.5, 6.0]), np.full(3, 0.2), flux)
    assert (one.duration, one.step, one.at) == (1.0, 0.5, pytest.approx(0.2))
    assert one.voltage.tolist() == [2.0, 4.0]


@pytest.mark.parametrize("times", [np.zeros(20), np.append(np.arange(19) / 50, 9.0)])
def test_uneven_times_are_refused(times):
    one = Dwell(1, 0, 20, times, np.zeros(20), np.zeros(20))
    with pytest.raises(InputError, match=r"dwell 1: found (time that stands still|a reading)"):
        one.check_even()
