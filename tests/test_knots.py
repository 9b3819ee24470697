"""The choice of knots: as fine as gap and readings ask for, bounded, covering every probe."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.knots import (
    LEAST_KNOTS,
    MOST_KNOTS,
    first_spacing,
    grain,
    knots_for,
    sampling,
)
from fieldmap.readings import Pass
from tests.shop import MAIN, RECT, WIRE, planned


def scan(position, probe=WIRE):
    position = np.asarray(position, float)
    return Pass("p", probe, MAIN, np.arange(len(position)) * 1.0, position, 0 * position)


def test_a_tenth_of_the_gap():
    assert first_spacing(0.03, -0.6, 0.6, 1e-4) == pytest.approx(0.003)


def test_no_finer_than_the_readings():
    assert first_spacing(0.03, -0.6, 0.6, 0.005) == pytest.approx(0.005)


@pytest.mark.parametrize("scale", [1e-3, 1.0, 1e3])
def test_bounded_by_the_line_and_the_same_in_every_unit(scale):
    ends = -0.6 * scale, 0.6 * scale
    assert first_spacing(1e-5 * scale, *ends, 0.0) == pytest.approx(1.2 * scale / MOST_KNOTS)
    assert first_spacing(50 * scale, *ends, 0.0) == pytest.approx(1.2 * scale / LEAST_KNOTS)
    assert first_spacing(0.03 * scale, *ends, 0.0) == pytest.approx(0.003 * scale)


def test_grain_is_the_gap_on_a_line_longer_than_that():
    assert grain(0.03, -0.6, 0.6) == 0.03
    assert grain(3.0, -0.6, 0.6) == 1.2


def test_sampling_is_that_of_the_finest_pass():
    assert sampling([scan([0, 1, 2, 3]), scan([0, 0.5, 1.0])]) == pytest.approx(0.5)
    assert sampling([scan([0, 1, 2]), *planned((0, 1), speed=0.1, rate=10.0)]) == pytest.approx(
        0.01
    )


def test_knots_reach_beyond_all_that_a_probe_sees():
    wide = replace(RECT, window=0.05)
    knots = knots_for([scan([-0.1, 0.0, 0.1]), scan([-0.1, 0.0, 0.1], wide)], -0.1, 0.1, 0.004)
    assert knots.start <= -0.1 - 0.025 - 0.004 + 1e-12
    assert knots.stop >= 0.1 + 0.025 + 0.004 - 1e-12
    assert knots.spacing == 0.004
