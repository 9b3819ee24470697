"""Steps between readings and their surroundings."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.places import many, place
from fieldmap.estimate.findings.steps import around, steps_of
from tests.faulty import bench, made


def test_the_middle_of_four_others():
    values = np.array([1.0, 2.0, 50.0, 4.0, 3.0, 9.0, 7.0])
    assert around(values)[2] == pytest.approx(2.5)  # of 1, 2, 4, 3
    assert around(values)[3] == pytest.approx(6.0)  # of 2, 50, 3, 9
    assert around(np.ones(3)).tolist() == [0.0, 0.0, 0.0]


def test_a_pass_stands_and_travels():
    one = bench()[0]
    steps = steps_of(one)
    assert steps.regular == 1.0
    assert not steps.moving[:40].any()
    assert steps.moving[100:400].all()
    assert steps.count == pytest.approx(1e-9, rel=1e-3)
    assert not steps_of(made(one, position=np.zeros(len(one.time)))).moving.any()
    assert not steps_of(made(one, rows=np.arange(4))).moving.any()


def test_places_and_counts_in_words():
    assert place(bench()[0], 251) == "5.02 s (-9 mm)"
    assert many(1, "gap") == "1 gap"
    assert many(2, "row is", "rows are") == "2 rows are"
