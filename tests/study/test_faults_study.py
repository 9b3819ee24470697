"""A fixed sample of the fault campaign: nothing silently wrong that the readings could show."""

from __future__ import annotations

import math
import os

import pytest

from tests.study.faults import COLUMNS, Trial, read, report, run, run_one, write

FEW = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
SAMPLE = (
    ("wire+point", 2001, ("encoder-slip", "integrator-step", "flux-unit", "polarity")),
    ("rectangular+flip", 2001, ("turns-one-pass", "lag", "spikes", "duplicated-pass")),
    ("mixed+point", 2001, ("range-change", "mains", "field-changed", "other-probe")),
)
"""Campaigns that reduce in well under a second, each with the kinds that it is asked for."""


def trial(fault="lag", severity=1, outcome="silent", z=1.0):
    return Trial(fault, severity, "mixed", 1, outcome, {"central_field": 9.0}, z, ())


@pytest.mark.slow
def test_nothing_is_silently_wrong_that_could_be_revealed():
    made = []
    for draw, seed, kinds in SAMPLE:
        for severity in (4,) if FEW else (2, 4):
            made += [run_one(kind, severity, draw, seed) for kind in kinds]
    wrong = [one for one in made if one.column in ("silent, revealable", "crashed")]
    assert not wrong, report(wrong)
    # and the sample holds something to be found
    assert sum(one.outcome in ("found", "refused") for one in made) >= len(made) / 3


@pytest.mark.slow
def test_a_trial_is_the_same_alone_and_goes_through_the_file(tmp_path):
    out = tmp_path / "trials.jsonl"
    wanted = {"faults": ["polarity"], "severities": [5], "draws": ["wire+point"], "out": out}
    (whole, turned) = run(1, 2001, **wanted)
    assert (whole.fault, turned.fault, turned.outcome) == ("none", "polarity", "found")
    assert list(read(out)) == [whole, turned]
    assert run_one("polarity", 5, "wire+point", 2001) == turned
    out.write_text(out.read_text() + '{"fault": "lag", "seve')  # stopped while it wrote
    assert run(1, 2001, **wanted) == [whole, turned]  # nothing is done again
    assert len(run(1, 2001, **{**wanted, "severities": [4, 5]})) == 3


def test_what_is_silent_is_told_apart_by_what_could_be_told():
    trials = [trial(z=6.9), trial(z=7.1), trial(outcome="found"), trial(outcome="no place")]
    lines = report(trials).splitlines()
    assert lines[0] == f"| fault | n | {' | '.join(COLUMNS)} |"
    assert lines[2] == "| lag | 3 | 0 | 1 | 0 | 0 | 1 | 1 | 0 |"
    (told, untold) = [line for line in lines if "--only" in line]
    assert told.startswith("revealable: --only lag --severity 1 --draw mixed --seed 1: z 7.1;")
    assert "central_field +9.0 u" in told
    assert untold.startswith("not revealable")


def test_an_infinite_statistic_survives_the_file(tmp_path):
    write(tmp_path / "one.jsonl", [trial(z=math.inf)])
    (again,) = read(tmp_path / "one.jsonl")
    assert again.z == math.inf
