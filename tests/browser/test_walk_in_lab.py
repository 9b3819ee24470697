"""What a first user does and no other test here does: stop a solve, go away and come back."""

from __future__ import annotations

import pytest

from .notebook_page import (
    SIDEWAYS,
    eventually,
    open_and_run,
    results_shown,
    scroll_to,
    status,
    words,
)

pytestmark = pytest.mark.browser

NAME = "check_magnetic_length"
KEPT = " Settings taken up from campaign.panel.json."
CHOSEN = "Solved: 5 of 6 passes in use. 0 of 1 references in use."
# a quick hand: it presses Stop as soon as that can be seen while a map is solved
PRESS_STOP = """() => new Promise(done => {
  const stop = document.querySelector('.fm-stop');
  const press = () => {
    const solving = document.querySelector('.fm-status').innerText.includes('solving');
    if (stop.offsetParent && solving) { stop.click(); done(); } else { setTimeout(press, 2); }
  };
  press();
})"""


def opened(lab, page, name):
    _, _, base, token = lab
    open_and_run(page, base, token, name)
    scroll_to(page, ".fm-panel")
    assert status(page) == "Solved: 6 of 6 passes in use."


def shows(page, name, begin):
    """Choose a figure, and wait for what it is said to show."""
    page.locator(".fm-kind button", has_text=name).click()
    eventually(page, lambda: words(page).startswith(begin), expected=True)


@pytest.mark.parametrize("name", [NAME, "map_fringe_field"])
def test_a_solve_is_stopped_and_asked_for_again(lab, page, shoot, name):
    opened(lab, page, name)
    before = results_shown(page)
    page.locator(".fm-pass input").nth(1).focus()
    page.keyboard.press("Space")
    page.evaluate(PRESS_STOP)
    out_of_date = "Out of date: map and results are those of an earlier choice. Press Solve."
    eventually(page, lambda: status(page), out_of_date)
    assert results_shown(page) == before  # the last good map stays, and says that it is old
    assert "Out of date" in page.locator(".fm-verdicts-box").inner_text()
    assert "to be solved" in page.locator(".fm-pass-row").nth(0).inner_text()
    assert page.locator(".fm-stop").is_hidden()
    shoot(f"walk-stopped-{name}")
    page.locator(".fm-solve").focus()
    page.keyboard.press("Enter")
    eventually(page, lambda: status(page), "Solved: 5 of 6 passes in use.")
    assert page.locator(".fm-solve").is_hidden()
    assert "Out of date" not in page.locator(".fm-verdicts-box").inner_text()
    assert results_shown(page) != before


def test_a_solve_is_stopped_while_passes_are_explored(lab, page, shoot):
    opened(lab, page, "explore_passes")
    page.locator(".fm-view button", has_text="Two passes").click()
    image = page.locator(".fm-explore-panel .fm-picture-box img")
    eventually(page, image.count, 1)
    page.locator(".fm-explore-panel .fm-again").focus()
    page.keyboard.press("Enter")
    page.evaluate(PRESS_STOP)
    eventually(page, lambda: status(page), "Not solved. Press Solve.")
    assert image.count() == 0
    assert "there is no map" in page.locator(".fm-explore-panel .fm-picture-box").inner_text()
    shoot("walk-stopped-explore_passes")
    page.locator(".fm-solve").focus()
    page.keyboard.press("Enter")
    eventually(page, lambda: status(page), "Solved: 6 of 6 passes in use.")
    eventually(page, image.count, 1)


def test_a_choice_is_written_read_as_a_report_and_found_again(lab, page, shoot):
    _, root, base, token = lab
    opened(lab, page, NAME)
    page.locator(".fm-reference input").first.focus()
    page.keyboard.press("Space")
    page.locator(".fm-pass input").nth(1).focus()
    page.keyboard.press("Space")
    eventually(page, lambda: status(page), CHOSEN)
    shows(page, "Residuals", "Normalised residuals")
    shows(page, "Overlaps", "Recorded less predicted flux")
    page.locator(".fm-target-u input").fill("1")
    page.keyboard.press("Enter")
    target = page.locator(".fm-target-told")
    eventually(page, lambda: "target 1 mm: reached." in target.inner_text(), expected=True)

    page.locator(".fm-write").focus()
    page.keyboard.press("Enter")
    page.locator(".fm-written p").wait_for()
    shown = results_shown(page)
    out = root / "fieldmap-results" / "gap_dipole"
    names = ["campaign.panel.json", "map.nc", "report.html", "results.json"]
    assert sorted(file.name for file in out.iterdir()) == names

    page.goto(f"{base}/files/fieldmap-results/gap_dipole/report.html?token={token}")
    text = page.locator("body").inner_text()
    assert all(cell in text for cell in shown["magnetic_length"])
    assert "passes-left-out" in text
    assert "references-left-out" in text
    shoot("walk-report")

    open_and_run(page, base, token, NAME)
    scroll_to(page, ".fm-panel")
    assert status(page) == CHOSEN + KEPT
    assert results_shown(page) == shown
    assert not page.locator(".fm-reference input").first.is_checked()
    assert page.locator(".fm-target-u input").input_value() == "1"
    assert words(page).startswith("Recorded less predicted flux")
    assert page.evaluate(SIDEWAYS) == []
    page.locator(".fm-reset").focus()
    page.keyboard.press("Enter")
    eventually(
        page, lambda: status(page).startswith("Solved: 6 of 6 passes in use."), expected=True
    )
    eventually(page, lambda: page.locator(".fm-target-u input").input_value(), "0")
    assert page.locator(".fm-reference input").first.is_checked()
