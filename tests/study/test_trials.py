"""Trials of the whole chain confirm what the kit states of the demo magnets, and can fail to."""

from __future__ import annotations

import os
from dataclasses import replace

import pytest

import fieldmap
from fieldmap.bench.trials import confirm
from fieldmap.magnet.quantity import Quantity
from fieldmap.shipped import demo_folder
from fieldmap.show.confirmation import confirmation_text

SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
TRIALS = 40 if SAMPLE else 60
# homogeneity is left out: the largest less the smallest of a noisy profile is too large in the
# mean, and the trials say so; the tail's u holds the doubt about its law, which no trial shows
RESULTS = (
    "integrated_field",
    "central_field",
    "magnetic_length",
    "boundary_in",
    "boundary_out",
    "magnetic_centre",
    "peak_field",
)


@pytest.fixture(
    scope="module", params=["gap_dipole"] if SAMPLE else ["gap_dipole", "solenoid_fringe"]
)
def reduced(request):
    campaign = replace(fieldmap.load(demo_folder() / request.param), limits=())
    fmap = fieldmap.stitch(campaign)
    return campaign, fmap, fieldmap.evaluate(fmap, campaign)


@pytest.mark.slow
def test_stated_uncertainties_are_confirmed(reduced):
    found = confirm(*reduced, trials=TRIALS)
    print("\n" + confirmation_text(found))
    assert len(found.refusals) <= TRIALS // 20
    for key in RESULTS:
        assert found[key].linear_holds, f"{key}: {found[key].sentence}"
    covered = [found[key].covered for key in RESULTS]
    assert min(covered) > 0.8


@pytest.mark.slow
def test_half_of_the_true_uncertainty_is_not_good_enough(reduced):
    campaign, fmap, results = reduced
    (line,) = results.lines
    halved = {key: Quantity(q.value, q.u / 2, q.unit) for key, q in line.results.items()}
    wrong = replace(results, lines=(replace(line, results=halved),))
    found = confirm(campaign, fmap, wrong, trials=TRIALS)
    for key in RESULTS:
        assert "not good enough" in found[key].sentence, key
        assert found[key].proposed_u == pytest.approx(2 * found[key].u, rel=0.45)
