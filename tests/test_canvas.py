"""Figures in panels: live where a page answers, pictures where not, and the same to draw on."""

import base64
import gc
import io
import subprocess
import sys
import tracemalloc

import ipywidgets
import numpy as np
import pytest
from matplotlib import pyplot as plt
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from PIL import Image

from fieldmap.show.panels import canvas
from fieldmap.show.panels.canvas import STATIC_VARIABLE, FigureView

from .live_page import LivePage

UPDATES = 200


@pytest.fixture(autouse=True)
def _nothing_left_behind():
    yield
    assert plt.get_fignums() == []
    ipywidgets.Widget.close_all()


@pytest.fixture(params=[True, False], ids=["static", "live"])
def view(request):
    one = FigureView(static=request.param)
    one.page = None if request.param else LivePage(one)
    return one


def line_on(view):
    view.figure.clear()
    ax = view.figure.subplots()
    ax.set_xlim(0, 10)
    ax.set_ylim(0, 10)
    (line,) = ax.plot([0, 10], [5, 5], color="#ff0000", linewidth=5)
    return line


def seen(view):
    """What the user sees: pixels of the picture, or of the last image that was sent."""
    if view.live:
        png = view.page.images[-1]
    else:
        png = base64.b64decode(view.picture.value.split("base64,")[1].split('"')[0])
    return np.asarray(Image.open(io.BytesIO(png)).convert("RGB")).astype(int)


def red_rows(view):
    """Height of the red line, as a share of the figure from above."""
    pixels = seen(view)
    red = (pixels[..., 0] > 230) & (pixels[..., 1:] < 60).all(axis=-1)
    return np.flatnonzero(red.sum(axis=1) > 50).mean() / len(pixels)


def whole(view):
    """The same figure drawn in one layer."""
    alone = FigureCanvasAgg(view.figure)
    alone.draw()
    pixels = np.asarray(alone.buffer_rgba())[..., :3].astype(int)
    view.figure.set_canvas(view.canvas)
    return pixels


def test_a_picture_until_the_page_answers(view):
    line_on(view)
    view.refresh('a "red" line')
    assert 'alt="a &quot;red&quot; line"' in view.picture.value
    assert view.widget.children == (view.picture,)
    assert not view.live
    if view.page:
        view.page.answer()
        assert view.live
        assert view.widget.children == (view.canvas, view.picture)
        assert view.picture.value == '<p class="fm-words">a &quot;red&quot; line</p>'
        np.testing.assert_array_equal(seen(view), whole(view))


def test_a_page_that_never_answers_sees_every_picture():
    view = FigureView(static=False)
    line = line_on(view)
    view.refresh("five")
    five = red_rows(view)
    line.set_ydata([2, 2])
    view.refresh("two")
    assert red_rows(view) > five + 0.1
    assert 'alt="two"' in view.picture.value


def test_layers_show_what_one_drawing_shows(view):
    line = line_on(view)
    view.refresh("five")
    if view.page:
        view.page.answer()
    for height in (2, 8, 8, 3):
        line.set_ydata([height, height])
        view.refresh(str(height))
        np.testing.assert_array_equal(seen(view), whole(view))


def test_ground_is_drawn_again_only_when_it_has_changed(view, monkeypatch):
    line = line_on(view)
    view.refresh("five")
    if view.page:
        view.page.answer()
    grounds, draw = [], Figure.draw
    monkeypatch.setattr(Figure, "draw", lambda *args: grounds.append(1) or draw(*args))
    line.set_ydata([2, 2])
    view.refresh("two")
    assert grounds == []
    view.figure.axes[0].set_ylim(0, 20)
    view.refresh("two of twenty")
    if view.page:
        view.page.settle()
    assert grounds == [1]
    np.testing.assert_array_equal(seen(view), whole(view))


