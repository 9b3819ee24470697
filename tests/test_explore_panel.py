"""The panel to explore passes, without browser, kernel or server."""

from dataclasses import replace

import ipywidgets
import numpy as np
import pytest
from matplotlib import pyplot as plt

import fieldmap
from fieldmap.estimate.agreement import pass_agreement
from fieldmap.readings import PointReference
from fieldmap.show.explore_words import agreement_words
from fieldmap.show.look import BLUE, MM, VERMILION, pass_style
from fieldmap.show.panels import ExplorePanel

from .shop import DIPOLE, RECT, measured, planned

SCANS = (
    *planned((-0.4, 0.1), (0.4, -0.1), rate=20.0, dwell=2.0),
    *planned((-0.4, 0.4), probe=RECT, rate=20.0, dwell=2.0),
)
POINT = PointReference(0.0, float(DIPOLE.field(0.0)), 1e-5)
STITCH = fieldmap.stitch


@pytest.fixture(scope="module")
def campaign():
    return measured(SCANS, [POINT])


@pytest.fixture(scope="module")
def known():
    return {}


@pytest.fixture(autouse=True)
def _solved_once(monkeypatch, known):
    def stitch(campaign, **_):
        key = tuple(one.name for one in campaign.passes)
        if key not in known:
            known[key] = STITCH(campaign, knot_spacing=6e-3)
        return known[key]

    monkeypatch.setattr("fieldmap.show.panels.state.stitch", stitch)


@pytest.fixture(autouse=True)
def _nothing_left_behind(monkeypatch, tmp_path):
    monkeypatch.chdir(tmp_path)
    yield
    assert plt.get_fignums() == []
    ipywidgets.Widget.close_all()


@pytest.fixture
def panel(campaign):
    one = ExplorePanel()
    one.open(campaign)
    return one


def shown(panel):
    """Names of the choices that can be seen."""
    return {name for name, one in panel._choices().items() if one.layout.display != "none"}


def alt(panel):
    return panel.picture.value.split('alt="')[1].split('"')[0]


def test_all_readings_come_first(panel, campaign):
    assert panel.state.error == ""
    assert shown(panel) == {"first", "quantity", "against"}
    lines = panel.figure.axes[0].lines
    assert [line.get_color() for line in lines] == [pass_style(i).colour for i in range(3)]
    np.testing.assert_allclose(lines[1].get_xdata(), campaign.passes[1].position * MM)


def test_one_pass_keeps_its_colour(panel, campaign):
    panel.first.value = 2
    panel.quantity.value, panel.against.value = "speed", "time"
    (line,) = panel.figure.axes[0].lines
    assert line.get_color() == pass_style(2).colour
    assert np.abs(line.get_ydata()).max() == pytest.approx(50.0, rel=0.05)  # mm/s
    assert campaign.passes[2].name in alt(panel)


def test_two_passes(panel):
    panel.view.value = "pair"
    assert shown(panel) == {"first", "second"}
    assert (panel.first.value, panel.second.value) == (0, 1)
    found = pass_agreement(panel.state.fmap, 0, 1)
    assert alt(panel) == agreement_words(found)
    colours = {line.get_color() for line in panel.figure.axes[0].lines}
    assert {VERMILION, BLUE} <= colours
    panel.second.value = 2
    assert alt(panel) == agreement_words(pass_agreement(panel.state.fmap, 0, 2))
    assert "gain coil" in panel.table.value


@pytest.mark.parametrize(("view", "words"), [("spectrum", "spectral"), ("allan", "Allan")])
def test_dwells(panel, view, words):
    panel.view.value = view
    assert shown(panel) == {"first", "dwell"}
    assert [title for title, _ in panel.dwell.options] == ["1: -400 mm", "2: 100 mm"]
    assert words in alt(panel)
    assert "dwell 1 at -400 mm" in panel.table.value
    panel.dwell.value = 2
    assert "dwell 2 at 100 mm" in panel.table.value
    panel.first.value = 1
    assert [title for title, _ in panel.dwell.options] == ["1: 400 mm", "2: -100 mm"]
    assert panel.dwell.value == 2


def test_corrections(panel):
    panel.view.value = "corrections"
    assert shown(panel) == {"result"}
    assert panel.result.value == "magnetic_length"
    assert "Magnetic length" in panel.table.value
    assert panel.picture.value == ""
    panel.result.value = "central_field"
    assert "Central field" in panel.table.value


def test_a_pair_that_cannot_be_compared_is_said_and_nothing_old_stays(panel):
    panel.view.value = "pair"
    panel.second.value = 0
    assert "found the same pass twice" in panel.state.error
    assert 'role="alert"' in panel.status.widget.value
    assert (panel.picture.value, panel.table.value) == ("", "")
    panel.second.value = 2
    assert panel.state.error == ""
    assert "They agree" in panel.table.value


def test_a_pass_without_a_dwell_is_said(campaign):
    passes = tuple(
        replace(one, time=one.time[60:-60], position=one.position[60:-60], flux=one.flux[60:-60])
        for one in campaign.passes
    )
    panel = ExplorePanel()
    panel.open(replace(campaign, passes=passes))
    panel.view.value = "allan"
    assert "no dwell of 16 readings" in panel.state.error
    assert panel.picture.value == ""


def test_without_a_map_readings_and_dwells_are_there(campaign):
    panel = ExplorePanel()
    panel.open(replace(campaign, passes=campaign.passes[2:], references=()))  # no level
    assert panel.state.fmap is None
    assert 'role="alert"' in panel.status.widget.value
    assert 'alt="Flux' in panel.picture.value
    panel.view.value = "spectrum"
    assert 'alt="Power' in panel.picture.value
    for view in ("pair", "corrections"):
        panel.view.value = view
        assert "there is no map" in panel.picture.value


def test_a_wrong_path_is_said(panel, tmp_path):
    panel.campaign.path.value = str(tmp_path / "none.toml")
    assert "none.toml" in panel.state.error
    assert "choose a campaign" in panel.picture.value
    assert panel.first.options == ()


def test_another_campaign_offers_its_own_passes(panel, campaign):
    panel.first.value = 2
    panel.open(replace(campaign, passes=campaign.passes[:2]))
    assert [value for _, value in panel.first.options] == [-1, 0, 1]
    assert panel.first.value == -1


def test_a_failure_of_the_kit_is_shown(panel, monkeypatch):
    monkeypatch.setattr("fieldmap.show.panels.explore.pass_agreement", lambda *_: 1 / 0)
    panel.view.value = "pair"
    assert "ZeroDivisionError" in panel.state.error
    assert "alert" in panel.status.widget.value


def test_lines_of_a_map_are_offered():
    scans = (
        *planned((-0.4, 0.4), (0.4, -0.4), rate=20.0, dwell=2.0),
        *planned((-0.4, 0.4), (0.4, -0.4), rate=20.0, dwell=2.0, y=0.01),
    )
    panel = ExplorePanel()
    panel.open(measured(scans))
    panel.view.value = "corrections"
    assert shown(panel) == {"result", "line"}
    before = panel.table.value
    panel.line.value = 1
    assert panel.state.error == ""
    assert panel.table.value != before
