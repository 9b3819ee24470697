"""The study of fringes as a test: the whole of it, or a sample with the sample's own scatter."""

from __future__ import annotations

import os

import numpy as np
import pytest

from tests.study.fringes import SCALARS, figures, run, table

SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
EACH = 2 if SAMPLE else 12


@pytest.fixture(scope="module")
def outcomes():
    found = run(EACH)
    print("\n" + table(found))
    return found


@pytest.mark.slow
def test_stated_uncertainties_are_true(outcomes):
    found = figures(outcomes)
    scatter = 3 / np.sqrt(len(outcomes))  # the two ends of a campaign share its errors
    for name in (*SCALARS, "coefficients", "difference", "difference of shape"):
        assert 0.85 - scatter < found[name] < 1.1 + scatter, name


@pytest.mark.slow
def test_intervals_cover(outcomes):
    found = figures(outcomes)
    scatter = 3 * np.sqrt(0.95 * 0.05 / (len(outcomes) / 2))
    for name in SCALARS:
        assert abs(found[f"{name} covered"] - 0.95) < 0.015 + scatter, name


@pytest.mark.slow
def test_true_shapes_are_explained_and_their_order_found(outcomes):
    found = figures(outcomes)
    assert 0.9 < found["misfit"] < 1.2
    assert found["order found"] > 0.9
