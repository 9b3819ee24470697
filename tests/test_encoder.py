"""Positions that jump."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.findings.encoder import encoder_findings
from fieldmap.readings.records import make_pass
from tests.faulty import FAULTY, RECORDS, bench, even, made, second
from tests.shop import RECT, WIRE


def jumped(one, size, row=230, stop=None):
    position = one.position.copy()
    position[row:stop] += size
    return made(one, position=position)


@pytest.mark.parametrize("record", RECORDS)
@pytest.mark.parametrize("size", [2e-4, -2e-4, 2e-3])
def test_a_jump_is_named_with_its_size(record, size):
    passes = bench(record)
    assert encoder_findings(passes) == []
    (found,) = encoder_findings(second(passes, lambda one: jumped(one, size)))
    assert (found.code, found.severity, found.where) == ("position-jump", "warn", FAULTY)
    shown = float(found.text.split("jumps by ")[1].split(" mm")[0])
    assert shown == pytest.approx(size * 1e3, abs=0.03)
    assert "4.58 s (3" in found.text


def test_a_single_wrong_position_returns():
    (found,) = encoder_findings(second(bench(), lambda one: jumped(one, 3e-3, 230, 231)))
    assert "and returns" in found.text


def test_a_jump_that_the_flux_follows_is_lost_rows():
    def lost(one):
        rows = np.delete(np.arange(len(one.time)), [190, 191, 192])
        return made(one, time=even(one, len(rows)), rows=rows)

    (found,) = encoder_findings(second(bench(probe=RECT), lost))
    assert (found.code, found.severity) == ("readings-lost", "note")


@pytest.mark.parametrize("count", [5e-6, 1e-4, 5e-4, 2e-3])
def test_whole_counts_are_no_jumps(count):
    for one in bench():
        whole = made(one, position=np.round(one.position / count) * count)
        assert encoder_findings([whole]) == []


def test_a_stage_that_goes_from_stop_to_stop():
    stops = np.repeat(np.linspace(-0.1, 0.1, 41), 10)
    one = make_pass(stops, 0.01 * stops, rate=50.0, probe=WIRE)
    assert encoder_findings([one]) == []
