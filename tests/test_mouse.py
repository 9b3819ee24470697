"""The mouse on a live figure: limits dragged, cursor set, parts shown; with a page that answers."""

import gc
import tracemalloc

import ipywidgets
import numpy as np
import pytest
from matplotlib import pyplot as plt
from matplotlib.figure import Figure

import fieldmap
from fieldmap.bench.sources import TanhMagnet
from fieldmap.readings import Axis, Magnet, PointReference
from fieldmap.show.look import MM, VERMILION
from fieldmap.show.panels import mouse as mouse_module
from fieldmap.show.panels.figure import FigurePanel
from fieldmap.show.panels.grips import Grip
from fieldmap.show.panels.limits import LimitsPanel, plain_step
from fieldmap.show.panels.state import Reduction
from fieldmap.show.profile import field_at

from .live_page import LivePage
from .shop import measured, planned

WIDE = TanhMagnet(0.5, length=0.3, lam=0.08 / np.pi)
STEP = plain_step(800.0)
PIXEL = 1.4  # mm: events count whole pixels


@pytest.fixture(scope="module")
def campaign():
    return measured(
        planned((-0.4, 0.1), (0.4, -0.1), (-0.4, 0.4), rate=20.0),
        [PointReference(0.0, float(WIDE.field(0.0)), 1e-5)],
        source=WIDE,
        magnet=Magnet("dipole", "By", gap=0.08, iron_length=0.22),
        axis=Axis("z", (-0.36, 0.36), (-0.02, 0.02)),
    )


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign, knot_spacing=8e-3)


@pytest.fixture
def moves(monkeypatch):
    """Limits of every evaluation that was asked for."""
    asked, evaluate = [], fieldmap.evaluate

    def counted(*args, **more):
        asked.append(more["axis"])
        return evaluate(*args, **more)

    monkeypatch.setattr("fieldmap.show.panels.state.evaluate", counted)
    return asked


@pytest.fixture
def panel(campaign, fmap, monkeypatch, moves):
    monkeypatch.setattr("fieldmap.show.panels.state.stitch", lambda *_, **__: fmap)
    monkeypatch.setattr(mouse_module, "PAUSE", 1e9)  # results at the first motion and at the end
    state = Reduction()
    one = FigurePanel(state, static=False)
    one.limits = LimitsPanel(state)
    one.page = LivePage(one.view)
    state.open(campaign)
    one.page.answer()
    assert state.error == ""
    moves.clear()
    yield one
    assert plt.get_fignums() == []
    ipywidgets.Widget.close_all()


def limits_drawn(panel, axes=0):
    lines = panel.figure.axes[axes].lines
    return sorted(
        float(line.get_xdata()[0])
        for line in lines
        if line.get_color() == VERMILION and line.get_xdata()[0] == line.get_xdata()[1]
    )


def cursor_drawn(panel):
    """Positions of the cursor in all axes, mm."""
    return [
        float(line.get_xdata()[0])
        for ax in panel.figure.axes
        for line in ax.lines
        if line.get_color() == "#1c2126" and line.get_linewidth() == 1.0 and line.get_visible()
    ]


def test_pointer_tells_what_can_be_dragged(panel):
    panel.page.move(360.0)
    assert panel.view.canvas._cursor == "ew-resize"
    panel.page.move(360.0, off=7.0)
    assert panel.view.canvas._cursor == "ew-resize"
    panel.page.move(360.0, off=10.0)
    assert panel.view.canvas._cursor == "default"
    panel.page.move(-20.0, axes=1)
    assert panel.view.canvas._cursor == "ew-resize"


