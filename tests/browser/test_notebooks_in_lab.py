"""The notebooks as a person uses them: JupyterLab in a real browser, mostly by keyboard."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.magnet.budget import budget
from fieldmap.shipped import demo_folder
from fieldmap.show.budget_plots import budget_words
from fieldmap.show.captions import field_words
from fieldmap.show.figures import LEFT, RIGHT
from fieldmap.show.look import BLUE, PINK, VERMILION, pass_style
from fieldmap.show.panels.limits import plain_step
from fieldmap.show.picture import SIZE
from fieldmap.show.profile import field_at
from fieldmap.show.report.page import report_html
from fieldmap.show.rows import result_rows

from .notebook_page import (
    PICTURE,
    SIDEWAYS,
    amount,
    eventually,
    open_and_run,
    results_shown,
    scroll_to,
    status,
    vertical_lines,
    words,
)

pytestmark = pytest.mark.browser

IN_SIGHT = """e => {
  const box = e.getBoundingClientRect();
  return document.elementFromPoint(box.x + box.width / 2, box.y + box.height / 2) === e;
}"""


@pytest.fixture(scope="module")
def campaign():
    return fieldmap.load(demo_folder() / "gap_dipole" / "campaign.toml")


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign)


def table(results):
    """What the table of results should show, by key."""
    rows = result_rows(results.lines[0], None, 2.0)
    return {row.key: [row.value, row.half_width, row.unit] for row in rows}


def place(fmap, position):
    """Where a position stands in the picture of the profile, as a share of its width."""
    low, high = fmap["mapped_range"].values[0, 0]
    air = 0.015 * (high - low)
    share = (position - low + air) / (high - low + 2 * air)
    left, right = LEFT / SIZE[0], 1 - RIGHT / SIZE[0]
    return left + share * (right - left)


def test_magnetic_length(lab, page, shoot, campaign, fmap):
    _, root, base, token = lab
    open_and_run(page, base, token, "check_magnetic_length")
    scroll_to(page, ".jp-Notebook .jp-Cell")
    shoot("check_magnetic_length-top")
    scroll_to(page, ".fm-panel")
    assert status(page) == "Solved: 6 of 6 passes in use."
    assert results_shown(page) == table(fieldmap.evaluate(fmap, campaign))
    assert "ACCEPT Magnetic length" in page.locator(".fm-verdicts-box").inner_text()
    assert page.evaluate(SIDEWAYS) == []
    axis = campaign.axis
    where = [place(fmap, limit) for limit in axis.integrate]
    eventually(page, lambda: len(vertical_lines(page, VERMILION)), 2)  # the page draws it itself
    np.testing.assert_allclose(vertical_lines(page, VERMILION), where, atol=3e-3)
    shoot("check_magnetic_length")

    # the lower limit by arrow keys: three steps of the bar
    low, high = fmap["mapped_range"].values[0, 0] * 1e3
    handle = page.locator(".fm-integrate-bar .noUi-handle").first
    before = float(handle.get_attribute("aria-valuenow"))
    handle.focus()
    for _ in range(3):
        page.keyboard.press("ArrowRight")
    step = plain_step(high - low)
    field = page.locator(".fm-integrate-low input")
    eventually(page, lambda: float(field.input_value()), round(before + 3 * step, 6))
    assert float(handle.get_attribute("aria-valuenow")) == pytest.approx(before + 3 * step)

    # by typing: numbers and picture follow
    field.fill("-300")
    page.keyboard.press("Enter")
    moved = replace(axis, integrate=(-0.3, axis.integrate[1]))
    expected = table(fieldmap.evaluate(fmap, campaign, axis=moved))
    eventually(page, lambda: results_shown(page), expected)
    where = [round(place(fmap, limit), 2) for limit in moved.integrate]
    eventually(page, lambda: [round(x, 2) for x in vertical_lines(page, VERMILION)], where)
    assert "limits-moved" in page.locator(".fm-findings-box").inner_text()
    shoot("check_magnetic_length-moved")

    # where the uncertainty comes from, following the limits
    page.locator(".fm-kind button", has_text="Budget").click()
    expected = budget_words(budget(fmap, axis=moved)["magnetic_length"])
    eventually(page, lambda: words(page), expected)
    shoot("check_magnetic_length-budget")
    page.locator(".fm-of select").select_option(label="Central field")
    expected = budget_words(budget(fmap, axis=moved)["central_field"])
    eventually(page, lambda: words(page), expected)

    # a pass switched off with the space bar, seen in the raw passes
    page.locator(".fm-kind button", has_text="Raw passes").click()
    colour = pass_style(1).colour  # nothing in the profile has it
    eventually(page, lambda: amount(page, colour) > 500, expected=True)
    shoot("check_magnetic_length-passes")
    page.locator(".fm-pass input").nth(1).focus()
    page.keyboard.press("Space")
    eventually(page, lambda: status(page), "Solved: 5 of 6 passes in use.")
    eventually(page, lambda: amount(page, colour) < 20, expected=True)
    fewer = fieldmap.stitch(
        replace(campaign, passes=(campaign.passes[0], *campaign.passes[2:])),
        knot_spacing=float(fmap["knots"].values[0, 0, 1]),
    )
    expected = fieldmap.evaluate(fewer, campaign, axis=moved)
    eventually(page, lambda: results_shown(page), table(expected))

    # the files hold what is shown
    page.locator(".fm-write").click()
    page.locator(".fm-written p").wait_for()
    out = root / "fieldmap-results" / "gap_dipole"
    assert (out / "map.nc").stat().st_size > 0
    report = (out / "report.html").read_text(encoding="utf-8")
    for cell in results_shown(page)["magnetic_length"]:
        assert cell.partition(".")[2] in report
    assert report_html(fieldmap.load_map(out / "map.nc")) == report
    written = json.loads((out / "results.json").read_text(encoding="utf-8"))
    shown = float(results_shown(page)["magnetic_length"][0])
    value = written["lines"][0]["results"]["magnetic_length"]["value"]
    assert shown == pytest.approx(value * 1e3, abs=1e-3)
    scroll_to(page, ".fm-findings-box")
    shoot("check_magnetic_length-findings")

    # below the panel, the same by calls: budget as a chart and as a table, the report with a link
    selector = 'img[alt^="Uncertainty of magnetic length"]'
    chart = page.locator(selector)
    assert chart.get_attribute("alt") == budget_words(budget(fmap)["magnetic_length"])
    assert page.locator(".fm-budget tr.fm-sum").count() == 2
    chart.evaluate("e => e.scrollIntoView({block: 'center'})")
    eventually(page, lambda: chart.evaluate(IN_SIGHT), expected=True)
    assert amount(page, BLUE, selector) > 5000  # the bars
    shoot("check_magnetic_length-budget-calls")
    by_calls = root / "fieldmap-results" / "by_calls" / "report.html"
    assert by_calls.read_text(encoding="utf-8") == report_html(fmap)
    link = page.locator("a", has_text="by_calls/report.html")
    assert link.count() == 1
    link.scroll_into_view_if_needed()
    shoot("check_magnetic_length-report-link")

    # a wrong path is said in words, and no number stays
    path = page.locator(".fm-path input")
    path.fill("no/such/campaign.toml")
    page.keyboard.press("Enter")
    page.locator(".fm-status [role=alert]").wait_for()
    assert "campaign.toml" in status(page)
    assert "no such file" in status(page)
    assert results_shown(page) == {}
    scroll_to(page, ".fm-panel")
    shoot("check_magnetic_length-error")
    assert page.evaluate(SIDEWAYS) == []


def test_fringe_map(lab, page, shoot, fmap):
    _, _, base, token = lab
    open_and_run(page, base, token, "map_fringe_field")
    scroll_to(page, ".fm-panel")
    assert status(page) == "Solved: 6 of 6 passes in use."
    assert page.evaluate(SIDEWAYS) == []
    shoot("map_fringe_field")

    # the exit fringe on a logarithmic scale: the curve of its uncertainty appears
    assert amount(page, PINK) < 20
    page.locator(".fm-part button", has_text="Exit fringe").click()
    page.locator(".fm-decades input").focus()
    page.keyboard.press("Space")
    eventually(page, lambda: amount(page, PINK) > 300, expected=True)
    eventually(page, lambda: "logarithmic" in words(page), expected=True)

    # the field at a typed position, then one step further by arrow key
    at = page.locator(".fm-cursor-at input")
    at.fill("230")
    page.keyboard.press("Enter")
    reading = page.locator(".fm-reading b")
    eventually(page, reading.inner_text, field_words(*field_at(fmap, 0.23)))
    eventually(page, lambda: "By at 230 mm" in words(page), expected=True)
    shoot("map_fringe_field-decay")
    low, high = fmap["mapped_range"].values[0, 0] * 1e3
    page.locator(".fm-cursor-bar .noUi-handle").focus()
    page.keyboard.press("ArrowRight")
    step = plain_step(high - low)
    eventually(page, reading.inner_text, field_words(*field_at(fmap, 0.23 + step / 1e3)))
    eventually(page, lambda: float(at.input_value()), round(230 + step, 6))

    # residuals: those of the exit fringe alone, then every pass in its colour
    page.locator(".fm-kind button", has_text="Residuals").click()
    eventually(page, lambda: "residuals" in words(page), expected=True)
    eventually(page, lambda: amount(page, pass_style(3).colour) > 100, expected=True)
    assert amount(page, pass_style(5).colour) < 100  # it was nowhere near, but for its legend
    page.locator(".fm-part button", has_text="Whole line").click()
    for index in range(6):
        colour = pass_style(index).colour
        eventually(page, lambda colour=colour: amount(page, colour) > 100, expected=True)
    shoot("map_fringe_field-residuals")
    assert page.evaluate(SIDEWAYS) == []


@pytest.mark.themed
@pytest.mark.parametrize("name", ["check_magnetic_length", "map_fringe_field"])
def test_pictures_suit_the_theme(lab, page, name):
    """Dark pages turn the lightness of pictures; text stands out from its ground."""
    theme, _, base, token = lab
    open_and_run(page, base, token, name)
    picture = page.locator(PICTURE).first
    picture.wait_for()
    style = picture.evaluate("e => getComputedStyle(e).filter")
    assert ("invert" in style) == (theme == "Dark")
    colours = page.locator(".fm-panel .fm-table td").first.evaluate(
        "e => [getComputedStyle(e).color, getComputedStyle(document.querySelector('.jp-Notebook'))"
        ".backgroundColor]"
    )
    ink, ground = (
        np.mean([float(part) for part in colour.strip("rgba()").split(",")[:3]]) / 255
        for colour in colours
    )
    assert abs(ink - ground) > 0.6
