"""Lines in the spectrum of the readings."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.pickup import pickup_findings
from tests.faulty import FAULTY, RECORDS, bench, made, second
from tests.shop import RECT


def hummed(one, amplitude, frequency):
    angle = 2 * np.pi * frequency * one.time
    if one.record == "voltage":
        change = amplitude * 2 * np.pi * frequency * np.cos(angle)
    else:
        change = amplitude * np.sin(angle)
    if one.record == "increments":
        change = np.diff(change, prepend=0.0)
    return made(one, one.samples + change)


@pytest.mark.parametrize("record", ["cumulative", "increments"])
def test_mains_that_folds_into_the_band(record):
    passes = bench(record, RECT)
    assert pickup_findings(passes) == []
    (found,) = pickup_findings(second(passes, lambda one: hummed(one, 1e-6, 60.0)))
    assert (found.code, found.severity, found.where) == ("mains-pickup", "warn", FAULTY)
    assert "60 Hz of the mains sampled at 50 Hz" in found.text
    told = float(found.text.split("amplitude ")[1].split(" V s")[0])
    assert told == pytest.approx(1e-6, rel=0.35)


def test_mains_within_the_band_of_a_voltmeter():
    passes = bench("voltage", RECT, rate=200.0)
    (found,) = pickup_findings(second(passes, lambda one: hummed(one, 1e-6, 50.0)))
    assert "(50 Hz of the mains)" in found.text


def test_a_faint_line_is_a_note():
    passes = bench(probe=RECT, rate=200.0)
    (found,) = pickup_findings(second(passes, lambda one: hummed(one, 3e-8, 70.0)))
    assert found.severity == "note"
    assert "mains)" not in found.text


@pytest.mark.parametrize("record", RECORDS)
def test_noise_has_no_lines(record):
    for seed in range(10):
        assert pickup_findings(bench(record, RECT, seed=seed)) == []


def test_irregular_and_short_passes_are_passed_over():
    one = bench()[1]
    loud = hummed(one, 1e-5, 60.0)
    rng = np.random.default_rng(2)
    time = np.sort(one.time + rng.uniform(-0.005, 0.005, len(one.time)))
    assert pickup_findings([made(one, loud.flux, time=time)]) == []
    assert pickup_findings([made(one, loud.flux, rows=np.arange(100))]) == []