@pytest.mark.parametrize(
    ("start", "stop", "integrate", "flat"),
    [
        (360.0, 150.1, (-0.36, 0.15), (-0.02, 0.02)),
        (-360.0, -99.9, (-0.1, 0.36), (-0.02, 0.02)),
        (20.0, 61.3, (-0.36, 0.36), (-0.02, 0.0612)),
        (-20.0, -7.0, (-0.36, 0.36), (-0.007, 0.02)),
    ],
)
def test_dragging_moves_one_end_and_the_results(panel, fmap, start, stop, integrate, flat):
    panel.page.drag(start, 0.5 * (start + stop), stop)
    axis = panel.state.axis
    np.testing.assert_allclose(axis.integrate, integrate, atol=PIXEL / MM)
    np.testing.assert_allclose(axis.flat, flat, atol=PIXEL / MM)
    for end in (*axis.integrate, *axis.flat):
        assert end * MM / STEP == pytest.approx(round(end * MM / STEP), abs=1e-6)
    before = panel.state.campaign.axis
    same = [
        a == b
        for a, b in zip(
            (*axis.integrate, *axis.flat), (*before.integrate, *before.flat), strict=True
        )
    ]
    assert sum(same) == 3  # no other end has moved
    by_calls = fieldmap.evaluate(fmap, panel.state.campaign, axis=axis, fringe=False)
    shown, told = panel.state.results.lines[0].results, by_calls.lines[0].results
    assert {key: one.value for key, one in shown.items()} == {
        key: one.value for key, one in told.items()
    }
    assert limits_drawn(panel) == limits_drawn(panel, 1)
    assert limits_drawn(panel) == pytest.approx([end * MM for end in axis.integrate])
    assert panel.limits.flat.high.value == pytest.approx(axis.flat[1] * MM)
    assert f"limits of integration {axis.integrate[0] * MM:.5g} mm" in panel.picture.value
    assert panel.mouse.drag is None
    assert panel.view.extra == []


def test_while_dragging_the_line_and_a_number_follow(panel, moves):
    stops = (360.0, 300.0, 250.0, 200.0)
    panel.page.drag(*stops, release=False)
    assert panel.mouse.drag == Grip("integrate", 1)
    assert len(moves) == 1  # the others came too fast
    assert limits_drawn(panel)[1] == pytest.approx(200.0, abs=PIXEL)
    (number,) = panel.view.extra
    assert float(number.get_text().removesuffix(" mm")) == limits_drawn(panel)[1]
    panel.page.release(200.0)
    assert len(moves) == 2
    assert panel.state.axis.integrate[1] == pytest.approx(0.2, abs=PIXEL / MM)


def test_every_motion_sends_an_image_of_the_figure(panel):
    places = [panel.page.where(mm) for mm in np.linspace(360, 200, 9)]
    panel.page.mouse("button_press", *places[0], down=True)
    panel.page.images.clear()
    for place in places[1:]:
        panel.page.mouse("motion_notify", *place, down=True)
    assert len(panel.page.images) >= 8
    assert len(set(panel.page.images)) >= 8


@pytest.mark.parametrize("pause", [0.0, 1e9])
def test_escape_gives_a_drag_up(panel, monkeypatch, pause):
    monkeypatch.setattr(mouse_module, "PAUSE", pause)
    before = panel.state.axis
    panel.page.drag(360.0, 300.0, 250.0, release=False)
    panel.page.key("Escape")
    assert panel.state.axis == before
    assert limits_drawn(panel) == [-360.0, 360.0]
    panel.page.move(200.0, down=True)
    panel.page.release(200.0)
    assert panel.state.axis == before
    assert panel.view.extra == []


def test_a_click_on_a_limit_moves_nothing(panel, moves):
    before = panel.state.axis
    x, y = panel.page.where(360.0)
    panel.page.mouse("button_press", x + 5, y, down=True)
    panel.page.mouse("button_release", x + 5, y)
    assert moves == []
    assert panel.state.axis == before


def test_letting_go_outside_ends_the_drag(panel):
    panel.page.drag(360.0, 300.0, release=False)
    panel.page.move(310.0)  # no button is pressed any more
    assert panel.mouse.drag is None
    assert panel.state.axis.integrate[1] == pytest.approx(0.31, abs=PIXEL / MM)


def test_no_end_leaves_the_map_or_passes_the_other(panel):
    low, high = panel.mapped
    panel.page.drag(-360.0, -500.0)
    assert panel.state.axis.integrate[0] == pytest.approx(low, abs=1e-9)
    panel.page.drag(360.0, 900.0)
    assert panel.state.axis.integrate[1] == pytest.approx(high, abs=1e-9)
    panel.page.drag(20.0, -300.0)
    assert panel.state.axis.flat[1] == pytest.approx(-0.02 + STEP / MM)
    assert panel.state.error == ""


