"""The budget in the panels: where the uncertainty of a chosen result comes from."""

import re
from html import unescape

import ipywidgets
import pytest

from fieldmap.magnet.budget import budget
from fieldmap.shipped import demo_folder
from fieldmap.show.budget_plots import budget_words
from fieldmap.show.panels.figure import NOTHING, FigurePanel
from fieldmap.show.panels.state import Reduction
from tests.shop import measured, planned


@pytest.fixture
def panel():
    state = Reduction()
    yield FigurePanel(state)
    ipywidgets.Widget.close_all()


@pytest.fixture
def opened(panel):
    panel.state.open(demo_folder() / "slot" / "campaign.toml")
    assert panel.state.error == ""
    return panel


def words(panel):
    return unescape(re.search(r'alt="([^"]*)"', panel.picture.value)[1])


def expected(panel, result):
    return budget_words(budget(panel.state.fmap, axis=panel.state.axis)[result])


def test_it_begins_with_the_magnetic_length(opened):
    assert opened.result.layout.display == "none"
    opened.kind.value = "budget"
    assert opened.result.layout.display == ""
    assert opened.result.value == "magnetic_length"
    assert words(opened) == expected(opened, "magnetic_length")


def test_every_result_can_be_taken_apart(opened):
    opened.kind.value = "budget"
    for name, key in opened.result.options:
        opened.result.value = key
        assert opened.state.error == "", name
        assert words(opened) == expected(opened, key)


def test_it_follows_the_limits_and_keeps_the_choice(opened):
    opened.kind.value = "budget"
    opened.result.value = "integrated_field"
    before = words(opened)
    opened.state.move(integrate=(-0.01, 0.012))
    assert words(opened) == expected(opened, "integrated_field") != before


def test_the_other_figures_come_back(opened):
    profile = words(opened)
    opened.kind.value = "budget"
    opened.kind.value = "profile"
    assert opened.result.layout.display == "none"
    assert words(opened) == profile


def test_without_a_map_there_is_no_budget(opened):
    opened.kind.value = "budget"
    opened.state.open("no/such/campaign.toml")
    assert opened.picture.value == NOTHING
    opened.state.open(demo_folder() / "slot" / "campaign.toml")
    assert words(opened) == expected(opened, "magnetic_length")


def test_a_result_that_is_withheld_is_not_offered(panel):
    panel.state.open(measured(planned((-0.4, 0.4), rate=20.0)))
    panel.kind.value = "budget"
    assert panel.result.value == "magnetic_length"
    panel.state.move(flat=(0.36, 0.38))  # no field there
    assert panel.state.error == ""
    assert "magnetic_length" not in [key for _, key in panel.result.options]
    assert words(panel) == expected(panel, panel.result.value)
