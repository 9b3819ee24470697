"""All that raw readings say: nothing of clean campaigns, no trouble with odd ones."""

from __future__ import annotations

import os
from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.estimate import map_findings
from fieldmap.estimate.findings import pass_findings
from fieldmap.estimate.findings.spikes import without_spikes
from fieldmap.readings.records import make_pass
from fieldmap.shipped import demo_folder
from tests.faulty import RECORDS, bench, made, second
from tests.shop import MAIN, WIRE
from tests.study.draw import KINDS, draw_campaign

DEMOS = ("gap_dipole", "slot", "solenoid_fringe", "foreign_tables")


@pytest.mark.parametrize("kind", KINDS)
def test_clean_campaigns(kind):
    for seed in range(3):
        campaign, _ = draw_campaign(kind, seed)
        assert pass_findings(campaign.passes, campaign.magnet.current) == []


SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"


@pytest.mark.slow
def test_no_false_alarm_in_many_clean_campaigns():
    for seed in range(1000, 1010 if SAMPLE else 1040):
        for kind in KINDS:
            campaign, _ = draw_campaign(kind, seed)
            assert pass_findings(campaign.passes, campaign.magnet.current) == []


@pytest.mark.parametrize("demo", DEMOS)
def test_demo_campaigns(demo):
    campaign = fieldmap.load(demo_folder() / demo / "campaign.toml")
    assert pass_findings(campaign.passes, campaign.magnet.current) == []


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("count", [3, 4, 7, 8, 9, 24, 30, 128, 300])
@pytest.mark.parametrize("record", RECORDS)
def test_odd_readings_raise_nothing(count, record):
    rng = np.random.default_rng(count)
    travel, time = np.linspace(-0.2, 0.2, count), np.arange(count) * 0.02
    for position in (travel, travel[::-1], 0 * travel, np.round(travel, 2), 1e14 * travel):
        for flux in (0 * travel, 0 * travel + 0.3, travel, rng.normal(size=count) * 1e-7):
            one = make_pass(position, flux, time, probe=WIRE, integrator=MAIN, record=record)
            twin = replace(one, name="twin", flux=-one.flux)
            for passes in ([one], [one, twin]):
                assert isinstance(pass_findings(passes), list)
                assert len(without_spikes(passes)) == len(passes)


def test_one_fault_is_offered_one_correction():
    def lost(one):
        return made(one, rows=np.delete(np.arange(len(one.time)), [190, 191, 192]))

    found = pass_findings(second(bench("increments"), lost))
    places = [one.correction.place for one in found if one.correction is not None]
    assert len(places) == len(set(places)) >= 1
    done = second(
        bench("increments"), lambda one: replace(lost(one), corrections=(found[0].correction,))
    )
    assert found[0] not in pass_findings(done)


def test_a_map_leaves_spikes_out_and_says_so():
    campaign, _ = draw_campaign("wire+point", 5)
    assert campaign.passes[0].record == "cumulative"
    name = campaign.passes[0].name

    def spiked(one):
        flux = one.flux.copy()
        flux[[50, 200]] += 1e-2
        return replace(one, flux=flux)

    spoilt = replace(campaign, passes=(spiked(campaign.passes[0]), *campaign.passes[1:]))
    clean, mended = fieldmap.stitch(campaign), fieldmap.stitch(spoilt)
    assert [one.where for one in map_findings(mended) if one.code == "spikes"] == [name]
    assert not [one for one in map_findings(clean) if one.code == "spikes"]
    centre = {"z": 0.0, "method": "nearest"}
    moved = float((mended["B"] - clean["B"]).sel(**centre).squeeze())
    assert abs(moved) < float(clean["B_se"].sel(**centre).squeeze())
