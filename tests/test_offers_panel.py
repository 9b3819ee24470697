"""Offered corrections in a panel: there when offered, ticked, kept, taken back."""

from __future__ import annotations

import json

import ipywidgets
import pytest

import fieldmap
from fieldmap.bench.writing import write_campaign
from fieldmap.estimate.provenance import map_corrections
from fieldmap.readings import corrected, load
from fieldmap.show.panels import FringeMapPanel, MagneticLengthPanel
from fieldmap.show.panels.state import Reduction
from tests.offering import LATE, TURNED, offer, small, turned_demo
from tests.shop import planned


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    place = tmp_path_factory.mktemp("bench")
    scans = planned((-0.4, 0.4), (0.4, -0.4), (-0.4, 0.4), rate=20.0)
    write_campaign(small(scans), place)
    return place


@pytest.fixture
def bench(written, tmp_path, monkeypatch):
    for file in written.iterdir():
        (tmp_path / file.name).write_bytes(file.read_bytes())
    offer(monkeypatch, LATE)
    yield tmp_path
    ipywidgets.Widget.close_all()


def opened(place, kind=MagneticLengthPanel):
    panel = kind()
    panel.open(place)
    assert panel.state.error == ""
    return panel


def test_the_list_is_away_where_nothing_is_offered(bench, monkeypatch):
    offer(monkeypatch)
    panel = opened(bench)
    assert panel.offers.boxes == ()
    assert panel.offers.section.layout.display == "none"


@pytest.mark.parametrize("kind", [MagneticLengthPanel, FringeMapPanel])
def test_ticking_solves_with_it_and_unticking_takes_it_back(bench, kind):
    panel = opened(bench, kind)
    before = panel.state.results
    assert panel.offers.section.layout.display == ""
    (box,) = panel.offers.boxes
    assert box.description == "pass_02.csv: read 1 ms late, u = 2 ms"
    assert not box.value
    assert "not made" in panel.offers.notes[0].value
    assert map_corrections(panel.state.fmap) == []

    box.value = True
    assert panel.state.error == ""
    made = fieldmap.evaluate(fieldmap.stitch(corrected(load(bench), [LATE])), fringe=False)
    assert panel.state.results.as_dict()["lines"] == made.as_dict()["lines"]
    assert [one.correction for one in map_corrections(panel.state.fmap)] == [LATE]
    # the finding has gone, the offer stays to be taken back
    codes = {one.code for one in panel.state.results.findings}
    assert "test-fault" not in codes
    assert {"corrections-by-hand", "correction-switched-on"} <= codes
    assert panel.offers.boxes == (box,)
    assert "made, found " in panel.offers.notes[0].value
    assert "1 offered correction switched on" in panel.status.widget.value
    assert "corrected" in panel.passes.notes[1].value

    box.value = False
    assert panel.state.results == before
    assert map_corrections(panel.state.fmap) == []
    assert panel.offers.section.layout.display == ""


def kept(place):
    return json.loads((place / "campaign.panel.json").read_text(encoding="utf-8"))


def test_it_is_kept_and_forgotten_with_the_other_settings(bench):
    panel = opened(bench)
    panel.offers.boxes[0].value = True
    assert kept(bench)["corrections"] == [LATE.as_entry()]
    shown = panel.state.results
    ipywidgets.Widget.close_all()  # the kernel is gone

    again = opened(bench)
    assert [box.value for box in again.offers.boxes] == [True]
    assert again.state.results.as_dict()["lines"] == shown.as_dict()["lines"]
    again.campaign.reset.click()
    assert [box.value for box in again.offers.boxes] == [False]
    assert "corrections" not in kept(bench)
    assert map_corrections(again.state.fmap) == []


def test_what_is_kept_broken_is_told_in_words(bench):
    opened(bench).offers.boxes[0].value = True
    ipywidgets.Widget.close_all()
    file = bench / "campaign.panel.json"
    entry = {"kind": "lag", "pass": LATE.where}
    file.write_text(json.dumps({**kept(bench), "corrections": [entry]}), encoding="utf-8")
    panel = opened(bench)
    assert "key 'lag'" in panel.state.notice
    assert [box.value for box in panel.offers.boxes] == [False]


def test_once_the_file_names_it_it_is_no_offer(bench):
    panel = opened(bench)
    panel.offers.boxes[0].value = True
    panel.state.renew(corrected(panel.state.campaign, [LATE]))
    assert panel.state.error == ""
    assert panel.state.offers.ticked == ()
    assert panel.offers.boxes == ()
    assert [one.correction for one in map_corrections(panel.state.fmap)] == [LATE]


def test_a_pass_that_is_left_out_takes_its_correction_along(bench):
    panel = opened(bench)
    panel.offers.boxes[0].value = True
    panel.passes.boxes[1].value = False
    assert panel.state.error == ""
    assert map_corrections(panel.state.fmap) == []
    panel.passes.boxes[1].value = True
    assert [one.correction for one in map_corrections(panel.state.fmap)] == [LATE]


def test_what_is_written_rests_on_it(bench, tmp_path):
    panel = opened(bench)
    panel.offers.boxes[0].value = True
    panel.state.save(tmp_path / "out")
    assert panel.state.error == ""
    fmap = fieldmap.load_map(tmp_path / "out" / "map.nc")
    assert [one.correction for one in map_corrections(fmap)] == [LATE]
    assert "Corrections switched on" in (tmp_path / "out" / "report.html").read_text("utf-8")


def test_a_correction_that_makes_it_worse_can_be_taken_back(bench, monkeypatch):
    offer(monkeypatch, LATE, TURNED)
    state = Reduction()
    state.open(bench)
    before = state.results
    assert set(state.offers.listed) == {LATE, TURNED}
    turned = state.offers.listed.index(TURNED)
    state.correct(turned, used=True)
    assert state.offers.ticked == (TURNED,)
    assert state.results is None or state.results != before
    state.correct(turned, used=False)
    state.correct(99, used=True)  # no such row: nothing happens
    assert state.results == before


def test_a_pass_turned_round_is_named_and_put_right(tmp_path):
    turned_demo(tmp_path / "turned")
    panel = opened(tmp_path / "turned")
    health = [note.value for note in panel.passes.notes]
    assert "look at it" in health[1]
    assert all("does not fit" in one for i, one in enumerate(health) if i != 1)
    (box,) = panel.offers.boxes
    assert box.description == "pass_02.csv: flux turned round"
    box.value = True
    assert all("fits" in note.value for note in panel.passes.notes)
    ipywidgets.Widget.close_all()
