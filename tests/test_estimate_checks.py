"""What a campaign must satisfy before it is fitted."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.checks import (
    check_reach,
    check_references,
    check_spacing,
    check_time_and_travel,
    prepared,
)
from fieldmap.readings import Campaign, FlipReference, Pass, PointReference, ZeroReference
from tests.shop import AXIS, MAGNET, MAIN, RECT, ROUND, WIRE


def scan(name="p", probe=WIRE, time=(0.0, 1.0, 2.0), position=(0.0, 0.1, 0.2)):
    return Pass(name, probe, MAIN, np.array(time), np.array(position), np.zeros(3))


def campaign(*passes, **more):
    return Campaign("shop", MAGNET, AXIS, passes=passes, **more)


def test_a_sound_campaign_passes_as_it_is():
    given = campaign(scan("a"), scan("b", RECT))
    assert prepared(given).passes == given.passes


def test_passes_of_one_name_are_numbered():
    names = [one.name for one in prepared(campaign(scan(), scan("q"), scan())).passes]
    assert names == ["p (1)", "q", "p (2)"]


def test_nothing_measured():
    with pytest.raises(RefusedError) as caught:
        prepared(campaign())
    assert caught.value.code == "nothing-measured"


def test_two_probes_under_one_name():
    other = replace(WIRE, active_length=0.06)
    with pytest.raises(InputError, match="'wire'"):
        prepared(campaign(scan("a"), scan("b", other)))


@pytest.mark.parametrize("gap", [0.0, -1.0, np.nan, np.inf])
def test_a_gap_that_is_no_length(gap):
    with pytest.raises(InputError, match="gap"):
        prepared(replace(campaign(scan()), magnet=replace(MAGNET, gap=gap)))


def test_spacing():
    for good in (None, 1e-4, 0.1):
        check_spacing(good, -0.2, 0.2)
    for bad in (0.0, -0.1, np.nan, np.inf, 0.11, 1e-6):
        with pytest.raises(InputError, match="knot_spacing"):
            check_spacing(bad, -0.2, 0.2)


def test_time_and_travel():
    check_time_and_travel([scan()], 0.0, 0.2)
    with pytest.raises(RefusedError, match="standing at 100 mm"):
        check_time_and_travel([scan(position=(0.1, 0.1, 0.1))], 0.1, 0.1)
    with pytest.raises(InputError, match=r"late: found one time stamp, 5 s"):
        check_time_and_travel([scan(), scan("late", time=(5.0, 5.0, 5.0))], 0.0, 0.2)


GAP = 0.03


def test_positions_out_of_all_proportion():
    near, far = scan("near"), scan("far", position=(0.0, 100.0, 200.0))
    check_reach([near, scan("longer", position=(-0.3, 0.0, 0.6))], (0.05, 0.15), GAP)
    check_reach([scan(position=(0.0, 0.3, 0.6))], (0.0, 0.2), GAP)
    wide = [scan("a", position=(-8.0, 0.0, 8.0)), scan("b", position=(8.0, 0.0, -8.0))]
    with pytest.raises(RefusedError, match="a, b: found positions from -8000 to 8000 mm"):
        check_reach(wide, (-0.4, 0.4), GAP)
    check_reach(wide, (-0.9, 0.9), GAP)
    check_reach(wide, (-0.4, 0.4), 0.1)
    for passes in ([near, far], [far]):
        with pytest.raises(
            RefusedError, match=r"far: found positions from 0 to 200000 mm"
        ) as caught:
            check_reach(passes, (0.0, 0.2), 10.0)
        assert caught.value.code == "positions-out-of-proportion"


def checked(reference, number=3, low=-0.2, high=0.2, slack=1e-3):
    (found,) = check_references([(number, reference)], low, high, slack)
    return found


@pytest.mark.parametrize(
    "reference",
    [
        PointReference(-0.2, 0.0, 1e-5),
        PointReference(0.2005, 0.0, 1e-5),  # the end, to the encoder's noise
        FlipReference(ROUND, 0.1, 0.3, 1e-6),
        ZeroReference(0.18, 0.2, 5e-6),
    ],
)
def test_good_references_pass_as_they_are(reference):
    assert checked(reference) == reference


def test_a_zero_stretch_is_cut_to_the_map():
    assert checked(ZeroReference(0.18, 5.0, 5e-6)) == ZeroReference(0.18, 0.2, 5e-6)
    assert checked(ZeroReference(-1.0, 1.0, 5e-6)) == ZeroReference(-0.2, 0.2, 5e-6)


@pytest.mark.parametrize(
    ("reference", "words"),
    [
        (PointReference(0.21, 0.0, 1e-5), "at = 210 mm"),
        (FlipReference(ROUND, -0.21, 0.0, 1e-6), "at = -210 mm"),
        (ZeroReference(0.2, 0.3, 5e-6), "200 to 300 mm"),
        (ZeroReference(0.19, 0.18, 5e-6), "190 to 180 mm"),
        (PointReference(0.0, 0.0, 0.0), "standard uncertainty of 0"),
        (PointReference(0.0, 0.0, np.nan), "standard uncertainty of nan"),
        (PointReference(0.0, np.inf, 1e-5), "inf"),
        (PointReference(np.nan, 0.0, 1e-5), "nan"),
        (FlipReference(ROUND, 0.0, np.nan, 1e-6), "nan"),
        (ZeroReference(np.nan, 0.2, 1e-6), "nan"),
    ],
)
def test_bad_references_are_named_by_their_number_in_the_file(reference, words):
    with pytest.raises(InputError, match=words) as caught:
        checked(reference)
    assert str(caught.value).startswith("[[references]] 3: ")
