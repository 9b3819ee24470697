"""A pass whose leads were turned round, in a browser: it is named, and put right by a tick."""

from __future__ import annotations

import pytest

from tests.offering import turned_demo

from .notebook_page import SIDEWAYS, eventually, open_and_run, results_shown, scroll_to, status

pytestmark = pytest.mark.browser

NAME = "check_magnetic_length"


def findings(page):
    return page.locator(".fm-findings").all_inner_texts()


def test_an_offered_correction_is_ticked(lab, page, shoot):
    _, root, base, token = lab
    turned_demo(root / "turned")
    open_and_run(page, base, token, NAME)
    scroll_to(page, ".fm-panel")
    assert status(page) == "Solved: 6 of 6 passes in use."
    right = results_shown(page)
    assert page.locator(".fm-corrections-section").is_hidden()

    page.locator(".fm-chooser input[type=text]").fill(str(root / "turned"))
    page.keyboard.press("Enter")
    eventually(page, lambda: "polarity-reversed" in " ".join(findings(page)), expected=True)
    eventually(page, page.locator(".fm-corrections-section").is_visible, expected=True)
    assert results_shown(page) != right
    assert "does not fit" in page.locator(".fm-pass-row").nth(0).inner_text()
    assert "look at it" in page.locator(".fm-pass-row").nth(1).inner_text()
    page.locator(".fm-corrections-section").scroll_into_view_if_needed()
    shoot("corrections-offered")

    page.locator(".fm-corrections-section input").first.focus()
    page.keyboard.press("Space")
    eventually(page, lambda: "polarity-reversed" in " ".join(findings(page)), expected=False)
    eventually(page, lambda: results_shown(page) == right, expected=True)
    assert page.locator(".fm-corrections-section input").first.is_checked()
    assert page.evaluate(SIDEWAYS) == []
    shoot("corrections-made")
