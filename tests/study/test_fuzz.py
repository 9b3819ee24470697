"""A sample of the fuzzing study: thousands of spoilt inputs do no harm."""

from __future__ import annotations

import os

import pytest

from tests.study.fuzz import chosen, run, table

SAMPLE = 400


@pytest.mark.slow
def test_a_sample_does_no_harm():
    tally = run(SAMPLE, seed=20_261, workers=min(2, os.cpu_count() or 1))
    counts = {kind: sum(own.values()) for kind, own in tally.outcomes.items()}
    assert sum(counts.values()) == SAMPLE
    assert tally.harm == []
    assert sum(own["accepted"] for own in tally.outcomes.values()) > SAMPLE / 10
    assert sum(own["refused"] for own in tally.outcomes.values()) > SAMPLE / 3
    assert f"| all | {SAMPLE} |" in table(tally)


def test_an_input_is_the_same_again():
    one, other = chosen(3, 17), chosen(3, 17)
    assert one[0] == other[0]
    assert one[1].bytes(9) == other[1].bytes(9)
