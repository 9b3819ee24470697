"""Passes that hold the same readings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.findings.copies import copy_findings
from fieldmap.readings.records import make_pass
from tests.faulty import RECORDS, bench, coarse, made


def named(one, name="copy.csv"):
    return replace(one, name=name)


@pytest.mark.parametrize("record", RECORDS)
def test_a_pass_under_another_name(record):
    passes = bench(record)
    assert copy_findings(passes) == []
    (found,) = copy_findings([*passes, named(passes[0])])
    assert (found.code, found.severity, found.where) == ("same-readings", "warn", "pass_01.csv")
    assert "521 readings in a row" in found.text
    assert "copy.csv" in found.text


@pytest.mark.parametrize("record", RECORDS)
def test_a_stretch_of_a_pass(record):
    passes = bench(record)
    part = named(made(passes[0], rows=np.arange(100, 300)))
    (found,) = copy_findings([*passes, part])
    assert found.code == "same-readings"


def test_a_reversed_copy():
    passes = bench()
    one = passes[0]
    back = make_pass(one.position[::-1], one.flux[::-1], one.time, probe=one.probe, name="back")
    (found,) = copy_findings([*passes, back])
    assert "521 readings in a row" in found.text


def test_the_same_file():
    first, other = bench()
    twice = [replace(one, sha256="ab" * 32) for one in (first, other)]
    (found,) = copy_findings(twice)
    assert "abababababab" in found.text


@pytest.mark.parametrize("step", [1e-7, 1e-6, 1e-5, 1e-4])
def test_coarse_passes_over_the_same_way_are_no_copies(step):
    for record in ("cumulative", "increments"):
        passes = bench(record, travels=((-0.2, 0.2),) * 3)
        assert copy_findings([coarse(one, step) for one in passes]) == []
