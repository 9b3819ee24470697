"""Fringe integrals: exact quadrature of a spline, gradients, uncertainties."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad

from fieldmap.magnet.fringe.integral import fringe_integral_results
from fieldmap.magnet.length import length_results
from fieldmap.readings import Axis
from tests.profiles import line_through, smooth_noise

GAP = 0.03
AXIS = Axis("z", (-0.283, 0.271), (-0.031, 0.052))


def edge(s):
    """Unequal ends, no symmetry."""
    return 0.4 / (1 + np.exp(-(s + 0.1) / 0.008)) / (1 + np.exp((s - 0.12) / 0.015))


def results(line, axis=AXIS, gap=GAP):
    return fringe_integral_results(line, axis, gap, length_results(line, axis))


def test_quadrature_is_exact_for_a_spline():
    line = line_through(edge, -0.3, 0.3, 0.0123)
    found = results(line)
    level = line.integral(*AXIS.flat)[0] / 0.083
    knots = line.spline.start + line.spline.spacing * np.arange(line.spline.size - 2)
    for key, (low, high) in {"in": (-0.283, 0.0105), "out": (0.0105, 0.271)}.items():

        def integrand(s):
            b = float(line.field(np.array([s]))[0])
            return b * (level - b) / (GAP * level**2)

        borders = [low, *knots[(knots > low) & (knots < high)], high]
        expected = sum(quad(integrand, *piece)[0] for piece in pairwise(borders))
        assert found[f"fringe_integral_{key}"].value == pytest.approx(expected, rel=1e-12)


def test_gradient_is_the_derivative():
    line = line_through(edge, -0.3, 0.3, 0.01)
    rng = np.random.default_rng(2)
    step = 1e-5 * rng.normal(size=line.spline.size)
    found = results(line)
    up, down = (results(replace(line, b=line.b + sign * step)) for sign in (1, -1))
    for key, one in found.items():
        change = (up[key].value - down[key].value) / 2
        assert one.gradient @ step == pytest.approx(change, rel=1e-6), key


def test_uncertainty_is_that_of_drawn_profiles():
    line = line_through(edge, -0.3, 0.3, 0.01)
    root = smooth_noise(line.spline.size, 3e-4)
    line = replace(line, covariance=root @ root.T)
    rng = np.random.default_rng(3)
    drawn = [
        results(replace(line, b=line.b + root @ rng.normal(size=line.spline.size)))
        for _ in range(1000)
    ]
    for key, one in results(line).items():
        spread = np.std([each[key].value for each in drawn])
        assert one.u == pytest.approx(spread, rel=0.1), key
        assert one.unit == "1"


def test_a_gain_cancels_and_the_sign_does_not_matter():
    line = line_through(edge, -0.3, 0.3, 0.01)
    line = replace(line, covariance=1e-6 * np.outer(line.b, line.b))
    found, turned = results(line), results(replace(line, b=-line.b))
    for key, one in found.items():
        assert one.u < 1e-9 * one.value
        assert turned[key].value == pytest.approx(one.value, rel=1e-12)


def test_gap_is_the_unit_of_length():
    line = line_through(edge, -0.3, 0.3, 0.01)
    narrow, wide = results(line), results(line, gap=2 * GAP)
    for key, one in narrow.items():
        assert wide[key].value == pytest.approx(one.value / 2, rel=1e-12)


def test_limits_half_a_knot_beyond_the_map():
    line = line_through(edge, -0.3, 0.3, 0.01)
    beyond = results(line, Axis("z", (-0.304, 0.304), AXIS.flat))
    within = results(line, Axis("z", (-0.3, 0.3), AXIS.flat))
    for key, one in within.items():
        assert beyond[key].value == pytest.approx(one.value, abs=1e-5)


def test_none_without_a_central_field():
    line = line_through(lambda s: 0 * s + 1e-6, -0.3, 0.3, 0.01, 1e-8 * np.eye(63))
    assert results(line) == {}
