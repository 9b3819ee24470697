"""Passes explored and a foreign table described, by keyboard, in JupyterLab."""

from __future__ import annotations

import shutil
import tomllib

import pytest

import fieldmap
from fieldmap.estimate.agreement import pass_agreement
from fieldmap.shipped import demo_folder
from fieldmap.show.explore import hear
from fieldmap.show.explore_words import agreement_words
from fieldmap.show.look import BLUE, VERMILION, pass_style

from .notebook_page import SIDEWAYS, amount, eventually, open_and_run, scroll_to, status

pytestmark = pytest.mark.browser

PANEL = ".fm-explore-panel"
PICTURE = f"{PANEL} .fm-picture-box img"
TABLES = ".fm-tables"


@pytest.fixture(scope="module")
def campaign():
    return fieldmap.load(demo_folder() / "gap_dipole" / "campaign.toml")


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign)


def choose(page, hook, steps=1):
    """Open a list by the space bar, step down, take it: plain arrow keys belong to the notebook."""
    page.locator(f"{PANEL} .{hook} select").focus()
    page.keyboard.press("Space")
    for _ in range(steps):
        page.keyboard.press("ArrowDown")
    page.keyboard.press("Enter")


def view(page, name):
    """Take a view by keyboard."""
    button = page.locator(f"{PANEL} .fm-view button", has_text=name)
    button.focus()
    page.keyboard.press("Enter")


def test_explore_passes(lab, page, shoot, campaign, fmap):
    _, _, base, token = lab
    open_and_run(page, base, token, "explore_passes")
    scroll_to(page, PANEL)
    assert status(page) == "Solved: 6 of 6 passes in use."
    image = page.locator(PICTURE)
    for index in range(6):
        assert amount(page, pass_style(index).colour, PICTURE) > 100
    assert page.evaluate(SIDEWAYS) == []
    shoot("explore-readings")

    # one pass, its voltage against time
    choose(page, "fm-first")
    choose(page, "fm-quantity", 2)
    choose(page, "fm-against")
    eventually(page, lambda: image.get_attribute("alt")[:20], "Voltage against time")
    eventually(page, lambda: amount(page, pass_style(1).colour, PICTURE) > 100, expected=False)
    assert amount(page, pass_style(0).colour, PICTURE) > 500
    shoot("explore-voltage")

    # two passes: the picture, then others by arrow keys
    view(page, "Two passes")
    eventually(
        page, lambda: image.get_attribute("alt"), agreement_words(pass_agreement(fmap, 0, 1))
    )
    assert amount(page, VERMILION, PICTURE) > 500
    table = page.locator(f"{PANEL} .fm-explore-table")
    assert "They agree" in table.inner_text()
    shoot("explore-pair")
    choose(page, "fm-second")
    alert = page.locator(f"{PANEL} .fm-status .fm-alert")
    alert.wait_for()
    assert "no stretch that both travelled" in alert.inner_text()
    assert image.count() == 0
    choose(page, "fm-second", 2)
    eventually(
        page,
        lambda: image.get_attribute("alt") if image.count() else "",
        agreement_words(pass_agreement(fmap, 0, 4)),
    )
    assert alert.count() == 0

    # the noise of a dwell
    view(page, "Spectrum")
    eventually(page, lambda: (image.get_attribute("alt") or "")[:14], "Power spectral")
    assert amount(page, BLUE, PICTURE) > 300
    assert "walk noise" in table.inner_text()
    shoot("explore-spectrum")
    view(page, "Allan deviation")
    eventually(page, lambda: (image.get_attribute("alt") or "")[:15], "Allan deviation")
    assert amount(page, BLUE, PICTURE) > 300
    assert amount(page, VERMILION, PICTURE) > 200
    choose(page, "fm-dwell")
    count = len(hear(campaign.passes[0], 2).dwell.time)
    told = f"dwell 2 at -60 mm: {count} readings"
    eventually(page, lambda: told in table.inner_text(), expected=True)
    shoot("explore-allan")

    view(page, "Corrections")
    eventually(page, lambda: "Magnetic length: 426" in table.inner_text(), expected=True)
    assert "integrator drift" in table.inner_text()
    shoot("explore-corrections")
    assert page.evaluate(SIDEWAYS) == []


def fill(page, hook, text):
    """Type into a field, and leave it."""
    field = page.locator(f"{TABLES} .{hook} input")
    field.fill(text)
    field.press("Tab")


def test_foreign_tables(lab, page, shoot, tmp_path):
    _, _, base, token = lab
    shutil.copytree(demo_folder() / "foreign_tables", tmp_path / "mine")
    file = tmp_path / "mine" / "campaign.toml"
    file.write_text(
        file.read_text(encoding="utf-8").replace("skip_lines = 3", "skip_lines = 2"),
        encoding="utf-8",
    )
    old = file.read_text(encoding="utf-8")
    open_and_run(page, base, token, "explore_passes")
    scroll_to(page, TABLES)
    said = page.locator(f"{TABLES} .fm-table-status")
    assert "found no unit" in said.inner_text()
    raw = page.locator(f"{TABLES} .fm-raw-box")
    assert "Bench 2, log of one travel" in raw.inner_text()
    shoot("tables-guess")

    fill(page, "fm-table-path", str(tmp_path / "mine" / "pass_01.csv"))
    eventually(page, lambda: "found no unit" in said.inner_text(), expected=True)
    for name, unit in (("time", "s"), ("position", "mm"), ("flux", "uV s")):
        fill(page, f"fm-unit-{name}", unit)
    eventually(page, said.inner_text, "It can be read: 329 readings.")
    parsed = page.locator(f"{TABLES} .fm-parsed-box")
    assert "position (m)" in parsed.inner_text()
    assert page.evaluate(SIDEWAYS) == []
    shoot("tables-parsed")

    fill(page, "fm-table-campaign", str(file))
    page.locator(f"{TABLES} .fm-write").focus()
    page.keyboard.press("Enter")
    told = page.locator(f"{TABLES} .fm-written")
    outcome = "The campaign reads now: 3 passes."
    eventually(page, lambda: outcome in told.inner_text(), expected=True)
    new = file.read_text(encoding="utf-8")
    assert tomllib.loads(new)["table"]["skip_lines"] == 3
    assert new.partition("[table]")[0] == old.partition("[table]")[0]
    assert new.partition("\n[[passes]]")[2] == old.partition("\n[[passes]]")[2]
    shoot("tables-written")
