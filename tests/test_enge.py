"""The Enge curve: values, derivatives, boundary, integral, shifts of the origin."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from fieldmap.magnet.fringe.enge import EngeCurve

SHAPES = [
    (0.0, 2.0),
    (0.4, 2.2),
    (0.1, 3.0, -0.4, 0.3),
    (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111),
]


def curve(*coefficients):
    return EngeCurve(np.array(coefficients, dtype=float))


def told(coefficients):
    found = EngeCurve(coefficients).canonical()
    return np.concatenate([found.coefficients, [found.boundary, found.integral]])


def test_value_is_half_where_the_exponent_vanishes():
    assert curve(0.4, 2.0).value(np.array([-0.2]))[0] == pytest.approx(0.5, abs=1e-15)


def test_value_far_out_is_finite():
    assert curve(0.0, 1.0).value(np.array([-1e6, 1e6])).tolist() == pytest.approx([1.0, 0.0])


def test_order_one_is_a_tanh_edge():
    xi, c1 = np.linspace(-3, 3, 41), 2.4
    assert curve(0.0, c1).value(xi) == pytest.approx(0.5 * (1 - np.tanh(xi * c1 / 2)), abs=1e-14)


@pytest.mark.parametrize("coefficients", SHAPES)
def test_gradient(coefficients):
    xi, c, step = np.linspace(-1.5, 1.5, 7), np.array(coefficients), 1e-6
    value, gradient = EngeCurve(c).on(np.vander(xi, len(c), increasing=True))
    assert value == pytest.approx(EngeCurve(c).value(xi), abs=1e-14)
    for i, unit in enumerate(np.eye(len(c))):
        up, down = (EngeCurve(c + sign * step * unit).value(xi) for sign in (1, -1))
        assert gradient[:, i] == pytest.approx((up - down) / (2 * step), abs=1e-9)


@pytest.mark.parametrize("coefficients", SHAPES)
def test_shift_leaves_the_curve(coefficients):
    xi, step = np.linspace(-2, 2, 11), 0.37
    moved = EngeCurve(EngeCurve(np.array(coefficients)).shifted(step))
    assert moved.value(xi) == pytest.approx(curve(*coefficients).value(xi + step), abs=1e-12)


@pytest.mark.parametrize("coefficients", SHAPES)
def test_boundary_and_integral_against_adaptive_quadrature(coefficients):
    found = curve(*coefficients).canonical()

    def at(xi):
        return float(curve(*coefficients).value(np.array([xi]))[0])

    assert found.boundary == pytest.approx(quad(at, -25, 25, limit=400)[0] - 25, abs=1e-7)
    integral = quad(lambda xi: at(xi) * (1 - at(xi)), -25, 25, limit=400, points=[0])[0]
    assert found.integral == pytest.approx(integral, abs=1e-7)


@pytest.mark.parametrize("coefficients", SHAPES)
def test_canonical_curve_has_its_boundary_at_zero(coefficients):
    once = curve(*coefficients).canonical()
    again = EngeCurve(once.coefficients).canonical()
    assert again.boundary == pytest.approx(0.0, abs=1e-12)
    assert again.integral == pytest.approx(once.integral, abs=1e-12)
    assert again.coefficients == pytest.approx(once.coefficients, abs=1e-10)


@pytest.mark.parametrize("coefficients", SHAPES)
def test_jacobian(coefficients):
    c, step = np.array(coefficients), 1e-6
    jacobian = EngeCurve(c).canonical().jacobian
    for i, unit in enumerate(np.eye(len(c))):
        slope = (told(c + step * unit) - told(c - step * unit)) / (2 * step)
        assert jacobian[:, i] == pytest.approx(slope, abs=2e-8)


@pytest.mark.parametrize(
    ("coefficients", "good"),
    [
        ((0.0, 2.0), True),
        ((0.0, -2.0), False),  # rises outwards
        ((5.0, 0.0, 1.0), False),  # never crosses one half
        ((0.0, 3.0, 0.9), False),  # turns round 1.7 gaps inside, at F = 0.92
        ((0.0, 30.0, 5.0), True),  # turns round 3 gaps inside, where F = 1 to 1e-19
        ((0.0, 2.0, 0.0, -0.1), False),  # comes back outside
    ],
)
def test_what_counts_as_a_fringe(coefficients, good):
    assert curve(*coefficients).is_fringe(-2.0, 4.0) is good


def test_a_curve_that_rises_has_no_boundary():
    with pytest.raises(ValueError, match="falls nowhere"):
        curve(0.0, -1.0).canonical()
