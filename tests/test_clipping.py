"""Plateaus that no field makes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.findings.clipping import clipping_findings
from tests.faulty import RECORDS, bench, coarse, made
from tests.shop import RECT, ROUND, WIRE


def clipped(one, share):
    limit = share * np.abs(one.samples).max()
    return made(one, np.clip(one.samples, -limit, limit))


@pytest.mark.parametrize("record", RECORDS)
@pytest.mark.parametrize("probe", [WIRE, RECT, ROUND], ids=lambda probe: probe.name)
def test_a_clipped_pass(record, probe):
    for one in bench(record, probe):
        assert clipping_findings(one) == []
        (found,) = clipping_findings(clipped(one, 0.5))
        assert (found.code, found.severity) == ("clipped", "warn")
        assert "readings, from" in found.text


def test_a_stated_range_is_checked_elsewhere():
    one = bench(probe=RECT)[0]
    stated = replace(one.integrator, full_scale=1.0)
    assert clipping_findings(replace(clipped(one, 0.5), integrator=stated)) == []


@pytest.mark.parametrize("step", [1e-7, 1e-6, 1e-5, 1e-4, 1e-3])
@pytest.mark.parametrize("probe", [WIRE, RECT], ids=lambda probe: probe.name)
def test_coarse_numbers_stand_still_where_the_field_does(step, probe):
    for record in ("cumulative", "increments"):
        for one in bench(record, probe):
            assert clipping_findings(coarse(one, step)) == []
