"""Faults put into a campaign measured again: how they are judged, counted and shown."""

from __future__ import annotations

from dataclasses import replace
from functools import partial

import numpy as np
import pytest

import fieldmap.bench.fault_trials as module
from fieldmap.bench.fault_outcome import Outcome, judged, twin_of
from fieldmap.bench.fault_trials import FaultTrial, FaultTrials, fault_trials, lonely_stretches
from fieldmap.bench.faults import FAULTS
from fieldmap.cli import main
from fieldmap.errors import InputError
from fieldmap.estimate import Finding, stitch
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.results import LineResults, Results
from fieldmap.readings import PointReference
from fieldmap.shipped import demo_folder
from fieldmap.show.faults import faults_html, faults_shown, faults_text
from tests.shop import measured, planned

WARNED = Finding("overlaps-disagree", "warn", "pass_01.csv", "they differ.")
NOTED = Finding("taken-on-trust", "note", "", "it is.")


def results(off=0.0, findings=(), key="central_field"):
    """One result that is `off` standard uncertainties above 0.5."""
    lines = (LineResults(0.0, 0.0, {key: Quantity(0.5 + off * 1e-4, 1e-4, "T")}),)
    return Results("shop", "", lines, tuple(findings), ())


TRUTH = {(0, "central_field"): 0.5}


@pytest.mark.parametrize(
    ("off", "outcome"),
    [(3.9, "harmless"), (-4.1, "off"), (5.9, "off"), (-6.1, "silent"), (np.nan, "silent")],
)
def test_a_result_is_judged_by_its_error(off, outcome):
    made = judged(results(off), twin_of(results(), TRUTH))
    assert made.name == outcome
    assert made.errors[0, "central_field"] == pytest.approx(off, nan_ok=True)


def test_a_warning_counts_where_the_twin_has_none():
    clean, warned = twin_of(results(), TRUTH), twin_of(results(findings=[WARNED]), TRUTH)
    assert judged(results(9.0, [WARNED]), clean) == Outcome(
        "found", {(0, "central_field"): pytest.approx(9.0)}, ("overlaps-disagree pass_01.csv",)
    )
    assert judged(results(9.0, [WARNED]), warned).name == "silent"
    elsewhere = replace(WARNED, where="pass_02.csv")
    assert judged(results(9.0, [elsewhere]), warned).name == "found"
    assert judged(results(9.0, [NOTED]), clean).name == "silent"


@pytest.fixture(scope="module")
def shop():
    passes = planned((-0.4, 0.4), (0.4, -0.1), rate=20.0)
    campaign = measured(passes, [PointReference(0.0, 0.5, 2e-5)], seed=2)
    return campaign, stitch(campaign, knot_spacing=0.01)


@pytest.mark.slow
def test_faults_are_put_in_and_counted(shop):
    told = []
    wanted = {"kinds": ["polarity", "area-everywhere"], "severities": [2, 5]}
    made = fault_trials(*shop, **wanted, workers=1, tell=told.append)
    assert told == ["fault 1 of 2: polarity", "fault 2 of 2: area-everywhere"]
    assert [(one.kind, one.severity) for one in made.made] == [
        ("polarity", 2),
        ("polarity", 5),
        ("area-everywhere", 2),
        ("area-everywhere", 5),
    ]
    assert made.made[1].outcome in ("found", "refused")
    assert sum(made.count("polarity").values()) == 2
    assert [kind.key for kind in made.kinds] == ["polarity", "area-everywhere"]


@pytest.mark.parametrize(
    "more", [{"trials": 0}, {"workers": 0}, {"kinds": ["gremlins"]}, {"severities": [6]}]
)
def test_refuses_arguments_out_of_range(shop, more):
    with pytest.raises(InputError, match=f"argument '{next(iter(more))}'"):
        fault_trials(*shop, **more)


def test_stretches_that_one_pass_covers(shop):
    assert lonely_stretches(shop[0]) == (pytest.approx((-0.4, -0.1), abs=1e-6),)


def trials(*made, lonely=()):
    return FaultTrials("Magnet <3>", 2, made, lonely)


LAG = (
    FaultTrial("lag", 2, 0, "harmless", 1.0),
    FaultTrial("lag", 3, 0, "silent", 12.34, told=False),
    FaultTrial("lag", 4, 0, "silent", 99.0),
)


def test_what_would_go_unseen_is_said_with_the_pass_that_shows_it():
    made = trials(*LAG, lonely=((-0.4, -0.1),))
    text = " ".join(faults_text(made).split())
    assert "lag 1 0 0 0 2 3" in text
    assert "a result is off by 12.3 u and nothing is said; these readings do not hold it" in text
    assert "a second pass over -400 to -100 mm, which one pass alone covers" in text
    assert "another probe would reveal it" in " ".join(faults_text(trials(*LAG)).split())
    with pytest.raises(KeyError):
        made.worst("polarity")


def test_what_nothing_reveals_is_taken_on_trust_and_stands_last():
    scale = FaultTrial("position-scale-everywhere", 3, 0, "silent", 20.0, told=False)
    text = faults_text(trials(scale, *LAG))
    assert text.index("Unseen, lag") < text.index("Taken on trust, position-scale-everywhere")
    assert FAULTS["position-scale-everywhere"].reason.split()[0] in text


def test_a_campaign_that_shows_everything_says_so():
    seen = trials(FaultTrial("polarity", 5, 0, "found", 4e3))
    assert "No fault made a result wrong" in faults_text(seen)
    shown = faults_shown(seen)
    assert (shown.text, "Magnet &lt;3&gt;" in shown.html) == (faults_text(seen), True)
    assert '<tr data-key="polarity">' in faults_html(seen)


@pytest.mark.parametrize("key", FAULTS)
def test_every_kind_has_its_sentence(key):
    page = faults_html(trials(FaultTrial(key, 3, 0, "silent", 7.0)))
    _, sentence = page.split("<li>")
    assert key in sentence


def test_from_a_shell(tmp_path, capsys, monkeypatch):
    few = partial(module.fault_trials, kinds=["flux-unit"], severities=[3], workers=1)
    monkeypatch.setattr(module, "fault_trials", few)
    source = str(demo_folder() / "foreign_tables")
    assert main(["reduce", source, "--out", str(tmp_path), "--faults", "1"]) == 0
    assert "Faults put into the campaign" in capsys.readouterr().out
    assert "Faults put in" in (tmp_path / "report.html").read_text(encoding="utf-8")
