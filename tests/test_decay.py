"""Laws of decay on fields whose integrals are known by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldmap.magnet.tails.decay import Stretches, decay_of

NO_NOISE = np.zeros((3, 3))


def stretches(running, *, end=1.0, width=0.05, boundary=0.2, level=1.0, covariance=NO_NOISE):
    """The last three stretches of a field given by its running integral."""
    edges = end - width * np.arange(3, -1, -1)
    return Stretches(end, width, boundary, level, np.diff(running(edges)), covariance)


def power_law(n, size=1e-3):
    return lambda r: -size / (n - 1) * r ** (1 - n)


def poles(c_squared, size=1e-3):
    return lambda r: -size / 2 / (r**2 - c_squared)


@pytest.mark.parametrize("c_squared", [0.0, 0.05, 0.3, 0.6])
def test_two_poles_are_exact(c_squared):
    found = decay_of(stretches(poles(c_squared), boundary=math.sqrt(c_squared)))
    assert found.kind == "law"
    assert found.exponential == 0
    assert found.tail == pytest.approx(-poles(c_squared)(1.0), rel=1e-9)


def test_an_exponential():
    found = decay_of(stretches(lambda r: -0.02 * np.exp(-(r - 0.2) / 0.1), level=0.2))
    assert found.exponential == 1
    assert found.tail == pytest.approx(0.02 * math.exp(-8), rel=1e-9)
    assert found.power == pytest.approx(9.5, rel=1e-9)  # of the distance: (r - h)/lambda
    assert found.boundary_power == pytest.approx(7.5, rel=1e-9)


def test_what_falls_faster_than_an_exponential_leaves_less():
    found = decay_of(stretches(lambda r: 1e-3 * np.vectorize(math.erf)((r - 0.2) / 0.3)))
    true = 1e-3 * math.erfc(0.8 / 0.3)
    plain = decay_of(stretches(lambda r: -1e-3 * np.exp(-2 * 0.8 / 0.09 * r), level=0.2))
    assert abs(found.tail - true) < 2 * math.hypot(found.u_law, found.u_hidden)
    assert found.tail / true < 1.6
    assert plain.kind == "faint"  # e^-17: its law does not matter


@pytest.mark.parametrize("n", [2.2, 2.5, 2.8, 3.0, 3.3, 4.0])
def test_power_laws_are_covered(n):
    found = decay_of(stretches(power_law(n), boundary=0.1))
    assert found.power == pytest.approx(n, abs=0.02)
    assert abs(found.tail - 1e-3 / (n - 1)) <= 2 * found.u_law


def test_a_dipole_is_certain_and_a_wide_magnet_is_not():
    def doubt(n):
        found = decay_of(stretches(power_law(n), boundary=0.1))
        return found.u_law / found.tail

    assert doubt(3.0) < 0.015
    assert doubt(2.0) > 0.1
    assert doubt(4.0) > 0.03


def test_continuous_where_the_laws_change():
    n = np.linspace(2.0, 5.0, 3001)
    found = [decay_of(stretches(power_law(one), boundary=0.1, level=100.0)) for one in n]
    steps = np.abs(np.diff([one.tail for one in found]))
    assert steps.max() < 1e-3 * min(one.tail for one in found) * 3
    shares = [one.exponential for one in found]
    assert max(shares) == 0


def test_scale_and_sign():
    plain = decay_of(stretches(poles(0.1)))
    turned = decay_of(stretches(poles(0.1, size=-2e-3), level=-2.0))
    assert turned.tail == pytest.approx(-2 * plain.tail, rel=1e-12)
    assert turned.u_law == pytest.approx(2 * plain.u_law, rel=1e-12)


def test_slopes_are_derivatives():
    end = stretches(lambda r: poles(0.3)(r) - 2e-3 * np.exp(-(r - 0.2) / 0.2), level=0.5)
    found = decay_of(end)
    assert found.slopes @ end.values == pytest.approx(found.tail, rel=1e-5)  # Euler's theorem
    for i in (1, 2):
        values = end.values.copy()
        values[i] *= 1 + 1e-3
        moved = decay_of(Stretches(1.0, 0.05, 0.2, 0.5, values, NO_NOISE))
        change = moved.tail - found.tail
        assert change == pytest.approx(found.slopes[i] * (values - end.values)[i], rel=0.02)


@pytest.mark.parametrize(
    ("running", "level"),
    [
        (lambda r: 0.02 * np.log(r - 0.2), 1.0),  # between plates
        (lambda r: 0.02 * r, 1.0),  # a background field
        (lambda r: 0.02 * r**2, 1.0),  # it rises
        (lambda r: np.exp(-((r - 0.8) ** 2)), 1.0),  # within the magnet
        (lambda r: 0.1 * np.cos((r - 0.96) * 9), 9.0),  # it changes its sign
    ],
)
def test_slow_fields_have_no_tail(running, level):
    found = decay_of(stretches(running, level=level))
    assert found.kind == "slow"
    assert math.isnan(found.tail)


def test_noise_is_not_divided_by():
    rng = np.random.default_rng(5)
    sd = 1e-6
    for _ in range(200):
        values = sd * rng.normal(size=3)
        found = decay_of(Stretches(1.0, 0.05, 0.2, 1.0, values, sd**2 * np.eye(3)))
        assert found.kind == "faint"
        assert abs(found.tail) < 5 * sd * np.linalg.norm(found.slopes)


def test_faint_fields_err_by_their_uncertainty():
    rng = np.random.default_rng(6)
    exact = np.diff(power_law(3.0)(1.0 - 0.05 * np.arange(3, -1, -1)))
    sd = exact[-1] / 2
    errors = []
    for _ in range(1000):
        values = exact + sd * rng.normal(size=3)
        found = decay_of(Stretches(1.0, 0.05, 0.2, 1.0, values, sd**2 * np.eye(3)))
        if found.kind == "faint":
            errors.append((found.tail - 5e-4) / (sd * np.linalg.norm(found.slopes)))
    assert len(errors) > 600
    assert np.sqrt(np.mean(np.square(errors))) == pytest.approx(1.0, abs=0.15)


def test_noise_hides_a_dipole_where_the_field_falls_fast():
    running = lambda r: -0.02 * np.exp(-(r - 0.2) / 0.1)  # noqa: E731 - a field in one line
    quiet = decay_of(stretches(running, level=0.2))
    noisy = decay_of(stretches(running, level=0.2, covariance=1e-14 * np.eye(3)))
    assert quiet.u_hidden == 0
    inner, outer = 0.9**2, 1.0
    expected = inner / (outer - inner) * math.sqrt(2) * 1e-7
    assert noisy.u_hidden == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("running", [poles(0.2), power_law(2.6)])
def test_reach_is_where_the_doubt_is_small_enough(running):
    found = decay_of(stretches(running))
    assert found.reach(2 * found.u_law) == 1.0
    required = found.u_law / 10
    farther = found.reach(required)
    again = decay_of(stretches(running, end=farther, width=0.05 * farther))
    assert required / 4 < again.u_law < required * 1.3


def test_reach_of_an_exponential():
    found = decay_of(stretches(lambda r: -0.02 * np.exp(-(r - 0.2) / 0.1), level=0.2))
    assert found.reach(found.u_law / math.e) == pytest.approx(1 + 0.1, rel=0.06)


def test_the_near_field_does_not_stand_for_the_far_one():
    # the field ends between the last two stretches: what the first of them holds is no tail
    values = np.array([1e-2, 1e-4, 1e-8])
    found = decay_of(Stretches(1.0, 0.05, 0.2, 1.0, values, 1e-14 * np.eye(3)))
    assert found.kind == "faint"
    assert abs(found.tail) < 20 * 1e-7
    exact = decay_of(Stretches(1.0, 0.05, 0.2, 1.0, values - [0, 0, 2e-8], NO_NOISE))
    assert exact.kind == "faint"  # rounding beyond a sharp fringe is no change of sign
