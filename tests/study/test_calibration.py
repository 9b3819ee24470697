"""The calibration study as a test: the whole of it, or a sample with the sample's own scatter."""

from __future__ import annotations

import os

import numpy as np
import pytest

from tests.study.calibration import figures, run, table

SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
EACH = 6 if SAMPLE else 100
COILS = ("rectangular", "round")


@pytest.fixture(scope="module")
def outcomes():
    found = run(EACH)
    print("\n" + table(found))
    return found


@pytest.mark.slow
def test_stated_uncertainties_are_true(outcomes):
    found = figures(outcomes)
    scatter = 3 / np.sqrt(2 * found.count) if SAMPLE else 0.0
    for name, rms in found.rms.items():
        assert 0.9 - scatter < rms < 1.1 + scatter, f"{name}: rms of error/u {rms:.3f}"


@pytest.mark.slow
def test_intervals_cover(outcomes):
    found = figures(outcomes)
    scatter = 3 * np.sqrt(0.95 * 0.05 / found.count) if SAMPLE else 0.0
    for name, share in found.coverage.items():
        assert abs(share - 0.95) < 0.015 + scatter, f"{name}: covered {share:.1%}"


@pytest.mark.slow
def test_scripts_are_worse(outcomes):
    coil = figures([one for one in outcomes if one.kind.startswith(COILS)])
    mixed = figures([one for one in outcomes if one.kind.startswith("mixed")])
    assert min(coil.careful.values()) > 1.3
    assert mixed.plain["integrated_field"] > 10
    assert mixed.plain["magnetic_length"] > 10
    for kind in {one.kind for one in outcomes}:
        own = figures([one for one in outcomes if one.kind == kind])
        scatter = 3 / np.sqrt(own.count) if SAMPLE else 0.0  # of a ratio of two rms
        assert min(own.careful.values()) > 0.95 * (1 - scatter), kind