def test_a_press_elsewhere_sets_the_cursor(panel, fmap):
    panel.page.press(150.0)
    panel.page.release(150.0)
    assert panel.cursor == pytest.approx(0.15, abs=PIXEL / MM)
    assert cursor_drawn(panel) == pytest.approx([panel.cursor * MM] * 2)
    assert panel.at.cursor.value == pytest.approx(panel.cursor * MM, abs=1e-6)
    value, u = field_at(fmap, panel.cursor)
    point = next(line for line in panel.figure.axes[0].lines if len(line.get_xdata()) == 1)
    assert point.get_ydata()[0] == pytest.approx(value)
    below = next(line for line in panel.figure.axes[1].lines if len(line.get_xdata()) == 1)
    assert below.get_ydata()[0] == pytest.approx(2 * u * MM)


@pytest.mark.parametrize("kind", ["passes", "residuals", "overlaps", "uncertainty"])
def test_cursor_stands_at_the_same_position_in_every_view(panel, kind):
    panel.at.cursor.value = 150.0
    panel.kind.value = kind
    panel.page.settle()
    assert cursor_drawn(panel) == [150.0]
    panel.page.press(-75.0)
    panel.page.release(-75.0)
    assert panel.cursor == pytest.approx(-0.075, abs=PIXEL / MM)
    panel.kind.value = "profile"
    assert cursor_drawn(panel) == pytest.approx([panel.cursor * MM] * 2)


def test_a_cursor_outside_is_refused_in_words(panel):
    panel.at.cursor.value = 900.0
    assert "position of the cursor: found 900 mm" in panel.state.error
    assert cursor_drawn(panel) == []
    panel.at.cursor.value = 10.0
    assert panel.state.error == ""
    assert cursor_drawn(panel) == [10.0, 10.0]


def test_zooming_shows_the_stretch_in_every_view(panel):
    panel.at.mode.value = "zoom"
    panel.page.drag(100.0, 150.0, 200.0)
    low, high = panel.span
    assert low * MM * 20 == pytest.approx(round(low * MM * 20))  # a plain number
    assert (low, high) == pytest.approx((0.1, 0.2), abs=2e-3)
    assert (panel.at.low.value, panel.at.high.value) == pytest.approx((100, 200), abs=2)
    assert panel.at.parts.value is None
    air = 0.015 * (high - low)
    expected = ((low - air) * MM, (high + air) * MM)
    for kind in ("profile", "uncertainty", "passes", "residuals", "overlaps", "profile"):
        panel.kind.value = kind
        for ax in panel.figure.axes:
            assert ax.get_xlim() == pytest.approx(expected)
    panel.state.move(flat=(-0.01, 0.01))
    assert panel.figure.axes[0].get_xlim() == pytest.approx(expected)
    x, y = panel.figure.axes[0].lines[0].get_data()
    np.testing.assert_allclose(x[[0, -1]], [low * MM, high * MM])
    assert np.ptp(y) > 0.8 * np.ptp(panel.figure.axes[0].get_ylim())  # what is there fills it


def test_a_double_click_shows_the_whole_line(panel):
    panel.at.mode.value = "zoom"
    panel.page.drag(100.0, 200.0)
    panel.page.mouse("dblclick", *panel.page.where(150.0))
    assert panel.span is None
    assert panel.at.parts.value == ""
    assert panel.figure.axes[0].get_xlim() == pytest.approx((-412, 412))


def test_a_slip_of_the_hand_is_no_zoom(panel):
    panel.at.mode.value = "zoom"
    panel.page.drag(100.0, 101.0)
    assert panel.span is None


def test_panning_keeps_the_length_and_stays_on_the_line(panel):
    panel.set_span((0.1, 0.2))
    panel.at.mode.value = "pan"
    panel.page.drag(150.0, 120.0)
    assert panel.span == pytest.approx((0.13, 0.23), abs=1e-3)
    panel.page.drag(200.0, -900.0)
    assert panel.span == pytest.approx((0.3, 0.4), abs=1e-9)
    panel.page.drag(350.0, 340.0, release=False)
    panel.page.key("Escape")
    assert panel.span == pytest.approx((0.3, 0.4), abs=1e-9)


