"""The study's campaigns are what they claim to be, and the plain script reduces them well."""

from __future__ import annotations

import time

import numpy as np
import pytest

from fieldmap.bench.sources import Loop
from fieldmap.bench.truth import true_results
from fieldmap.readings import Coil, FlipReference, PointReference, Wire, ZeroReference
from tests.study.draw import KINDS, draw_campaign
from tests.study.magnets import CoaxialLoops
from tests.study.plain import plain_results

SEEDS = range(12)

REFERENCES = {"point": PointReference, "zero": ZeroReference, "flip": FlipReference}

every_kind = pytest.mark.parametrize("kind", KINDS)


@pytest.fixture(scope="module")
def drawn():
    return {(kind, seed): draw_campaign(kind, seed) for kind in KINDS for seed in SEEDS}


@every_kind
def test_probes_and_references_are_those_of_the_kind(kind, drawn):
    moved, _, reference = kind.partition("+")
    for seed in SEEDS:
        campaign, _ = drawn[kind, seed]
        shapes = {getattr(one.probe, "shape", "wire") for one in campaign.passes}
        assert shapes == ({"wire", "rectangular"} if moved == "mixed" else {moved})
        kinds = {type(one) for one in campaign.references}
        assert kinds == ({REFERENCES[reference]} if reference else set())


@every_kind
def test_passes_of_each_probe_cover_the_limits(kind, drawn):
    for seed in SEEDS:
        campaign, _ = drawn[kind, seed]
        assert 2 <= len(campaign.passes) <= 6
        low, high = campaign.axis.integrate
        for probe in {one.probe for one in campaign.passes}:
            own = [one for one in campaign.passes if one.probe == probe]
            spans = sorted((one.position.min(), one.position.max()) for one in own)
            assert spans[0][0] < low
            reached = spans[0][1]
            for start, stop in spans[1:]:
                assert start < reached
                reached = max(reached, stop)
            assert reached > high


@every_kind
def test_zero_references_are_honest(kind, drawn):
    for seed in SEEDS:
        campaign, source = drawn[kind, seed]
        for one in campaign.references:
            if isinstance(one, ZeroReference):
                assert abs(source.between(one.start, one.stop)) <= one.u * (one.stop - one.start)


def test_every_choice_comes_up(drawn):
    campaigns = [campaign for campaign, _ in drawn.values()]
    integrators = [campaign.passes[0].integrator for campaign in campaigns]
    stated = np.mean([integrator.walk_noise is not None for integrator in integrators])
    assert 0.3 < stated < 0.7
    assert {one.passes[0].record for one in campaigns} == {"cumulative", "increments", "voltage"}
    assert {integrator.kind for integrator in integrators} == {"digital", "analog"}
    assert {integrator.u_drift is None for integrator in integrators} == {True, False}
    assert {one.magnet.kind for one in campaigns} == {"dipole", "solenoid", "other"}
    gaps = [campaign.magnet.gap for campaign in campaigns]
    assert min(gaps) < 0.005
    assert max(gaps) > 0.06
    levels = [abs(float(source.field(0.0))) for _, source in drawn.values()]
    assert 0.01 <= min(levels) < 0.02
    assert 1.0 < max(levels) < 1.6


def test_the_file_does_not_tell_the_true_errors(drawn):
    for campaign, source in drawn.values():
        for one in campaign.passes:
            if isinstance(one.probe, Wire) and one.integrator.leak_time is None:
                ends = source.between(float(one.position[0]), float(one.position[-1]))
                assert one.flux[-1] - one.flux[0] != one.probe.gain * ends


def test_one_seed_one_campaign():
    first, again, other = (draw_campaign("mixed+point", seed)[0] for seed in (3, 3, 4))
    np.testing.assert_array_equal(first.passes[0].flux, again.passes[0].flux)
    assert first.references == again.references
    assert first.magnet.gap != other.magnet.gap


def test_drawing_is_quick():
    start = time.process_time()
    for kind in KINDS:
        draw_campaign(kind, 5)
    assert time.process_time() - start < 1.0 * len(KINDS)


def test_coaxial_loops_are_loops():
    places, currents = (-0.02, 0.01, 0.05), (3e3, 4e3, -1e3)
    mine = CoaxialLoops(0.03, places, currents)
    library = sum(
        Loop(0.03, current).shifted(z) for z, current in zip(places, currents, strict=True)
    )
    s = np.linspace(-0.3, 0.3, 61)
    np.testing.assert_allclose(mine.field(s), library.field(s), rtol=1e-12, atol=1e-12)
    assert mine.between(-0.1, 0.2) == pytest.approx(library.between(-0.1, 0.2), rel=1e-12)
    assert mine.total == pytest.approx(library.total, rel=1e-12)


@every_kind
def test_the_plain_script_is_a_fair_competitor(kind, drawn):
    errors = []
    for seed in SEEDS:
        campaign, source = drawn[kind, seed]
        plain, true = plain_results(campaign, careful=True), true_results(source, campaign.axis)
        errors.append([abs(plain[name] / true[name] - 1.0) for name in plain])
    median = np.median(errors, axis=0)
    coils_only = all(isinstance(one.probe, Coil) for one in drawn[kind, 0][0].passes)
    assert np.all(median < (5e-3 if coils_only else 1e-3)), median
