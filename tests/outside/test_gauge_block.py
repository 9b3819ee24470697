"""Calibration of an end gauge: JCGM 100:2008, H.1, values of its table H.1.

The contributions (nm): standard 25, comparator 9.7 (from 5.8, 3.9 and 6.7), thermal expansion of
the standard 0, temperature of the bed 0, difference of expansion 2.9, difference of temperature
16.6. Combined: 32 nm; with the second-order term of 11.7 nm: 34 nm (H.1.7; memory).
"""

from __future__ import annotations

import math

import pytest

from fieldmap.magnet.budget import Budget, Contribution

NANO = 1e-9
TABLE = {
    "standard": (25.0, "B"),
    "repeated observations": (5.8, "A"),
    "random effects of the comparator": (3.9, "B"),
    "systematic effects of the comparator": (6.7, "B"),
    "difference of expansion": (2.9, "B"),
    "difference of temperature": (16.6, "B"),
}


def test_combined_uncertainty_of_the_gauge():
    parts = tuple(Contribution(name, "", kind, u * NANO) for name, (u, kind) in TABLE.items())
    gauge = Budget("gauge", 50.000838e-3, "m", parts)
    assert gauge.u / NANO == pytest.approx(32, abs=0.5)
    comparator = math.hypot(5.8, 3.9, 6.7)
    assert comparator == pytest.approx(9.7, abs=0.05)
    assert sum(gauge.share(part) for part in parts) == pytest.approx(1.0)
    assert gauge.by_cause()[0].cause == "standard"
    second = Contribution("second order", "", "B", 11.7 * NANO)
    assert Budget("gauge", 0.05, "m", (*parts, second)).u / NANO == pytest.approx(34, abs=0.5)
