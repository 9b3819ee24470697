"""The study of tails as a test: on a sample, or the whole of it."""

from __future__ import annotations

import os

import numpy as np
import pytest

from tests.study.tails import RESULTS, figures, run, table

SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
EACH = 5 if SAMPLE else 100


@pytest.fixture(scope="module")
def outcomes():
    found = run(EACH)
    print("\n" + table(found))
    return found


@pytest.mark.slow
@pytest.mark.parametrize("result", RESULTS)
def test_intervals_cover(outcomes, result):
    found = figures(outcomes, result)
    scatter = 3 * np.sqrt(0.95 * 0.05 / found.given)
    assert found.coverage > 0.95 - (scatter if SAMPLE else scatter / 3)
    assert found.rms < 1.1 + (3 / np.sqrt(2 * found.given) if SAMPLE else 0.0)


@pytest.mark.slow
def test_uncertainties_of_tails_say_something(outcomes):
    # a bound may be wide, but not so wide that nothing ever comes near it
    assert figures(outcomes, "tail_in").rms > 0.4


@pytest.mark.slow
def test_few_magnets_are_refused(outcomes):
    # open permanent-magnet slots are, whose return field is at its largest where the map ends
    for result in RESULTS:
        found = figures([one for one in outcomes if one.magnet != "Slot"], result)
        assert found.given > 0.97 * found.count
