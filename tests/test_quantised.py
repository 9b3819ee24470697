"""Numbers recorded too coarsely for their noise."""

from __future__ import annotations

from dataclasses import replace

import pytest

from fieldmap.estimate.findings.quantised import quantised_findings
from tests.faulty import RECORDS, bench, coarse


@pytest.mark.parametrize("record", RECORDS)
def test_fine_numbers(record):
    assert quantised_findings(bench(record)) == []


def test_coarse_numbers_are_a_note_then_a_warning():
    for step, severity in ((1e-6, "note"), (1e-5, "warn")):
        first, _ = quantised_findings([coarse(one, step) for one in bench()])
        assert (first.code, first.severity, first.where) == ("quantised", severity, "pass_01.csv")
        assert f"steps of {step:.3g} V s" in first.text
        assert "5e-08 V s" in first.text
        assert "state resolution" in first.text


def test_noise_that_is_not_stated_is_measured():
    one = bench()[0]
    silent = replace(one, integrator=replace(one.integrator, read_noise=None))
    assert quantised_findings([coarse(silent, 5e-8)]) == []
    assert len(quantised_findings([coarse(silent, 1e-4)])) == 1
