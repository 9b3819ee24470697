"""Remarks on tails: when they matter, what is said, and where to travel."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import Plates, Solenoid, TanhMagnet, Uniform
from fieldmap.magnet.functionals import line_functionals
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.tails.findings import required_uncertainty, tail_findings
from fieldmap.readings import Axis, Limit
from tests.profiles import line_through

SOLENOID = Solenoid(0.1, 0.4, turns=500, current=10.0)
AXIS = Axis("z", (-0.5, 0.7), (-0.02, 0.02))
TOTAL = SOLENOID.total


def remarks(line, axis=AXIS, limits=(), gap=0.2):
    return tail_findings(line, axis, gap, line_functionals(line, axis, gap), limits)


@pytest.fixture(scope="module")
def line():
    found = line_through(SOLENOID.field, -0.5, 0.7, 0.01)
    return replace(found, covariance=(1e-7) ** 2 * np.eye(found.spline.size))


def test_a_tail_that_no_limit_asks_for_is_a_note(line):
    lower, upper = remarks(line)
    assert {lower.code, upper.code} == {"tail-cut-off"}
    assert {lower.severity, upper.severity} == {"note"}
    assert (lower.where, "lower limit" in lower.text) == ("[axis] integrate", True)
    assert "upper limit" in upper.text
    # mu0 N I times 1.14 % is 7.16e-5 T m; the law errs by 2.5 % of that
    assert "about 7.34e-05 T m (U = 8e-06 T m), 1.19% of the integral" in lower.text
    assert "integrated_field_total includes it" in lower.text


def test_a_tail_beyond_a_tolerance_is_a_warning(line):
    integral = TOTAL * 0.98
    tight = [Limit("integrated_field", integral - 1e-5, integral + 1e-5)]
    lower, upper = remarks(line, limits=tight)
    assert {lower.severity, upper.severity} == {"warn"}
    assert "a quarter of the tolerance (2.5e-06 T m)" in lower.text
    wide = [Limit("integrated_field", integral - 1e-3, integral + 1e-3)]
    assert remarks(line, limits=wide) == []


def test_the_travel_named_is_far_enough_and_not_much_farther(line):
    half = 8e-6
    limits = [Limit("integrated_field_total", TOTAL - half, TOTAL + half)]
    lower, upper = remarks(line, limits=limits)
    at = [float(re.search(r"scan to about (-?\d+) mm", one.text)[1]) for one in (lower, upper)]
    assert at[0] < -500
    assert at[1] > 700
    for reach, sign in zip(at, (-1, 1), strict=True):
        there = line_through(SOLENOID.field, -abs(reach) / 1e3, abs(reach) / 1e3, 0.01)
        axis = Axis("z", (-abs(reach) / 1e3, abs(reach) / 1e3), AXIS.flat)
        found = line_functionals(there, axis, 0.2)["tail_in" if sign < 0 else "tail_out"]
        assert 0.3 < 2 * found.u / (half / 4) < 1.1


def test_a_tail_known_well_enough_says_so(line):
    half = 4 * 4e-5  # between the tail and its uncertainty
    (lower,) = remarks(line, limits=[Limit("integrated_field", TOTAL - half, TOTAL + half)])
    assert "small enough, so use the total" in lower.text


def test_a_tail_within_its_uncertainty_is_not_remarked():
    line = line_through(TanhMagnet(0.5, 0.3, 0.02).field, -0.4, 0.4, 0.005)
    line = replace(line, covariance=1e-10 * np.eye(line.spline.size))
    assert remarks(line, Axis("z", (-0.4, 0.4), (-0.02, 0.02)), gap=0.03) == []


@pytest.mark.parametrize(
    ("source", "share", "how"),
    [
        (Plates(0.5, 0.03).shifted(0.2), "1.92%", "falls only as the power 1.0"),
        (TanhMagnet(0.5, 0.3, 0.02) + Uniform(50e-6), "0.01%", "falls only as the power"),
        (TanhMagnet(0.5, 1.2, 0.02), "100.00%", "is that of the inside yet"),
    ],
)
def test_an_end_without_a_tail(source, share, how):
    line = line_through(source.field, -0.5, 0.5, 0.005)
    finding = remarks(line, Axis("z", (-0.5, 0.5), (-0.02, 0.02)), gap=0.03)[-1]
    assert (finding.code, finding.severity) == ("tail-not-converging", "warn")
    for words in ("at 500 mm", share, how, "tail_out and integrated_field_total are not given"):
        assert words in finding.text, finding.text
    assert "scan further out" in finding.text


def test_a_given_tail_is_not_remarked_for_its_law():
    line = line_through(Plates(0.5, 0.03).shifted(0.2).field, -0.5, 0.5, 0.005)
    axis = Axis("z", (-0.5, 0.5), (-0.02, 0.02), 0.0, 1e-9, 1e-3, 1e-3)
    assert remarks(line, axis, gap=0.03) == []


def test_no_remark_without_a_central_field():
    line = line_through(lambda s: 0 * s + 1e-6, -0.5, 0.7, 0.01, 1e-8 * np.eye(123))
    assert remarks(line) == []


def test_the_narrowest_limit_counts():
    results = {
        "integrated_field": Quantity(0.2, 1e-5, "T m"),
        "magnetic_length": Quantity(0.4, 1e-5, "m"),
    }
    one_sided = Limit("integrated_field", 0.1, None)
    assert required_uncertainty(results, [one_sided]) == (2e-5, False)
    total = Limit("integrated_field_total", 0.199, 0.201)
    assert required_uncertainty(results, [one_sided, total]) == (2.5e-4, True)
    length = Limit("magnetic_length", 0.3992, 0.4008)  # 0.2 %
    assert required_uncertainty(results, [total, length]) == (1e-4, True)
    other = Limit("central_field", 0.49999, 0.50001)
    assert required_uncertainty(results, [other]) == (2e-5, False)
