"""A straight line with uncertainty, and with a systematic error that all readings share.

Source: JCGM 100:2008 (GUM), annex H.3: calibration of a thermometer; H.3.6 adds a common
offset of the reference thermometers.
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.model import Information
from fieldmap.estimate.normal import NormalSystem

T = np.array(
    [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
)
CORRECTION = -1e-3 * np.array([171, 169, 166, 159, 164, 165, 156, 157, 159, 161, 160.0])
T0 = 20.0


def information(design, y, sd):
    """What some readings of equal standard deviation say."""
    white, goal = design / sd, y / sd
    return Information(white.T @ white, white.T @ goal)


def prior(place, size, sd):
    """What is known of one unknown: zero within sd."""
    row = np.zeros((1, size))
    row[0, place] = 1.0
    return information(row, np.zeros(1), sd)


@pytest.fixture(scope="module")
def line():
    design = np.column_stack([np.ones(len(T)), T - T0])
    rest = CORRECTION - design @ np.linalg.lstsq(design, CORRECTION, rcond=None)[0]
    s = np.sqrt(rest @ rest / (len(T) - 2))
    return design, s


def test_residual_deviation(line):
    assert line[1] == pytest.approx(0.0035, abs=5e-5)  # H.3: s = 0.0035 °C


def test_intercept_slope_and_correlation(line):
    design, s = line
    data = information(design, CORRECTION, s)
    system = NormalSystem(data.matrix)
    y1, y2 = system.solve(data.right)
    covariance = system.inverse()
    u1, u2 = np.sqrt(np.diag(covariance))
    # H.3: y1 = -0.1712 (0.0029) °C, y2 = 0.00218 (0.00067), r(y1, y2) = -0.930
    assert y1 == pytest.approx(-0.1712, abs=5e-5)
    assert u1 == pytest.approx(0.0029, abs=5e-5)
    assert y2 == pytest.approx(0.00218, abs=5e-6)
    assert u2 == pytest.approx(0.00067, abs=5e-6)
    assert covariance[0, 1] / (u1 * u2) == pytest.approx(-0.930, abs=5e-4)
    # H.3: b(30 °C) = -0.1494 °C, u = 0.0041 °C
    row = np.array([1.0, 30.0 - T0])
    assert row @ [y1, y2] == pytest.approx(-0.1494, abs=5e-5)
    assert np.sqrt(row @ covariance @ row) == pytest.approx(0.0041, abs=5e-5)


def test_another_reference_temperature_makes_them_uncorrelated(line):
    # H.3.5: with t0 = 24.0085 °C the covariance vanishes, u(y1') = 0.0011 °C
    _, s = line
    design = np.column_stack([np.ones(len(T)), T - T.mean()])
    assert T.mean() == pytest.approx(24.0085, abs=5e-5)
    covariance = NormalSystem(information(design, CORRECTION, s).matrix).inverse()
    assert abs(covariance[0, 1]) < 1e-12
    assert np.sqrt(covariance[0, 0]) == pytest.approx(0.0011, abs=5e-5)


def test_a_systematic_error_that_all_readings_share(line):
    # H.3.6: every correction carries the same unknown offset, u = 0.005 °C. It is a third
    # unknown that the readings alone cannot tell from the intercept.
    design, s = line
    shared = np.column_stack([design, np.ones(len(T))])
    data = information(shared, CORRECTION, s)
    with pytest.raises(np.linalg.LinAlgError):
        NormalSystem(data.matrix)
    both = data + prior(2, 3, 0.005)
    system = NormalSystem(both.matrix)
    y1, y2, offset = system.solve(both.right)
    covariance = system.inverse()
    u = np.sqrt(np.diag(covariance))
    # u(y1)² = 0.0029² + 0.005² with the digits of s kept: 0.0057689 °C (design figure)
    assert u[0] == pytest.approx(0.0057689, abs=5e-7)
    assert u[1] == pytest.approx(0.00067, abs=5e-6)  # the slope does not know of it
    assert u[2] == pytest.approx(0.005, rel=1e-9)  # and the readings say nothing on the offset
    assert (y1, y2) == pytest.approx((-0.1712, 0.00218), abs=5e-5)
    assert offset == pytest.approx(0.0, abs=1e-9)


def test_the_difference_of_two_corrections_is_free_of_it(line):
    design, s = line
    shared = np.column_stack([design, np.ones(len(T))])
    both = information(shared, CORRECTION, s) + prior(2, 3, 0.005)
    covariance = NormalSystem(both.matrix).inverse()
    plain = NormalSystem(information(design, CORRECTION, s).matrix).inverse()
    row = np.array([0.0, 5.0, 0.0])
    assert row @ covariance @ row == pytest.approx(row[:2] @ plain @ row[:2], rel=1e-9)
