"""Stretches that passes cover, and where a level can be told."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.errors import RefusedError
from fieldmap.estimate.coverage import check_levels, reach, stretches
from fieldmap.readings import FlipReference, Pass, PointReference, ZeroReference
from tests.shop import MAIN, RECT, ROUND, WIRE, planned


def scan(low, high, probe=RECT, name="p"):
    position = np.linspace(low, high, 5)
    return Pass(name, probe, MAIN, np.arange(5.0), position, 0 * position)


def ends(passes, slack=0.0):
    return [(one.low, one.high) for one in stretches(passes, slack)]


def test_overlapping_passes_make_one_stretch_whatever_their_order():
    passes = [scan(0.5, 1.0), scan(-1.0, 0.1), scan(0.6, 0.0)]
    assert ends(passes) == [(-1.0, 1.0)]
    assert ends(passes[::-1]) == [(-1.0, 1.0)]


def test_slack_bridges_a_small_gap():
    passes = [scan(0.0, 0.4), scan(0.41, 1.0)]
    assert len(ends(passes, 0.005)) == 2
    assert ends(passes, 0.02) == [(0.0, 1.0)]


def test_a_pass_within_another_adds_nothing():
    assert ends([scan(0.0, 1.0), scan(0.2, 0.3)]) == [(0.0, 1.0)]


@given(st.lists(st.tuples(st.floats(-1, 1), st.floats(-1, 1)), min_size=1, max_size=8))
def test_stretches_are_ordered_apart_and_hold_every_pass(travels):
    passes = [scan(*travel) for travel in travels]
    found = stretches(passes, 0.01)
    for left, right in pairwise(found):
        assert left.high + 0.01 < right.low
    assert sum(len(one.passes) for one in found) == len(passes)
    for one in passes:
        low, high = reach(one)
        assert sum(s.low <= low and high <= s.high for s in found) == 1


def test_planned_passes_count_like_measured_ones():
    (one,) = planned((0.4, -0.2))
    assert reach(one) == (-0.2, 0.4)
    assert ends([one, scan(0.3, 0.5)]) == [(-0.2, 0.5)]


@pytest.mark.parametrize(
    "reference",
    [
        PointReference(0.3, 0.5, 1e-5),
        ZeroReference(0.9, 1.5, 1e-5),
        ZeroReference(-1.0, 0.0, 1e-5),
        FlipReference(ROUND, 1.0, 0.3, 1e-6),
    ],
)
def test_a_reference_inside_gives_coil_passes_a_level(reference):
    check_levels(stretches([scan(0.0, 1.0)], 0.0), [reference])


@pytest.mark.parametrize(
    "reference",
    [
        PointReference(1.1, 0.5, 1e-5),
        ZeroReference(1.1, 1.5, 1e-5),
        FlipReference(ROUND, -0.1, 0, 1),
    ],
)
def test_a_reference_outside_does_not(reference):
    with pytest.raises(RefusedError, match="absolute level") as caught:
        check_levels(stretches([scan(0.0, 1.0, name="far.csv")], 0.0), [reference])
    assert caught.value.code == "no-absolute-level"
    assert caught.value.where == "far.csv"


def test_a_wire_that_overlaps_gives_coil_passes_a_level():
    check_levels(stretches([scan(0.0, 1.0), scan(0.9, 2.0, WIRE)], 0.0), [])


def test_a_hole_in_the_line_is_named():
    with pytest.raises(RefusedError, match="400 mm and 500 mm") as caught:
        check_levels(stretches([scan(0.0, 0.4, WIRE, "a"), scan(0.5, 1.0, WIRE, "b")], 0.0), [])
    assert (caught.value.code, caught.value.where) == ("passes-do-not-meet", "a and b")
