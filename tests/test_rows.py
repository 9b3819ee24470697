"""Rows that stand twice or out of order."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.rows import row_findings
from tests.faulty import RECORDS, bench, even, made

pytestmark = pytest.mark.parametrize("record", RECORDS)


def reordered(one, rows):
    return made(one, time=even(one, len(rows)), rows=rows)


def test_sound_passes(record):
    for one in bench(record):
        assert row_findings(one) == []


def test_a_row_that_stands_twice(record):
    one = bench(record)[1]
    (found,) = row_findings(reordered(one, np.r_[0:200, 199, 200 : len(one.time)]))
    assert (found.code, found.severity) == ("rows-repeated", "warn")
    assert "1 row is identical" in found.text
    assert "4 s (6" in found.text


def test_a_block_that_stands_twice(record):
    one = bench(record)[1]
    (found,) = row_findings(reordered(one, np.r_[0:200, 150 : len(one.time)]))
    assert (found.code, found.severity) == ("rows-repeated", "warn")
    assert "50 rows later" in found.text


def test_rows_that_are_exchanged(record):
    one = bench(record)[1]
    (found,) = row_findings(reordered(one, np.r_[0:200, 201, 200, 202 : len(one.time)]))
    assert (found.code, found.severity) == ("rows-out-of-order", "warn")
    assert "1 mm" in found.text or "1.0" in found.text


def test_a_single_wrong_position_is_no_exchange(record):
    one = bench(record)[1]
    position = one.position.copy()
    position[230] += 3e-3
    assert row_findings(made(one, position=position)) == []
