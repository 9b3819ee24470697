"""The panel at the bench, in a browser: what was set comes back, passes come in."""

from __future__ import annotations

import shutil

import pytest

from fieldmap.shipped import demo_folder

from .notebook_page import SIDEWAYS, eventually, open_and_run, scroll_to, status

pytestmark = pytest.mark.browser

NAME = "check_magnetic_length"
KEPT = " Settings taken up from campaign.panel.json."


def test_what_was_set_comes_back(lab, page, shoot):
    _, _, base, token = lab
    open_and_run(page, base, token, NAME)
    scroll_to(page, ".fm-panel")
    eventually(page, page.locator(".fm-stop").is_hidden, expected=True)
    page.locator(".fm-pass input").nth(1).focus()
    page.keyboard.press("Space")
    eventually(page, lambda: status(page), "Solved: 5 of 6 passes in use.")
    page.locator(".fm-integrate-low input").fill("-300")
    page.keyboard.press("Enter")
    eventually(page, lambda: "limits-moved" in findings(page), expected=True)

    open_and_run(page, base, token, NAME)  # the panel is made anew
    scroll_to(page, ".fm-panel")
    assert status(page) == f"Solved: 5 of 6 passes in use.{KEPT}"
    assert page.locator(".fm-integrate-low input").input_value() == "-300"
    assert not page.locator(".fm-pass input").nth(1).is_checked()
    shoot("panel-engine-restored")

    page.locator(".fm-reset").click()
    eventually(
        page, lambda: status(page).startswith("Solved: 6 of 6 passes in use."), expected=True
    )
    eventually(page, lambda: "limits-moved" in findings(page), expected=False)


def test_quick_changes_end_with_the_newest(lab, page):
    _, _, base, token = lab
    open_and_run(page, base, token, NAME)
    scroll_to(page, ".fm-panel")
    for index in (1, 2, 3, 2):  # faster than a map is solved
        page.locator(".fm-pass input").nth(index).focus()
        page.keyboard.press("Space")
    eventually(page, lambda: status(page), "Solved: 4 of 6 passes in use.")
    marks = page.locator(".fm-pass-row").all_inner_texts()
    assert ["not used" in text for text in marks] == [False, True, False, True, False, False]
    eventually(page, page.locator(".fm-stop").is_hidden, expected=True)
    eventually(page, page.locator(".fm-stale").count, expected=0)


def test_provenance_and_references_by_keyboard(lab, page, shoot):
    _, _, base, token = lab
    open_and_run(page, base, token, NAME)
    scroll_to(page, ".fm-panel")
    about = page.locator(".fm-provenance summary").first
    about.focus()
    page.keyboard.press("Enter")
    facts = page.locator(".fm-provenance dl").first
    eventually(page, facts.is_visible, expected=True)
    assert "wire" in facts.inner_text()
    assert "map − reference" in page.locator(".fm-reference-row").first.inner_text()
    about.evaluate("e => e.scrollIntoView({block: 'center'})")
    shoot("panel-engine-provenance")
    assert page.evaluate(SIDEWAYS) == []
    page.locator(".fm-reference input").first.focus()
    page.keyboard.press("Space")
    eventually(page, lambda: "references in use" in status(page), expected=True)


def test_passes_come_in_while_it_is_open(lab, page, shoot):
    _, root, base, token = lab
    source, bench = demo_folder() / "gap_dipole", root / "bench"
    shutil.rmtree(bench, ignore_errors=True)
    shutil.copytree(source, bench)
    tables = sorted(file.name for file in bench.glob("pass_*.*"))
    (bench / tables[-1]).unlink()
    open_and_run(page, base, token, NAME)
    scroll_to(page, ".fm-panel")
    page.locator(".fm-path input").fill(str(bench))
    page.keyboard.press("Enter")
    eventually(page, lambda: f"{tables[-1]}: found no such file" in status(page), expected=True)
    page.locator(".fm-follow input").focus()
    page.keyboard.press("Space")
    eventually(page, lambda: status(page), "Solved: 5 of 5 passes in use.")
    told = page.locator(".fm-live-told")
    assert f"{tables[-1]}: it is not there." in told.inner_text()
    page.locator(".fm-target-u input").fill("0.0001")
    page.keyboard.press("Enter")
    target = page.locator(".fm-target-told")
    eventually(page, lambda: "target 0.0001 mm: not yet." in target.inner_text(), expected=True)
    told.evaluate("e => e.scrollIntoView({block: 'center'})")
    shoot("panel-engine-live")
    shutil.copy(source / tables[-1], bench)
    eventually(page, lambda: status(page), "Solved: 6 of 6 passes in use.")
    assert page.locator(".fm-pass").count() == 6
    assert "6 passes are there." in told.inner_text()
    assert page.evaluate(SIDEWAYS) == []


def findings(page):
    return page.locator(".fm-findings-box").inner_text()
