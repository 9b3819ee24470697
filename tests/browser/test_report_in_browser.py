"""The report as a person meets it: on a screen, on a narrow one, and on paper."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

import fieldmap
from fieldmap.shipped import demo_folder
from fieldmap.show.report.page import save_report
from fieldmap.show.rows import result_rows

from .conftest import SIZE

pytestmark = pytest.mark.browser

DEMOS = ("gap_dipole", "solenoid_fringe")
TOO_WIDE = """() => [document.documentElement, ...document.querySelectorAll('table, svg')]
  .filter(e => e.scrollWidth > (e.parentElement ?? e).clientWidth + 1)
  .map(e => e.caption ? e.caption.innerText : e.tagName)"""
# where the decimal points of a column stand: the left edges of what follows the whole part
POINTS = """key => [...document.querySelectorAll('table')]
  .filter(table => table.querySelector(`tr[data-key="${key}"]`))
  .flatMap(table => [...table.querySelectorAll('td:nth-child(2) .fm-frac')])
  .map(box => Math.round(box.getBoundingClientRect().left))"""

BUDGET_POINTS = """column => [...document.querySelectorAll(
  `.fm-budget[data-key="magnetic_length"] td:nth-child(${column}) .fm-frac`)]
  .filter(box => box.innerText)
  .map(box => Math.round(box.getBoundingClientRect().left))"""


@pytest.fixture(scope="module", params=DEMOS)
def reported(request, tmp_path_factory):
    """Name, results and report of a demo."""
    fmap = fieldmap.stitch(fieldmap.load(demo_folder() / request.param / "campaign.toml"))
    folder = tmp_path_factory.mktemp(request.param)
    return request.param, fieldmap.evaluate(fmap), save_report(fmap, folder)


@pytest.fixture
def opened(browser, reported):
    """A page that shows the report, and whatever it asked for or complained of."""
    page = browser.new_page(viewport=SIZE)
    asked, complaints = [], []
    page.on("request", lambda request: asked.append(request.url))
    page.on("console", lambda message: complaints.append(message.text))
    page.on("pageerror", lambda error: complaints.append(str(error)))
    page.goto(reported[2].as_uri())
    yield page
    page.close()
    assert asked == [reported[2].as_uri()]
    assert complaints == []


def shots():
    """Folder for pictures, where one is named."""
    folder = os.environ.get("FIELDMAP_SHOTS")
    if folder:
        Path(folder).mkdir(parents=True, exist_ok=True)
    return folder


def main_numbers(results):
    """What a person looks for: value and half width of each result, and the decisions."""
    rows = result_rows(results.lines[0], None, 2.0)
    numbers = [text for row in rows for text in (row.label, row.value, row.half_width)]
    return [*numbers, *(one.decision.upper() for one in results.verdicts)]


def test_on_a_screen(opened, reported):
    name, results, _ = reported
    text = opened.locator("body").inner_text()
    for word in main_numbers(results):
        assert word in text
    answer = opened.locator(".head").bounding_box()
    assert answer["y"] + answer["height"] < SIZE["height"] / 2  # seen without scrolling
    assert opened.evaluate(TOO_WIDE) == []
    assert opened.locator("svg[role=img]").count() >= 3
    if folder := shots():
        opened.screenshot(path=Path(folder, f"report-{name}.png"))
        opened.screenshot(path=Path(folder, f"report-{name}-whole.png"), full_page=True)


def test_decimal_points_stand_below_each_other(opened):
    places = opened.evaluate(POINTS, "integrated_field")
    assert len(places) >= 9
    assert len(set(places)) == 1
    for column in (4, 5):  # of the budget of the magnetic length
        places = opened.evaluate(BUDGET_POINTS, column)
        assert len(places) >= 3
        assert len(set(places)) == 1


def test_on_a_narrow_screen(opened):
    opened.set_viewport_size({"width": 390, "height": 800})
    wide = opened.evaluate("document.documentElement.scrollWidth")
    assert wide <= 390


def test_on_paper(opened, reported, tmp_path):
    name, results, _ = reported
    opened.emulate_media(media="print")
    text = opened.locator("body").inner_text()
    for word in main_numbers(results):
        assert word in text
    for paper in ("A4", "Letter"):
        file = tmp_path / f"{paper}.pdf"
        opened.pdf(path=file, format=paper)
        content = file.read_bytes()
        assert content.startswith(b"%PDF-")
        assert 3 <= content.count(b"/Type /Page\n") <= 10
    if folder := shots():
        opened.pdf(path=Path(folder, f"report-{name}.pdf"), format="A4")


def test_the_words_can_be_found_in_the_print(opened, reported, tmp_path):
    pdfium = pytest.importorskip("pypdfium2")
    _, results, _ = reported
    opened.pdf(path=tmp_path / "report.pdf", format="A4")
    pages = pdfium.PdfDocument(tmp_path / "report.pdf")
    text = " ".join(page.get_textpage().get_text_range() for page in pages)
    for word in main_numbers(results):
        assert word in text
