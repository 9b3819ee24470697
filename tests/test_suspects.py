"""Single faults: each is told by its kind, its size and its place; a sound line shows none."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors
from fieldmap.estimate import map_findings, stitch
from fieldmap.estimate.findings.scan import faulty, scan_findings
from fieldmap.estimate.findings.scan.scores import Scores
from fieldmap.estimate.findings.scan.suspects import suspects
from fieldmap.estimate.findings.scan.words import suspect_finding
from fieldmap.readings import PointReference, Stage
from tests.shop import RECT, ROUND, STAGE, WIRE
from tests.solved_lines import GAP, NOISE, fitted, four_passes, with_fault
from tests.study.draw import draw_campaign

READING = 250


def later(one):
    return np.arange(len(one.time)) >= READING


def scaled(one, factor):
    return replace(one, flux=one.flux * factor)


def displaced(one, by):
    return replace(one, position=one.position + by)


def progress(one):
    return (one.time - one.time[0]) / (one.time[-1] - one.time[0])


FAULTS = {
    "step": (lambda one: replace(one, flux=one.flux + 3e-6 * later(one)), 3e-6),
    "factor": (lambda one: scaled(one, 1.002), 0.002),
    "shift": (lambda one: displaced(one, -60e-6), 60e-6),
    "stretch": (lambda one: replace(one, position=one.position / 1.002), 0.002),
    "factor drifts": (
        lambda one: replace(one, flux=np.cumsum(_steps(one) * (1 + 0.004 * progress(one)))),
        0.002,  # from the middle to the end
    ),
    "factor changes": (
        lambda one: replace(one, flux=np.cumsum(_steps(one) * (1 + 0.004 * later(one)))),
        0.004,
    ),
    "position slips": (lambda one: displaced(one, -1e-4 * later(one)), 1e-4),
    "drift bends": (
        lambda one: replace(one, flux=one.flux + 6e-6 * np.cos(2 * np.pi * progress(one))),
        6e-6,
    ),
}


# over so short a magnet: what grows with time has grown by the end, and after the middle only one
# edge is left
NEARLY_THE_SAME = {"factor drifts": ["factor", "factor changes"], "factor changes": ["step"]}


def _steps(one):
    return np.diff(one.flux, prepend=one.flux[0])


PROMPT = replace(STAGE, u_lag=2e-4)  # a shift is else a lag of half the passes
LEVEL = PointReference(0.0, 0.5, 1e-5)


def passes_of(probe, **more):
    references = () if probe is WIRE else [LEVEL]
    return four_passes(probes=(probe,) * 4, references=references, stage=PROMPT, **more)


def told(campaign):
    scores = Scores(fitted(campaign).solved)
    return suspects(scores)


@pytest.mark.parametrize("kind", FAULTS)
@pytest.mark.parametrize("probe", [WIRE, RECT], ids=["wires", "coils"])
def test_a_fault_is_told_by_kind_size_and_place(kind, probe):
    change, size = FAULTS[kind]
    if probe is RECT and kind == "stretch":
        pytest.skip("too small to be told apart from others by this coil")
    campaign = with_fault(passes_of(probe), change)
    first = told(campaign)[0]
    assert first.passes == (1,)
    assert first.kind in {kind, *NEARLY_THE_SAME.get(kind, ())}
    if first.kind != kind:
        return
    # a change at some reading is looked for at a few places only, so its size is roughly found
    near = 0.3 * size if kind in {"factor changes", "position slips", "drift bends"} else 0.0
    assert first.amount == pytest.approx(size, abs=5 * first.u + near)
    if kind == "step":
        assert first.reading == READING
    if kind in {"factor changes", "position slips"}:
        assert abs(first.reading - READING) < 60


def test_a_drift_that_follows_the_temperature():
    def warmed(one):
        temperature = 20 + 0.5 * np.sin(one.time / 1.5)
        return replace(one, temperature=temperature, flux=one.flux + 4e-6 * (temperature - 20))

    first = told(with_fault(four_passes(), warmed))[0]
    assert (first.kind, first.passes) == ("drift follows temperature", (1,))
    assert first.amount == pytest.approx(4e-6, abs=5 * first.u)


def test_two_faults_are_told_one_after_the_other():
    campaign = with_fault(passes_of(WIRE), FAULTS["step"][0])
    campaign = with_fault(campaign, FAULTS["factor"][0], number=3)
    found = told(campaign)
    assert {(one.kind, one.passes) for one in found} == {("step", (1,)), ("factor", (3,))}


def test_a_lag_that_is_stated_to_be_none():
    stage = Stage(u_position=STAGE.u_position)
    first = told(four_passes(stage=stage, errors=Errors(lag=4e-3, noise=NOISE)))[0]
    assert first.kind == "lag"
    assert first.amount == pytest.approx(4e-3, abs=5 * first.u)


def test_a_window_that_is_stated_to_be_certain():
    # beside wires, which have no window
    probes = (WIRE, WIRE, RECT, RECT)
    errors = Errors(window={"coil": 0.04e-2}, noise=NOISE)
    first = told(four_passes(probes=probes, errors=errors))[0]
    assert first.kind == "window"
    assert first.passes == (2, 3)
    assert first.amount == pytest.approx(0.04, abs=5 * first.u)


def test_a_size_that_is_stated_to_be_certain():
    certain = replace(RECT, u_effective_area=0.0)
    probes = (WIRE, WIRE, certain, certain)
    errors = Errors(gain={"coil": 0.01}, noise=NOISE)
    found = told(four_passes(probes=probes, errors=errors))
    assert ("gain", (2, 3)) in {(one.kind, one.passes) for one in found}


@pytest.mark.parametrize("probe", [WIRE, RECT, ROUND], ids=["wires", "coils", "round coils"])
def test_a_sound_line_shows_none(probe):
    for seed in range(5):
        fit = fitted(passes_of(probe, seed=seed))
        assert scan_findings(fit, GAP) == []
        assert not faulty(fit)


@pytest.mark.parametrize(("kind", "seed"), [("round+flip", 5000), ("rectangular+flip", 5005)])
def test_a_coil_alone_is_not_told_its_window(kind, seed):
    campaign, _ = draw_campaign(kind, seed)
    found = [one.code for one in map_findings(stitch(campaign)) if one.severity == "warn"]
    assert "window-contradicted" not in found


def test_faulty_is_what_shows_far_beyond_chance():
    assert faulty(fitted(with_fault(four_passes(), FAULTS["factor"][0])))


@pytest.mark.parametrize("kind", FAULTS)
def test_the_sentence_has_place_number_and_remedy(kind):
    campaign = with_fault(passes_of(WIRE), FAULTS[kind][0])
    first = told(campaign)[0]
    finding = suspect_finding(first, campaign.passes)
    assert finding.severity == "warn"
    assert finding.where == "pass_02.csv"
    assert f"({abs(first.normal):.3g} u from none, where chance allows " in finding.text
    assert finding.text.endswith(".")
    assert "; " in finding.text
    assert "|" not in finding.text
    if kind in {"step", "factor changes", "position slips"}:
        assert " s, " in finding.text
        assert " mm" in finding.text


def test_what_can_be_undone_is_offered():
    offers = {}
    for kind, (change, _) in FAULTS.items():
        campaign = with_fault(passes_of(WIRE), change)
        offers[kind] = suspect_finding(told(campaign)[0], campaign.passes).correction
    assert {"step", "factor", "shift"} <= {kind for kind, offer in offers.items() if offer}
    assert offers["stretch"] is None
    assert offers["factor"].value == pytest.approx(1 / 1.002, rel=1e-4)
    assert offers["shift"].value == pytest.approx(60e-6, rel=0.1)
    assert offers["shift"].u > 0
    times = four_passes().passes[1].time
    assert times[READING - 1] < offers["step"].start < times[READING]
