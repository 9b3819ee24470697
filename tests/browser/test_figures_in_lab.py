"""Live figures in JupyterLab: limits dragged by the mouse, zoom, cursor, themes, the keyboard."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.shipped import demo_folder
from fieldmap.show.captions import field_words
from fieldmap.show.figures import LEFT, RIGHT
from fieldmap.show.look import INK, SKY, VERMILION
from fieldmap.show.panels.grips import Grip, dragged
from fieldmap.show.picture import SIZE
from fieldmap.show.profile import field_at
from fieldmap.show.rows import result_rows

from .notebook_page import (
    DONE,
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

CANVAS = ".fm-live canvas"
SHAPE = "() => document.querySelectorAll('.fm-live canvas')[1].style.cursor"
FOCUS = "() => document.activeElement.className"
PIXELS = """() => {
  const canvas = document.querySelector('.fm-live canvas');
  const data = canvas.getContext('2d').getImageData(0, 0, canvas.width, canvas.height).data;
  let sum = 0; for (let i = 0; i < data.length; i += 4) sum = (sum * 31 + data[i]) % 1000003;
  return sum;
}"""
STEPS = 12


@pytest.fixture(scope="module")
def campaign():
    return fieldmap.load(demo_folder() / "gap_dipole" / "campaign.toml")


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign)


def ends(fmap):
    return tuple(float(end) for end in fmap["mapped_range"].values[0, 0])


def table(results):
    rows = result_rows(results.lines[0], None, 2.0)
    return {row.key: [row.value, row.half_width, row.unit] for row in rows}


def share(position, shown):
    """Where a position stands in the figure, as a share of its width."""
    air = 0.015 * (shown[1] - shown[0])
    left, right = LEFT / SIZE[0], 1 - RIGHT / SIZE[0]
    return left + (position - shown[0] + air) / (shown[1] - shown[0] + 2 * air) * (right - left)


def position(at, shown):
    """The position that stands there."""
    left, right = LEFT / SIZE[0], 1 - RIGHT / SIZE[0]
    air = 0.015 * (shown[1] - shown[0])
    return shown[0] - air + (at - left) / (right - left) * (shown[1] - shown[0] + 2 * air)


class Figure:
    """The live figure as the hand finds it."""

    def __init__(self, page, shown):
        self.page, self.shown = page, shown
        page.locator(CANVAS).first.wait_for()
        page.locator(CANVAS).first.evaluate("e => e.scrollIntoView({block: 'center'})")
        eventually(page, lambda: page.evaluate(PIXELS) > 0, expected=True)

    def at(self, metres, height=0.5):
        box = self.page.locator(CANVAS).first.bounding_box()
        return box["x"] + share(metres, self.shown) * box["width"], box["y"] + height * box[
            "height"
        ]

    def move(self, metres):
        self.page.mouse.move(*self.at(metres))

    def drag(self, start, stop, *, release=True):
        """Positions in m; where in fact the hand was on the way, in whole pixels."""
        (x, y), (last, _) = self.at(start), self.at(stop)
        self.page.mouse.move(round(x), y)
        self.page.mouse.down()
        for step in range(1, STEPS + 1):
            self.page.mouse.move(round(x + (last - x) * step / STEPS), y)
            self.page.wait_for_timeout(25)
        if release:
            self.page.mouse.up()
        box = self.page.locator(CANVAS).first.bounding_box()
        return tuple(
            position((round(end) - box["x"]) / box["width"], self.shown) for end in (x, last)
        )

    def lines(self, colour=VERMILION):
        return vertical_lines(self.page, colour, CANVAS)


def opened(lab, page, name, fmap):
    _, _, base, token = lab
    open_and_run(page, base, token, name)
    scroll_to(page, ".fm-panel")
    assert status(page).startswith("Solved: 6 of 6 passes in use.")
    return Figure(page, ends(fmap))


def test_a_limit_is_dragged(lab, page, shoot, campaign, fmap):
    figure = opened(lab, page, "check_magnetic_length", fmap)
    assert page.evaluate(SIDEWAYS) == []
    box = page.locator(CANVAS).first.bounding_box()
    assert box["x"] + box["width"] < 1366
    eventually(page, lambda: len(figure.lines()), 2)
    for line, limit in zip(figure.lines(), campaign.axis.integrate, strict=True):
        assert line == pytest.approx(share(limit, figure.shown), abs=3e-3)
    figure.move(0.3)
    eventually(page, lambda: page.evaluate(SHAPE), "default")
    figure.move(campaign.axis.integrate[1])
    eventually(page, lambda: page.evaluate(SHAPE), "ew-resize")

    # while it is dragged the line and a number follow
    figure.drag(campaign.axis.integrate[1], 0.15, release=False)
    eventually(page, lambda: round(figure.lines()[-1], 2), round(share(0.15, figure.shown), 2))
    shoot("figure-dragging")
    page.mouse.up()
    field = page.locator(".fm-integrate-high input")
    eventually(page, lambda: abs(float(field.input_value()) - 150) < 2, expected=True)

    # the results are those of the limit where it was let go
    axis = replace(campaign.axis, integrate=(campaign.axis.integrate[0], 0.15))
    stands = float(field.input_value()) / 1e3
    assert dragged(axis, Grip("integrate", 1), stands, figure.shown).integrate[1] == stands
    moved = campaign.axis.moved((campaign.axis.integrate[0], stands), None)
    expected = table(fieldmap.evaluate(fmap, campaign, axis=moved, fringe=False))
    eventually(page, lambda: results_shown(page), expected)
    eventually(page, lambda: len(figure.lines()), 2)
    assert figure.lines()[1] == pytest.approx(share(stands, figure.shown), abs=3e-3)
    assert "limits-moved" in page.locator(".fm-findings-box").inner_text()
    assert f"and {1e3 * stands:.5g} mm" in words(page)

    # an end of the flat window, likewise
    figure.drag(campaign.axis.flat[1], 0.1)
    field = page.locator(".fm-flat-high input")
    eventually(page, lambda: abs(float(field.input_value()) - 100) < 2, expected=True)
    moved = moved.moved(None, (campaign.axis.flat[0], float(field.input_value()) / 1e3))
    expected = table(fieldmap.evaluate(fmap, campaign, axis=moved, fringe=False))
    eventually(page, lambda: results_shown(page), expected)
    shoot("figure-dragged")

    # Escape gives a drag up
    figure.drag(stands, 0.05, release=False)
    page.keyboard.press("Escape")
    eventually(page, lambda: results_shown(page), expected)
    page.mouse.up()
    eventually(page, lambda: len(figure.lines()), 2)
    assert figure.lines()[1] == pytest.approx(share(stands, figure.shown), abs=3e-3)


def test_zoom_and_cursor_hold_in_every_view(lab, page, shoot, fmap):
    figure = opened(lab, page, "map_fringe_field", fmap)
    page.locator(".fm-mode button", has_text="Zoom").click()
    figure.move(0.1)
    eventually(page, lambda: page.evaluate(SHAPE), "crosshair")
    low, high = figure.drag(0.15, 0.3, release=False)
    eventually(page, lambda: amount(page, "#cce9f8", CANVAS) > 5000, expected=True)  # the stretch
    shoot("figure-zooming")
    page.mouse.up()
    fields = page.locator(".fm-shown-low input"), page.locator(".fm-shown-high input")
    eventually(page, lambda: abs(float(fields[0].input_value()) - 1e3 * low) < 2, expected=True)
    shown = tuple(float(field.input_value()) / 1e3 for field in fields)
    assert shown[1] == pytest.approx(high, abs=2e-3)
    page.locator(".fm-mode button", has_text="Point").click()
    zoomed = Figure(page, shown)

    # a press sets the cursor; the field there is read beside the figure
    x, y = zoomed.at(0.25)
    page.mouse.click(x, y)
    at = page.locator(".fm-cursor-at input")
    eventually(page, lambda: abs(float(at.input_value()) - 250) < 1, expected=True)
    cursor = float(at.input_value()) / 1e3
    reading = page.locator(".fm-reading b")
    eventually(page, reading.inner_text, field_words(*field_at(fmap, cursor)))
    stands = share(cursor, shown)
    begins = {
        "Profile": "By along z from",
        "Raw passes": "Flux as recorded",
        "Residuals": "Normalised residuals",
        "Overlaps": "Recorded less predicted flux",
        "Uncertainty": "2u of By from",
    }
    seen = -1
    for name, begin in begins.items():
        page.locator(".fm-kind button", has_text=name).click()
        eventually(page, lambda begin=begin: words(page).startswith(begin), expected=True)
        eventually(page, lambda seen=seen: page.evaluate(PIXELS) != seen, expected=True)
        eventually(
            page,
            lambda: any(abs(line - stands) < 4e-3 for line in zoomed.lines(INK)),
            expected=True,
        )
        seen = page.evaluate(PIXELS)
        shoot(f"figure-zoomed-{name.lower().replace(' ', '-')}")
        assert [float(field.input_value()) / 1e3 for field in fields] == pytest.approx(shown)
    assert page.evaluate(SIDEWAYS) == []

    # the whole line again by its button
    page.locator(".fm-kind button", has_text="Profile").click()
    page.locator(".fm-part button", has_text="Whole line").click()
    eventually(page, lambda: float(fields[0].input_value()), 1e3 * figure.shown[0])
    eventually(page, lambda: len(figure.lines()), 2)

    # the cursor by arrow keys, the figure follows
    page.locator(".fm-cursor-bar .noUi-handle").focus()
    for _ in range(3):
        page.keyboard.press("ArrowLeft")
    eventually(page, lambda: float(at.input_value()) < 1e3 * cursor, expected=True)
    eventually(
        page, lambda: f"By at {float(at.input_value()):.5g} mm" in words(page), expected=True
    )
    page.wait_for_function(DONE)  # all is kept that was moved


def test_the_keyboard_passes_a_figure_by(lab, page, fmap):
    """Tab walks over the figure: its canvas would swallow every key."""
    opened(lab, page, "check_magnetic_length", fmap)
    page.locator(".fm-shown-high input").focus()
    seen = []
    for _ in range(3):
        page.keyboard.press("Tab")
        seen.append(page.evaluate(FOCUS))
    assert not any("matplotlib" in name for name in seen)
    assert any("widget-toggle-button" in name for name in seen)


@pytest.mark.themed
def test_dark_pages_turn_the_lightness_of_a_live_figure(lab, page, shoot, fmap):
    theme = lab[0]
    opened(lab, page, "map_fringe_field", fmap)
    style = page.locator(CANVAS).first.evaluate("e => getComputedStyle(e).filter")
    assert ("invert" in style) == (theme == "Dark")
    assert words(page).startswith("By along z from -480 mm to 480 mm")
    assert page.locator(".fm-picture-box .fm-words").is_visible()
    shoot("figure-live")
    assert SKY != INK
    np.testing.assert_allclose(len(vertical_lines(page, VERMILION, CANVAS)), 2)