def test_texts_are_drawn_with_the_marks(view):
    line_on(view)
    text = view.figure.axes[0].text(5, 5, "here")
    view.refresh("here")
    if view.page:
        view.page.answer()
    text.set_text("there")
    view.refresh("there")
    if view.page:
        view.page.settle()
    np.testing.assert_array_equal(seen(view), whole(view))


def test_a_sketch_shows_extra_marks_and_no_other_words():
    view = FigureView(static=False)
    view.page = LivePage(view)
    line = line_on(view)
    view.refresh("five")
    view.page.answer()
    line.set_ydata([2, 2])
    before = len(view.page.images)
    view.sketch()
    assert len(view.page.images) == before + 1
    assert ">five<" in view.picture.value
    assert red_rows(view) > 0.6


def test_nothing_to_show_is_said(view):
    line_on(view)
    view.refresh("five")
    if view.page:
        view.page.answer()
    view.blank("<p>nothing</p>")
    assert view.picture.value == "<p>nothing</p>"
    if view.page:
        assert view.canvas.layout.display == "none"
        view.refresh("five")
        assert view.canvas.layout.display == ""


def test_another_size_is_drawn_in_full():
    view = FigureView(static=False)
    view.page = LivePage(view)
    line_on(view)
    view.refresh("five")
    view.page.answer()
    view.page.say("resize", width=500, height=300)
    assert seen(view).shape == (300, 500, 3)
    np.testing.assert_array_equal(seen(view), whole(view))


@pytest.mark.parametrize(("value", "static"), [("1", True), ("0", False), ("", False)])
def test_pictures_on_request(monkeypatch, value, static):
    monkeypatch.setenv(STATIC_VARIABLE, value)
    shell = type("Shell", (), {"kernel": object()})()
    monkeypatch.setattr("IPython.core.getipython.get_ipython", lambda: shell)
    assert hasattr(FigureView().canvas, "on_msg") != static


def test_pictures_where_no_kernel_runs():
    assert not hasattr(FigureView().canvas, "on_msg")


def test_pictures_where_the_live_canvas_fails(monkeypatch):
    def fail():
        raise ImportError("no such thing here")

    canvas._canvas_class.cache_clear()
    monkeypatch.setattr(canvas, "_imported", fail)
    view = FigureView(static=False)
    line_on(view)
    view.refresh("five")
    assert 'alt="five"' in view.picture.value
    canvas._canvas_class.cache_clear()


def test_the_backend_of_the_session_stays():
    code = (
        "import matplotlib; matplotlib.use('svg'); from fieldmap.show.panels.canvas import "
        "FigureView; view = FigureView(static=False); assert hasattr(view.canvas, 'on_msg'); "
        "from matplotlib import pyplot; print(matplotlib.get_backend(), pyplot.get_fignums())"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert told.stdout.strip() == "svg []"


def test_pointer_has_the_shape_asked_for():
    view = FigureView(static=False)
    for name, shape in (("limit", "ew-resize"), ("hand", "pointer"), ("", "default")):
        view.point(name)
        assert view.canvas._cursor == shape


@pytest.mark.slow
def test_updates_leave_no_figure_behind(view):
    line = line_on(view)
    view.refresh("five")
    if view.page:
        view.page.answer()
    gc.collect()
    figures = sum(isinstance(one, Figure) for one in gc.get_objects())
    artists = len(view.figure.findobj())
    tracemalloc.start()
    for i in range(UPDATES):
        line.set_ydata([i % 10, 5])
        view.refresh(str(i))
        if view.page:
            view.page.images.clear()
        if i == UPDATES // 4:
            gc.collect()
            before = tracemalloc.get_traced_memory()[0]
    gc.collect()
    grown = tracemalloc.get_traced_memory()[0] - before
    tracemalloc.stop()
    assert sum(isinstance(one, Figure) for one in gc.get_objects()) == figures
    assert len(view.figure.findobj()) == artists
    assert grown < 200_000  # less than one picture of the figure in 150 updates
