"""Temperature and current that moved."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldmap.estimate.findings.surroundings import surroundings_findings
from tests.faulty import bench


def warmed(*degrees, coefficient=0.0):
    passes = []
    for one, warm in zip(bench(), degrees, strict=True):
        probe = replace(one.probe, temperature_coefficient=coefficient)
        noise = 0.1 * np.random.default_rng(0).normal(size=len(one.time))
        passes.append(replace(one, probe=probe, temperature=warm + noise))
    return passes


def driven(*amperes):
    return [
        replace(one, current=np.linspace(*ends, len(one.time)))
        for one, ends in zip(bench(), amperes, strict=True)
    ]


def test_temperature_without_a_coefficient():
    assert surroundings_findings(warmed(20.0, 22.0)) == []
    (found,) = surroundings_findings(warmed(20.0, 40.0))
    assert (found.code, found.severity) == ("temperature-moved", "warn")
    assert "20 K between pass_01.csv and pass_02.csv" in found.text
    assert "6.8e-04" in found.text
    assert surroundings_findings(warmed(20.0, 40.0, coefficient=3.4e-5)) == []


def test_current_with_and_without_a_nominal_one():
    steady, moved = driven((85.0, 85.0), (85.0, 85.0)), driven((85.0, 85.0), (85.0, 85.1))
    assert surroundings_findings(steady, 85.0) == []
    assert surroundings_findings(moved, 85.0) == []  # in proportion, as good as any
    (found,) = surroundings_findings(moved)
    assert (found.code, found.severity) == ("current-moved", "warn")
    assert "state the current" in found.text
    (found,) = surroundings_findings(driven((85.0, 85.0), (85.0, 86.0)), 85.0)
    assert "saturated iron" in found.text


def test_nothing_recorded_and_no_current_at_all():
    assert surroundings_findings(bench()) == []
    assert surroundings_findings(driven((0.0, 0.0), (0.0, 0.0))) == []
