"""Scenes: what is shown after many changes is what is drawn at once."""

from dataclasses import replace

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg

from fieldmap import evaluate, stitch
from fieldmap.readings import Axis, PointReference
from fieldmap.show.picture import blank_figure
from fieldmap.show.plots import draw_passes
from fieldmap.show.profile import Profile, field_at, profile_of
from fieldmap.show.scenes import DecayScene, ProfileScene, ReadingsScene, UncertaintyScene

from .shop import AXIS, measured, out_and_back

SPANS = (None, (0.1, 0.3), (-0.05, 0.05))
MOVED = replace(AXIS, integrate=(-0.3, 0.2), flat=(-0.01, 0.03))


@pytest.fixture(scope="module")
def campaign():
    return measured(out_and_back(rate=20.0), [PointReference(0.0, 0.5, 1e-5)])


@pytest.fixture(scope="module")
def fmap(campaign):
    return stitch(campaign, knot_spacing=8e-3)


def pixels(figure):
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    return np.asarray(canvas.buffer_rgba())


def shown(scene, fmap, axis, span, at):
    cursor = None if at is None else (at, *field_at(fmap, at))
    profile = profile_of(fmap, 0, span)
    if isinstance(scene, ProfileScene):
        results = evaluate(fmap, axis=axis, fringe=False).lines[0].results
        return scene.show(profile, axis, results, "By", cursor)
    return scene.show(profile, axis, "By", cursor)


@pytest.mark.parametrize("kind", [ProfileScene, UncertaintyScene, DecayScene])
@pytest.mark.parametrize("span", SPANS)
def test_changes_end_where_a_fresh_drawing_does(fmap, kind, span):
    used, fresh = kind(blank_figure()), kind(blank_figure())
    shown(used, fmap, AXIS, SPANS[1], 0.2)
    shown(used, fmap, MOVED, None, None)
    assert shown(used, fmap, MOVED, span, 0.02) == shown(fresh, fmap, MOVED, span, 0.02)
    np.testing.assert_array_equal(pixels(used.figure), pixels(fresh.figure))


@pytest.mark.parametrize("kind", [ProfileScene, UncertaintyScene, DecayScene])
def test_changes_keep_the_artists(fmap, kind):
    scene = kind(blank_figure(), grips=True)
    shown(scene, fmap, AXIS, None, 0.1)
    before = scene.figure.findobj(lambda one: one.get_visible())
    shown(scene, fmap, MOVED, None, 0.2)
    after = scene.figure.findobj(lambda one: one.get_visible())
    assert {id(one) for one in after} == {id(one) for one in before}


def test_outline_comes_and_goes_with_the_results(fmap):
    scene, profile = ProfileScene(blank_figure()), profile_of(fmap)
    results = evaluate(fmap, fringe=False).lines[0].results
    for there in (False, True, False):
        scene.show(profile, AXIS, results if there else None, "By")
        names = [text.get_text() for text in scene.axes[0].get_legend().get_texts()]
        assert ("magnetic length" in names) == there


def test_units_follow_the_field():
    s = np.linspace(-1, 1, 11)
    scene, axis = ProfileScene(blank_figure()), Axis("z", (-1, 1), (-0.1, 0.1))
    for size, unit, factor in ((0.5, "T", 1), (5e-3, "mT", 1e3), (0.5, "T", 1)):
        scene.show(Profile(s, size * s, 1e-6 + 0 * s), axis, None, "By", (0.5, 0.5 * size, 1e-6))
        assert scene.axes[0].get_ylabel() == f"By ({unit})"
        line, point = (
            next(one for one in scene.axes[0].lines if len(one.get_xdata()) == n) for n in (11, 1)
        )
        np.testing.assert_allclose(line.get_ydata(), size * s * factor)
        assert point.get_ydata()[0] == pytest.approx(0.5 * size * factor)


def test_grips_stand_on_what_can_be_dragged(fmap):
    scene = ProfileScene(blank_figure(), grips=True)
    shown(scene, fmap, AXIS, None, None)
    scene.move_windows(MOVED)
    limits, flat = scene.windows[0].grips
    np.testing.assert_allclose(limits.get_xdata(), [-300, 200])
    np.testing.assert_allclose(flat.get_xdata(), [-10, 30])
    assert limits.get_marker() != flat.get_marker()
    assert scene.windows[1].grips == ()


def test_readings_fill_the_stretch_that_is_shown(campaign):
    scene = ReadingsScene(blank_figure())
    scene.show(lambda ax: draw_passes(ax, campaign.passes), (0.2, 0.4))
    (ax,) = scene.axes
    inside = [one.flux[(one.position >= 0.2)] for one in campaign.passes]
    low, high = min(part.min() for part in inside), max(part.max() for part in inside)
    assert ax.get_ylim()[0] < low < high < ax.get_ylim()[1]
    assert ax.get_ylim()[1] - ax.get_ylim()[0] < 1.3 * (high - low)
    scene.view(None)
    assert ax.get_xlim()[0] < -400 < 400 < ax.get_xlim()[1]
    assert ax.get_ylim()[1] > max(one.flux.max() for one in campaign.passes)


def test_readings_show_a_cursor_and_hide_it(campaign):
    scene = ReadingsScene(blank_figure())
    scene.show(lambda ax: draw_passes(ax, campaign.passes))
    count = len(scene.axes[0].lines)
    scene.move_cursor((0.1, 0.5, 1e-5))
    scene.move_cursor((0.2, 0.5, 1e-5))
    line = scene.axes[0].lines[-1]
    assert len(scene.axes[0].lines) == count + 1
    assert line.get_xdata()[0] == pytest.approx(200)
    scene.move_cursor(None)
    assert not line.get_visible()
