"""A pass with the wrong sign or power of ten is named, and the others are not."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import TanhMagnet
from fieldmap.errors import RefusedError
from fieldmap.estimate import stitch
from fieldmap.estimate.findings.gross import blamed, grossly_wrong
from fieldmap.readings import PointReference
from tests.shop import MAIN, RECT, WIRE, measured, planned
from tests.solved_lines import LINE, fitted, four_passes, with_fault

OPEN = replace(MAIN, read_noise=None, walk_noise=None)


def named(campaign):
    def refit(passes):
        return fitted(campaign, passes)

    return blamed(campaign.passes, refit)


def times(factor):
    return lambda one: replace(one, flux=factor * one.flux)


GROSS = {
    "polarity-reversed": (times(-1.0), "polarity", 0.0),
    "power-of-ten": (times(1e3), "factor", 1e-3),
    "pass-factor": (times(0.6), "factor", 1 / 0.6),
    "pass-shifted": (lambda one: replace(one, position=one.position - 0.02), "shift", 0.02),
}


@pytest.mark.parametrize(
    "integrator", [MAIN, pytest.param(OPEN, marks=pytest.mark.slow)], ids=["stated", "open"]
)
@pytest.mark.parametrize("code", GROSS)
@pytest.mark.parametrize("probe", [WIRE, RECT], ids=["wires", "coils"])
def test_the_wrong_pass_is_named(code, probe, integrator):
    change, kind, value = GROSS[code]
    references = () if probe is WIRE else [PointReference(0.0, 0.5, 1e-5)]
    sound = four_passes(probes=(probe,) * 4, integrator=integrator, references=references)
    campaign = with_fault(sound, change)
    (found,) = named(campaign)
    assert (found.code, found.where) == (code, "pass_02.csv")
    assert found.correction.kind == kind
    assert found.correction.value == pytest.approx(value, rel=1e-2, abs=1e-12)


def test_a_power_of_ten_and_reversed():
    (found,) = named(with_fault(four_passes(), times(-1e-3)))
    assert found.code == "power-of-ten"
    assert found.correction.value == pytest.approx(-1e3)


def test_a_pass_of_another_magnet():
    other = TanhMagnet(0.45, length=0.13, lam=0.02 / np.pi)
    (strange,) = measured(planned((0.2, -0.2), rate=50.0), source=other, axis=LINE, seed=9).passes
    campaign = with_fault(four_passes(), lambda one: replace(strange, name=one.name))
    (found,) = named(campaign)
    assert (found.code, found.where) == ("overlaps-disagree", "pass_02.csv")
    assert "agree among themselves without it" in found.text


def test_those_that_fit_worst_are_tried():
    campaign = with_fault(four_passes(), times(-1.0))
    tried = []

    def refit(passes):
        tried.append(passes)
        return fitted(campaign, passes)

    (found,) = blamed(campaign.passes, refit, fitted(campaign))
    assert found.where == "pass_02.csv"
    assert campaign.passes[1] not in tried[0]


def test_a_refusal_names_the_pass_that_is_its_reason():
    references = [PointReference(0.0, 0.5, 1e-5)]
    sound = four_passes(probes=(RECT,) * 4, references=references)
    with pytest.raises(RefusedError) as caught:
        stitch(with_fault(sound, times(1e3)))
    assert (caught.value.code, caught.value.where) == ("power-of-ten", "pass_02.csv")


def test_a_sound_line_is_not_gross():
    assert not grossly_wrong(fitted(four_passes()))
    assert named(four_passes()) == []
    assert grossly_wrong(fitted(with_fault(four_passes(), times(-1.0))))
    assert grossly_wrong(fitted(with_fault(four_passes(integrator=OPEN), times(-1.0))))


def test_one_pass_alone_blames_nobody():
    one = four_passes().passes[:1]
    campaign = replace(four_passes(), passes=one)
    assert named(campaign) == []
