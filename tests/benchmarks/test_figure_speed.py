"""How long the figure of a panel takes to follow: prints a table, asserts no timing."""

import time

import ipywidgets
import numpy as np
import pytest

from fieldmap.shipped import demo_folder
from fieldmap.show.panels.figure import FigurePanel
from fieldmap.show.panels.limits import LimitsPanel
from fieldmap.show.panels.results import ResultsPanel
from fieldmap.show.panels.state import Reduction
from tests.live_page import LivePage

ROUNDS = 15


def timed(call):
    """Median of time and of processor time, ms."""
    walls, works = [], []
    for i in range(ROUNDS):
        wall, work = time.perf_counter(), time.process_time()
        call(i)
        walls.append(1e3 * (time.perf_counter() - wall))
        works.append(1e3 * (time.process_time() - work))
    return float(np.median(walls)), float(np.median(works))


def panel_of(*, static):
    state = Reduction()
    state.parts = LimitsPanel(state), ResultsPanel(state)  # what else follows a limit
    panel = FigurePanel(state, static=static)
    page = None if static else LivePage(panel.view)
    state.open(demo_folder() / "gap_dipole" / "campaign.toml")
    if page:
        page.answer()
    return panel, page


def rows(panel, page):
    """What is timed, by name."""
    state, settle = panel.state, page.settle if page else lambda: None

    def limit(i):
        state.move(integrate=(-0.44 + 1e-3 * i, 0.45))
        settle()

    def window(i):
        state.move(flat=(-0.04, 0.04 + 1e-4 * i))
        settle()

    def cursor(i):
        panel.set_cursor(1e-3 * i)
        settle()

    def zoom(i):
        panel.set_span((0.1, 0.3 + 1e-3 * i))
        settle()

    def view(i):
        panel.kind.value = ("profile", "uncertainty")[i % 2]
        settle()

    timed_rows = {"limit moved, results and figure": limit, "flat window moved": window}
    timed_rows |= {"cursor moved": cursor, "part changed": zoom, "other figure": view}
    for kind in ("passes", "residuals", "overlaps"):
        timed_rows[f"cursor in {kind}"] = _in(panel, kind, cursor)
    return timed_rows


def _in(panel, kind, call):
    def work(i):
        panel.kind.value = kind
        call(i)

    return work


def dragged(panel, page):
    panel.kind.value = "profile"
    panel.set_span(None)
    page.settle()
    x, y = page.where(1e3 * panel.state.axis.integrate[1])
    page.mouse("button_press", x, y, down=True)
    told = timed(lambda i: page.mouse("motion_notify", x - 2 * i, y, down=True))
    page.mouse("button_release", x - 2 * ROUNDS, y)
    return told


@pytest.mark.benchmark
@pytest.mark.parametrize("static", [False, True], ids=["live", "picture"])
def test_response(static):
    panel, page = panel_of(static=static)
    width, height = panel.figure.get_size_inches() * panel.figure.dpi
    print(f"\n{'picture' if static else 'live'}, {width:.0f} x {height:.0f} pixels, ms (processor)")
    for name, call in rows(panel, page).items():
        call(0)
        wall, work = timed(call)
        print(f"  {name:34s} {wall:6.1f} ({work:.1f})")
    if page:
        wall, work = dragged(panel, page)
        print(f"  {'limit dragged, each motion':34s} {wall:6.1f} ({work:.1f})")
    assert panel.state.error == ""
    ipywidgets.Widget.close_all()
