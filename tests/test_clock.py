"""Clocks that jump and readings that were lost."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.clock import clock_findings
from tests.faulty import RECORDS, bench, made
from tests.shop import RECT


@pytest.mark.parametrize("record", RECORDS)
def test_sound_passes(record):
    for one in bench(record):
        assert clock_findings(one) == []


@pytest.mark.parametrize("jump", [0.03, 1.0, 100.0])
def test_a_clock_that_jumps(jump):
    one = bench()[1]
    time = one.time.copy()
    time[200:] += jump
    (found,) = clock_findings(made(one, time=time))
    assert (found.code, found.severity) == ("clock-jump", "warn")
    assert f"{jump + 0.02:.4g} s at 3.98 s (61 mm)" in found.text


def test_a_clock_that_stands_still_for_a_while():
    one = bench()[1]
    time = one.time.copy()
    time[200:210] = time[200]
    (found,) = clock_findings(made(one, time=time))
    assert found.code == "clock-jump"
    assert "such steps in this pass" in found.text


@pytest.mark.parametrize("record", RECORDS)
def test_lost_readings_hurt_sums_alone(record):
    one = bench(record, RECT)[1]
    found = clock_findings(made(one, rows=np.delete(np.arange(len(one.time)), [190, 191, 192])))
    assert [finding.code for finding in found] == ["readings-lost"]
    assert "3 readings missing in 1 gap" in found[0].text
    assert "3.78 s (7" in found[0].text
    if record == "cumulative":
        assert found[0].severity == "note"
        assert found[0].correction is None
    else:
        assert found[0].severity == "warn"
        assert found[0].correction is not None
        assert (found[0].correction.kind, found[0].correction.start) == ("step", one.time[193])


def test_an_increment_that_spans_a_gap_has_its_flux():
    one = bench("increments", RECT)[1]
    samples = one.samples.copy()
    samples[193] += samples[190:193].sum()
    rows = np.delete(np.arange(len(one.time)), [190, 191, 192])
    (found,) = clock_findings(made(one, samples, rows=rows))
    assert (found.code, found.severity) == ("readings-lost", "note")


def test_a_pause_in_a_dwell_is_a_note():
    one = bench()[1]
    (found,) = clock_findings(made(one, rows=np.delete(np.arange(len(one.time)), [20, 21])))
    assert (found.code, found.severity) == ("readings-lost", "note")
    assert "while the probe stood" in found.text


def test_irregular_sampling_is_not_judged():
    rng = np.random.default_rng(1)
    one = bench()[0]
    time = np.cumsum(rng.exponential(0.02, len(one.time)))
    assert clock_findings(made(one, time=time)) == []
