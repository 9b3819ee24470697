"""The recorded frame: what all passes share in their motion, and the way to true positions."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from fieldmap.estimate.bins import bin_pass
from fieldmap.estimate.frame import Frame, common_frame
from fieldmap.estimate.parameters import Nuisance
from fieldmap.estimate.spline import UniformSpline
from fieldmap.readings import Pass
from tests.shop import MAIN, WIRE


def moving(*corners, speed=0.05, rate=100.0, dwell=2.0):
    """Bins of a pass that goes from corner to corner, standing a while at either end."""
    still = int(dwell * rate)
    legs = [
        np.linspace(a, b, int(abs(b - a) / speed * rate), endpoint=False)
        for a, b in pairwise(corners)
    ]
    position = np.concatenate([np.full(still, corners[0]), *legs, np.full(still, corners[-1])])
    time = np.arange(len(position)) / rate
    one = Pass("p", WIRE, MAIN, time, position, np.zeros(len(time)))
    return bin_pass(one, 0.002)


def test_one_way():
    frame = common_frame([moving(-0.2, 0.2)])
    assert frame.speed == pytest.approx(0.05, rel=0.01)
    assert frame.sense == pytest.approx(1.0, abs=0.01)
    back = common_frame([moving(0.2, -0.2)])
    assert (back.speed, back.sense) == (pytest.approx(-0.05, rel=0.01), pytest.approx(-1, abs=0.01))


def test_out_and_back_cancel():
    for bins in ([moving(-0.2, 0.2), moving(0.2, -0.2)], [moving(-0.2, 0.2, -0.2)]):
        frame = common_frame(bins)
        assert frame.speed == pytest.approx(0.0, abs=5e-4)
        assert frame.sense == pytest.approx(0.0, abs=0.01)


def test_dwells_do_not_count():
    short, long = (common_frame([moving(-0.2, 0.2, dwell=d)]) for d in (0.5, 60.0))
    assert long.speed == pytest.approx(short.speed, rel=0.02)


def test_a_probe_that_stands_still():
    assert common_frame([moving(0.1, 0.1)]) == Frame(0.0, 0.0)


def test_effects_of_one_unit():
    frame = Frame(speed=0.04, sense=0.5)
    s = np.array([-0.1, 0.0, 0.2])
    effects = frame.effects(s)
    np.testing.assert_array_equal(effects["offset"], [1.0, 1.0, 1.0])
    np.testing.assert_array_equal(effects["scale"], s)
    np.testing.assert_array_equal(effects["lag"], [0.04] * 3)
    np.testing.assert_array_equal(effects["backlash"], [0.25] * 3)


@pytest.mark.parametrize("kind", ["offset", "scale", "lag", "backlash"])
def test_a_profile_moved_to_true_positions(kind):
    # true(s + shift(s)) = recorded(s)
    frame, spline = Frame(speed=0.05, sense=1.0), UniformSpline.covering(-0.2, 0.2, 0.004)
    unknowns = [Nuisance("drift", "p", 0.0, 1.0), Nuisance(kind, "", 0.0, 1.0)]
    recorded = 0.5 / np.cosh(spline.middles() / 0.03) ** 2
    unit = 2e-4 / np.abs(frame.effects(np.array([0.03]))[kind][0])
    moves = frame.to_true(spline, recorded, unknowns)
    assert not moves[:, 0].any()
    true = recorded + moves[:, 1] * unit
    s = np.linspace(-0.15, 0.15, 61)
    shift = frame.effects(s)[kind] * unit
    there = spline.field_rows(s + shift) @ true
    here = spline.field_rows(s) @ recorded
    moved = np.abs(spline.field_rows(s) @ (true - recorded)).max()
    assert np.abs(there - here).max() < 0.03 * moved


def test_a_gain_moves_nothing():
    spline = UniformSpline.covering(-0.2, 0.2, 0.01)
    moves = Frame(0.05, 1.0).to_true(spline, np.ones(spline.size), [Nuisance("gain", "w", 0, 1.0)])
    assert not moves.any()
