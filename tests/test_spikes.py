"""Spikes: left out of running totals with a word, offered as steps where they displace the rest."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.findings.spikes import spike_findings, without_spikes
from tests.faulty import FAULTY, RECORDS, bench, coarse, made, second
from tests.shop import RECT, ROUND, WIRE

PROBES = [WIRE, RECT, ROUND]
SIZE = {"cumulative": 1e-4, "increments": 1e-4, "voltage": 5e-3}


def spoilt(one, rows, size):
    samples = one.samples.copy()
    samples[rows] += size
    return made(one, samples)


@pytest.mark.parametrize("record", RECORDS)
@pytest.mark.parametrize("probe", PROBES, ids=lambda probe: probe.name)
def test_a_spike_is_named_with_its_place(record, probe):
    passes = bench(record, probe)
    assert spike_findings(passes) == []
    (found,) = spike_findings(second(passes, lambda one: spoilt(one, 251, SIZE[record])))
    assert (found.code, found.severity, found.where) == ("spikes", "warn", FAULTY)
    assert "5.02 s (9" in found.text
    if record == "cumulative":
        assert "1 isolated reading" in found.text
        assert found.correction is None
    else:
        assert found.correction is not None
        assert found.correction.kind == "step"
        assert found.correction.start == pytest.approx(5.02)


def test_isolated_spikes_are_left_out_and_nothing_else():
    passes = bench()
    rows = [40, 251, 252, 400]
    faulty = second(passes, lambda one: spoilt(one, rows, 1e-4))
    faulty[1] = replace(faulty[1], temperature=np.arange(float(len(faulty[1].time))))
    clean, mended = without_spikes(faulty)
    assert clean is faulty[0]
    keep = np.delete(np.arange(len(faulty[1].time)), rows)
    for name in ("time", "position", "flux", "temperature"):
        np.testing.assert_array_equal(getattr(mended, name), getattr(faulty[1], name)[keep])
    assert len(faulty[1].time) == len(passes[1].time)  # the pass itself stays whole
    (found,) = spike_findings(faulty)
    assert "4 isolated readings" in found.text


def test_a_burst_is_kept_and_offered():
    faulty = second(bench(), lambda one: spoilt(one, slice(30, 34), 1e-4))
    assert without_spikes(faulty)[1] is faulty[1]
    (found,) = spike_findings(faulty)
    assert "4 readings in a row" in found.text
    offered = found.correction
    assert offered is not None
    assert (offered.kind, offered.start, offered.stop) == ("spikes", 0.6, 0.66)


@pytest.mark.parametrize("record", ["increments", "voltage"])
def test_sums_keep_all_their_readings(record):
    faulty = second(bench(record), lambda one: spoilt(one, 251, SIZE[record]))
    assert without_spikes(faulty)[1] is faulty[1]


def test_a_step_in_flux_is_no_spike():
    assert spike_findings(second(bench(), lambda one: spoilt(one, slice(250, None), 1e-4))) == []


@pytest.mark.parametrize("step", [1e-8, 1e-6, 1e-4])
def test_coarse_records_are_not_spiky(step):
    assert spike_findings([coarse(one, step) for one in bench()]) == []


def test_a_probe_that_stands_in_a_slope_shows_its_jitter():
    for seed in range(5):
        passes = bench(probe=RECT, seed=seed, rate=20.0, travels=((-0.2, -0.05), (0.05, -0.05)))
        assert spike_findings(passes) == []