def test_typed_ends_do_the_same(panel):
    panel.at.low.value = 50.0
    assert panel.span == pytest.approx((0.05, 0.4))
    panel.at.high.value = 60.0
    assert panel.span == pytest.approx((0.05, 0.06))
    panel.at.parts.value = ""
    assert panel.span is None
    assert panel.at.low.value == -400.0


def test_limits_are_not_dragged_where_they_are_not_shown(panel, moves):
    panel.kind.value = "residuals"
    panel.page.drag(360.0, 200.0)
    assert moves == []
    assert panel.cursor == pytest.approx(0.2, abs=PIXEL / MM)


def test_a_budget_has_no_positions(panel, moves):
    panel.kind.value = "budget"
    x, y = panel.figure.bbox.width / 2, panel.figure.bbox.height / 2
    panel.page.mouse("button_press", x, y, down=True)
    panel.page.mouse("motion_notify", x - 30, y, down=True)
    panel.page.mouse("button_release", x - 30, y)
    assert moves == []
    assert panel.at.upper.layout.display == "none"
    panel.kind.value = "profile"
    assert panel.at.upper.layout.display == ""


def test_a_failure_of_a_handler_is_said(panel, monkeypatch):
    monkeypatch.setattr(panel.mouse, "_inside", lambda _: 1 / 0)
    panel.page.press(150.0)
    assert "ZeroDivisionError" in panel.state.error


def test_a_figure_made_larger_keeps_its_margins(panel):
    left = panel.figure.axes[0].get_position().x0 * panel.figure.get_figwidth()
    panel.page.say("resize", width=1000, height=500)
    assert panel.figure.get_figwidth() == pytest.approx(1000 / panel.figure.dpi)
    now = panel.figure.axes[0].get_position().x0 * panel.figure.get_figwidth()
    assert now == pytest.approx(left)
    panel.page.drag(360.0, 200.0)
    assert panel.state.axis.integrate[1] == pytest.approx(0.2, abs=PIXEL / MM)


@pytest.mark.slow
def test_two_hundred_changes_leave_no_figure_behind(panel):
    def change(i):
        if i % 4 == 0:
            panel.state.move(integrate=(-0.36 + 1e-3 * (i % 40), 0.36))
        elif i % 40 == 1:
            panel.kind.value = ("profile", "uncertainty", "overlaps", "residuals")[i // 40 % 4]
        else:
            panel.set_cursor(1e-3 * i)
        panel.page.settle()
        panel.page.images.clear()

    for i in range(160):  # every view once
        change(i)
    gc.collect()
    figures = sum(isinstance(one, Figure) for one in gc.get_objects())
    tracemalloc.start()
    for i in range(200):
        change(i)
    gc.collect()
    grown = tracemalloc.get_traced_memory()[0]
    tracemalloc.stop()
    assert sum(isinstance(one, Figure) for one in gc.get_objects()) == figures
    assert plt.get_fignums() == []
    assert grown < 3_000_000  # what is kept of the last views; a figure a change would be 200 MB
    assert panel.state.error == ""


def test_part_and_cursor_are_kept_and_taken_up(panel, campaign):
    assert not {"part", "cursor"} & set(panel.state.settings.changed())  # nothing set by hand yet
    panel.set_span((0.1, 0.2))
    panel.set_cursor(0.15)
    kept = panel.state.settings.changed()
    assert kept["part"] == pytest.approx([0.1, 0.2])
    assert kept["cursor"] == 0.15
    state = Reduction()
    other = FigurePanel(state, static=True)
    assert state.settings.restore(kept) == []
    state.open(campaign)
    assert other.span == pytest.approx((0.1, 0.2))
    assert other.cursor == 0.15
    state.open(campaign)  # another one, of which nothing is kept
    assert other.span is None
    assert other.cursor == 0.0
    (told,) = state.settings.restore({"part": [0.3, 0.1]})
    assert "expected rising ones" in told
