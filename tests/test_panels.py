"""Panels without browser, kernel or server: values set, buttons clicked, numbers and artists."""

import gc
import json
import os
import threading
from dataclasses import replace
from pathlib import Path

import ipywidgets
import numpy as np
import pytest
from ipywidgets.widgets.widget import _instances
from matplotlib import pyplot as plt
from matplotlib.figure import Figure

import fieldmap
from fieldmap.bench.sources import TanhMagnet
from fieldmap.bench.writing import write_campaign
from fieldmap.errors import RefusedError
from fieldmap.readings import Axis, Limit, Magnet, PointReference
from fieldmap.shipped import demo_folder
from fieldmap.show.look import MM, VERMILION, pass_style
from fieldmap.show.panels import FringeMapPanel, MagneticLengthPanel
from fieldmap.show.panels.campaign import demo_campaigns
from fieldmap.show.panels.limits import plain_step
from fieldmap.show.panels.state import Reduction

from .shop import RECT, measured, planned

WIDE = TanhMagnet(0.5, length=0.3, lam=0.08 / np.pi)
TRAVELS = (
    *planned((-0.4, 0.1), (0.4, -0.1), rate=20.0),
    *planned((-0.4, 0.4), probe=RECT, rate=20.0),
)
STITCH = fieldmap.stitch


@pytest.fixture(scope="module")
def campaign():
    return measured(
        TRAVELS,
        [PointReference(0.0, float(WIDE.field(0.0)), 1e-5)],
        source=WIDE,
        magnet=Magnet("dipole", "By", gap=0.08, iron_length=0.22, current=85.0),
        axis=Axis("z", (-0.4, 0.4), (-0.02, 0.02)),
        limits=[Limit("magnetic_length", 0.2995, 0.3005)],
    )


@pytest.fixture(scope="module")
def folder(campaign, tmp_path_factory):
    place = tmp_path_factory.mktemp("bench") / "tanh_magnet"
    write_campaign(campaign, place)
    return place


@pytest.fixture(scope="module")
def known():
    """Maps solved already: the tests count how often the panels ask, not how long it takes."""
    return {}


@pytest.fixture(autouse=True)
def solves(monkeypatch, known):
    """Names of the passes of every solve that was asked for."""
    asked = []

    def stitch(campaign, *, knot_spacing=None, **more):
        names = tuple(one.name for one in campaign.passes)
        asked.append((names, knot_spacing))
        if asked[-1] not in known:
            known[asked[-1]] = STITCH(campaign, knot_spacing=knot_spacing, **more)
        return known[asked[-1]]

    monkeypatch.setattr("fieldmap.show.panels.state.stitch", stitch)
    return asked


@pytest.fixture(autouse=True)
def evaluations(monkeypatch):
    asked, evaluate = [], fieldmap.evaluate

    def counted(*args, **more):
        asked.append(more.get("axis"))
        return evaluate(*args, **more)

    monkeypatch.setattr("fieldmap.show.panels.state.evaluate", counted)
    return asked


@pytest.fixture(autouse=True)
def _nothing_left_behind(monkeypatch, tmp_path):
    monkeypatch.chdir(tmp_path)
    yield
    assert plt.get_fignums() == []
    ipywidgets.Widget.close_all()


@pytest.fixture(params=[MagneticLengthPanel, FringeMapPanel])
def either(request, campaign):
    one = request.param()
    one.open(campaign)
    return one


@pytest.fixture
def panel(campaign):
    one = MagneticLengthPanel()
    one.open(campaign)
    return one


@pytest.fixture
def fringe_panel(campaign):
    one = FringeMapPanel()
    one.open(campaign)
    return one


def limits_drawn(panel):
    """Positions of the marked limits in the picture, mm."""
    upper = panel.figure.figure.axes[0]
    return sorted(line.get_xdata()[0] for line in upper.lines if line.get_color() == VERMILION)


def test_opening_solves_once_and_shows_what_calls_give(either, campaign, solves, evaluations):
    assert either.state.error == ""
    assert [spacing for _, spacing in solves] == [None]
    assert len(evaluations) == 1
    by_calls = fieldmap.evaluate(either.state.fmap, campaign, fringe=False)
    assert either.state.results.as_dict() == by_calls.as_dict()
    assert "Magnetic length" in either.results.table.value
    assert "<b>ACCEPT</b> Magnetic length (299.5 to 300.5 mm)" in either.results.verdicts.value
    assert 'role="status"' in either.status.widget.value
    assert "3 of 3 passes" in either.status.widget.value


def test_moving_a_limit_evaluates_again_without_solving(either, solves, evaluations):
    before = either.state.results["integrated_field"].value
    either.limits.integrate.low.value = -120.0
    assert either.state.axis.integrate == (-0.12, 0.4)
    assert either.limits.integrate.bar.value == (-120.0, 400.0)
    true = float(WIDE.between(-0.12, 0.4))
    assert either.state.results["integrated_field"].value == pytest.approx(true, abs=2e-4)
    assert before > true + 0.005
    assert (len(solves), len(evaluations)) == (1, 2)
    assert limits_drawn(either) == [-120.0, 400.0]
    assert "limits-moved" in either.results.findings.value


def test_moving_a_bar_is_the_same_as_typing(panel):
    panel.limits.integrate.bar.value = (-400.0, 150.0)
    assert panel.state.axis.integrate == (-0.4, 0.15)
    assert panel.limits.integrate.high.value == 150.0
    panel.limits.flat.bar.value = (-30.0, 20.0)
    assert panel.state.axis.flat == (-0.03, 0.02)
    assert panel.limits.flat.low.value == -30.0


def test_a_bar_that_rounds_its_other_end_leaves_it_alone(panel):
    panel.limits.flat.low.value = -20.1234
    step = panel.limits.flat.bar.step
    low, high = panel.limits.flat.bar.value
    panel.limits.flat.bar.value = (round(low / step) * step, high + step)
    assert panel.state.axis.flat == pytest.approx((-0.0201234, (high + step) / MM), abs=1e-12)


def test_back_to_the_limits_of_the_file(panel, campaign):
    panel.limits.integrate.low.value = -300.0
    panel.limits.flat.high.value = 33.0
    panel.limits.back.click()
    assert panel.state.axis == campaign.axis
    assert panel.limits.flat.high.value == 20.0
    assert "limits-moved" not in panel.results.findings.value


@pytest.mark.parametrize(
    ("low", "words"),
    [
        (-900.0, "found -900 to 400 mm, expected limits within the mapped range"),
        (500.0, "found from 500 to 400 mm, expected a first limit below the second"),
    ],
)
def test_impossible_limits_are_said_and_no_number_stays(panel, low, words):
    panel.limits.integrate.low.value = low
    assert words in panel.state.error
    assert 'role="alert"' in panel.status.widget.value
    assert words in panel.status.widget.value
    assert panel.state.results is None
    assert "No results." in panel.results.table.value
    assert panel.results.verdicts.value == ""
    panel.limits.integrate.low.value = -300.0
    assert panel.state.error == ""
    assert "300.0" in panel.results.table.value


def test_switching_a_pass_solves_again_with_the_same_knots(panel, campaign, solves):
    spacing = float(panel.state.fmap["knots"].values[..., 1].min())
    panel.passes.boxes[1].value = False
    names = tuple(one.name for one in campaign.passes)
    assert solves[1:] == [((names[0], names[2]), spacing)]
    assert panel.state.error == ""
    assert "2 of 3 passes" in panel.status.widget.value
    assert "not used" in panel.passes.notes[1].value
    assert "fits, residuals" in panel.passes.notes[2].value
    assert "passes-left-out" in panel.results.findings.value
    panel.passes.boxes[1].value = True
    assert len(solves) == 2  # the map of all passes is still there
    assert "passes-left-out" not in panel.results.findings.value


def test_raw_passes_show_those_in_use_in_their_own_colours(panel, campaign):
    panel.figure.kind.value = "passes"
    axes = panel.figure.figure.axes[0]
    colours = [line.get_color() for line in axes.lines[:3]]  # then the cursor
    assert colours == [pass_style(i).colour for i in range(3)]
    panel.passes.boxes[0].value = False
    colours = [line.get_color() for line in axes.lines[:2]]
    assert colours == [pass_style(i).colour for i in (1, 2)]
    np.testing.assert_allclose(axes.lines[0].get_xdata(), campaign.passes[1].position * MM)
    assert "2 passes" in panel.figure.picture.value


def test_residuals_show_those_of_the_map(panel):
    panel.figure.kind.value = "residuals"
    axes = panel.figure.figure.axes[0]
    assert (
        sum(len(line.get_ydata()) for line in axes.lines[:3]) == panel.state.fmap.sizes["increment"]
    )
    assert [line.get_color() for line in axes.lines[:3]] == [pass_style(i).colour for i in range(3)]


def test_every_picture_has_a_text_alternative(either):
    words = {}
    for _, kind in either.figure.kind.options:
        either.figure.kind.value = kind
        words[kind] = either.figure.picture.value.split('alt="')[1].split('"')[0]
    assert len(set(words.values())) == 6
    assert all(len(text) > 40 for text in words.values())


def test_all_passes_off_is_refused_in_words(panel):
    for box in panel.passes.boxes:
        box.value = False
    assert "found no measured pass" in panel.state.error
    assert panel.state.results is None
    assert "there is no map" in panel.figure.picture.value
    panel.limits.integrate.low.value = -300.0
    assert "found no measured pass" in panel.state.error  # still true, still said
    panel.passes.boxes[2].value = True
    assert panel.state.error == ""


def test_what_cannot_be_solved_is_said_as_it_is(panel, monkeypatch):
    def refuse(*_, **__):
        raise RefusedError("code", "pass_02.csv", "found <nothing> & more.")

    monkeypatch.setattr("fieldmap.show.panels.state.stitch", refuse)
    panel.passes.boxes[0].value = False
    assert panel.state.error == "pass_02.csv: found <nothing> & more."
    assert "pass_02.csv: found &lt;nothing&gt; &amp; more." in panel.status.widget.value


def test_a_failure_of_the_kit_is_shown_and_logged(panel, monkeypatch, caplog):
    monkeypatch.setattr("fieldmap.show.panels.state.evaluate", lambda *_, **__: 1 / 0)
    panel.limits.integrate.low.value = -300.0
    assert "ZeroDivisionError: division by zero" in panel.status.widget.value
    assert "alert" in panel.status.widget.value
    assert panel.state.results is None
    assert "evaluating failed" in caplog.text
    assert "Traceback" in caplog.text


def test_a_failure_in_showing_is_shown_too(panel, monkeypatch):
    monkeypatch.setattr(panel.figure, "_drawn", lambda: 1 / 0)
    panel.limits.integrate.low.value = -300.0
    assert "showing: found a failure of the kit's own (ZeroDivisionError" in panel.state.error
    assert "alert" in panel.status.widget.value
    assert panel.state.results is not None


def test_files_hold_what_is_shown(panel, tmp_path):
    panel.limits.integrate.low.value = -300.0
    panel.passes.boxes[1].value = False
    panel.save.folder.value = str(tmp_path / "out")
    panel.save.write.click()
    assert panel.state.error == ""
    written = json.loads((tmp_path / "out" / "results.json").read_text(encoding="utf-8"))
    shown = panel.state.results.as_dict()["lines"][0]["results"]
    assert written["lines"][0]["results"].items() >= shown.items()
    codes = [finding["code"] for finding in written["findings"]]
    assert {"passes-left-out", "limits-moved"} <= set(codes)
    fmap = fieldmap.load_map(tmp_path / "out" / "map.nc")
    assert fieldmap.evaluate(fmap).as_dict() == written
    assert str(tmp_path / "out" / "map.nc") in panel.save.told.value
    panel.limits.integrate.low.value = -350.0
    assert panel.save.told.value == ""  # what is shown is not what was written


def test_files_go_below_the_current_folder_unless_told(panel, tmp_path):
    assert panel.save.folder.value == str(tmp_path / "fieldmap-results")
    panel.save.write.click()
    assert sorted(file.name for file in (tmp_path / "fieldmap-results").iterdir()) == [
        "map.nc",
        "report.html",
        "results.json",
    ]


@pytest.mark.parametrize("where", ["", "  ", str(demo_folder()), str(demo_folder() / "x" / "y")])
def test_nothing_is_written_into_the_demo(panel, where):
    panel.save.folder.value = where
    panel.save.write.click()
    assert "name " in panel.state.error
    assert panel.state.saved == ()
    assert not (demo_folder() / "x").exists()


def test_without_results_nothing_is_written(panel, tmp_path):
    panel.limits.integrate.low.value = -900.0
    panel.save.write.click()
    assert "found no results" in panel.state.error
    assert list(tmp_path.iterdir()) == []


def test_a_path_opens_a_campaign(panel, folder, tmp_path):
    panel.campaign.path.value = str(folder)
    assert panel.state.error == ""
    assert panel.state.campaign.path == folder / "campaign.toml"
    assert panel.campaign.path.value == str(folder / "campaign.toml")
    assert panel.save.folder.value == str(tmp_path / "fieldmap-results" / "tanh_magnet")
    assert "gap 80 mm, iron 220 mm, 85 A" in panel.heading.value
    assert len(panel.passes.boxes) == 3


def test_a_wrong_path_is_said_and_nothing_old_stays(either, tmp_path):
    either.campaign.path.value = str(tmp_path / "missing.toml")
    assert "missing.toml" in either.state.error
    assert "alert" in either.status.widget.value
    assert either.state.campaign is None
    assert either.passes.boxes == ()
    assert "No results." in either.results.table.value
    assert "there is no map" in either.figure.picture.value
    either.limits.integrate.low.value = 1.0
    either.figure.kind.value = "residuals"
    either.limits.back.click()
    assert "missing.toml" in either.state.error


def test_a_mended_file_is_read_again(panel, folder, tmp_path):
    file = tmp_path / "bench" / "campaign.toml"
    file.parent.mkdir()
    panel.campaign.path.value = str(file)
    assert panel.state.campaign is None
    for one in folder.iterdir():
        (file.parent / one.name).write_bytes(one.read_bytes())
    panel.campaign.again.click()
    assert panel.state.error == ""
    assert panel.state.campaign.path == file


def test_demo_campaigns_are_offered(panel):
    offered = dict(panel.campaign.demo.options)
    found = {str(file) for file in demo_folder().rglob("campaign.toml")}
    assert set(offered.values()) == {""} | found
    assert next(iter(demo_campaigns())) == "gap_dipole"


def test_choosing_a_demo_names_its_path(panel, monkeypatch):
    opened = []
    monkeypatch.setattr(panel.state, "open", opened.append)
    choice = str(next(iter(demo_campaigns().values())))
    panel.campaign.demo.value = choice
    assert panel.campaign.path.value == choice
    assert opened == [choice]


def test_cursor_reads_the_field(fringe_panel):
    fringe_panel.cursor.at.value = 150.0
    u = float(fringe_panel.state.fmap["B_se"].sel(z=0.15, method="nearest").item())
    shown = fringe_panel.cursor.readout.value
    value = float(shown.split("<b>")[1].split(" ")[0])
    assert value == pytest.approx(float(WIDE.field(0.15)), abs=4 * u)
    assert "By at 150 mm (k = 2)" in shown
    assert "% of the central field" in shown
    assert fringe_panel.cursor.bar.value == 150.0
    points = [
        line for line in fringe_panel.figure.figure.axes[0].lines if len(line.get_xdata()) == 1
    ]
    assert points[0].get_xdata()[0] == pytest.approx(150.0)
    assert points[0].get_ydata()[0] == pytest.approx(value, abs=1e-3)


def test_cursor_bar_moves_it_too(fringe_panel):
    fringe_panel.cursor.bar.value = -200.0
    assert fringe_panel.cursor.at.value == -200.0
    assert "By at -200 mm" in fringe_panel.cursor.readout.value


def test_cursor_outside_the_map_is_said(fringe_panel):
    fringe_panel.cursor.at.value = 700.0
    assert "position of the cursor: found 700 mm" in fringe_panel.state.error
    assert fringe_panel.cursor.readout.value == ""
    fringe_panel.cursor.at.value = 0.0
    assert fringe_panel.state.error == ""


def test_cursor_says_where_there_is_no_field(fringe_panel):
    fringe_panel.cursor.at.value = 399.0
    at = fringe_panel.state.fmap.sel(z=0.399, method="nearest")
    lost = abs(at["B"].item()) < 2 * at["B_se"].item()
    assert ("not told from zero" in fringe_panel.cursor.readout.value) == lost


@pytest.mark.parametrize(("part", "sign"), [("in", -1), ("out", 1)])
def test_a_fringe_fills_the_picture(fringe_panel, part, sign):
    fringe_panel.part.value = part
    low, high = fringe_panel.figure.figure.axes[0].get_xlim()
    assert low < sign * 150 < high
    assert high - low < 0.95 * 800
    assert low < fringe_panel.cursor.at.value < high  # the cursor follows into sight
    fringe_panel.part.value = ""
    low, high = fringe_panel.figure.figure.axes[0].get_xlim()
    assert low < -400 < 400 < high


def test_decades_show_the_decay(fringe_panel):
    fringe_panel.decades.value = True
    axes = fringe_panel.figure.figure.axes[0]
    assert axes.get_yscale() == "log"
    x, y = axes.lines[0].get_data()
    i = np.searchsorted(x, 200.0)
    assert y[i] == pytest.approx(abs(float(WIDE.field(x[i] / MM))), rel=0.05)
    assert "logarithmic" in fringe_panel.figure.picture.value
    fringe_panel.decades.value = False
    assert fringe_panel.figure.figure.axes[0].get_yscale() == "linear"


def test_lines_of_a_map_are_offered():
    lines = tuple(
        replace(one, name=f"x_{x}", x=x)
        for x in (0.0, 0.01)
        for one in planned((-0.4, 0.4), rate=20.0)
    )
    panel = FringeMapPanel()
    panel.open(measured(lines, source=WIDE, magnet=Magnet("dipole", "By", gap=0.08)))
    assert panel.state.error == ""
    assert [i for _, i in panel.figure.line.options] == [0, 1]
    assert panel.figure.line.layout.display == ""
    panel.figure.line.value = 1
    assert panel.state.error == ""
    assert panel.results.table.value.count("<table") == 2
    panel.passes.boxes[1].value = False
    assert panel.state.error == ""
    assert panel.figure.line.value == 0
    assert panel.figure.line.layout.display == "none"


def test_one_line_has_no_choice(panel):
    assert panel.figure.line.layout.display == "none"


def test_busy_is_said_while_it_works(campaign):
    panel, said = MagneticLengthPanel(), []
    panel.status.widget.observe(lambda change: said.append(change["new"]), names="value")
    panel.open(campaign)
    busy = [text for text in said if "fm-busy" in text]
    assert any("solving" in text for text in busy)
    assert "Solved" in said[-1]


def test_handlers_in_threads_do_not_mix(panel):
    def move(value):
        panel.limits.integrate.low.value = value

    threads = [threading.Thread(target=move, args=(-300.0 - i,)) for i in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    axis, results = panel.state.axis, panel.state.results
    assert panel.state.error == ""
    assert panel.limits.integrate.low.value == round(axis.integrate[0] * MM, 6)
    again = fieldmap.evaluate(panel.state.fmap, panel.state.campaign, axis=axis)
    assert results["integrated_field"] == again["integrated_field"]


def test_controls_have_labels_and_wait_for_the_end_of_a_move(either):
    controls = [widget for widget in walk(either.widget) if hasattr(widget, "value")]
    typed = ipywidgets.FloatText | ipywidgets.Text | ipywidgets.Checkbox | ipywidgets.Dropdown
    fields = [widget for widget in controls if isinstance(widget, typed)]
    assert len(fields) >= 9
    assert all(widget.description for widget in fields)
    waiting = [widget for widget in controls if hasattr(widget, "continuous_update")]
    assert len(waiting) >= 8
    assert not any(widget.continuous_update for widget in waiting)


def test_bars_reach_over_the_map(panel):
    for bar in (panel.limits.integrate.bar, panel.limits.flat.bar):
        assert (bar.min, bar.max) == (-400.0, 400.0)


def test_panel_brings_its_style_and_no_script(either):
    html = "".join(
        child.value for child in walk(either.widget) if isinstance(child, ipywidgets.HTML)
    )
    assert ".fm-table" in html
    assert "<script" not in html
    assert "http" not in html


def walk(widget):
    yield widget
    for child in getattr(widget, "children", ()):
        yield from walk(child)


def test_hostile_names_stay_text(campaign):
    bad = replace(campaign, name="<img src=x onerror=alert(1)>", passes=campaign.passes[:2])
    bad = replace(
        bad,
        passes=tuple(
            replace(one, name=f"<b>{i}</b>", probe=replace(one.probe, name="<i>p</i>"))
            for i, one in enumerate(bad.passes)
        ),
    )
    panel = MagneticLengthPanel()
    panel.open(bad)
    panel.figure.kind.value = "passes"
    html = "".join(
        child.value for child in walk(panel.widget) if isinstance(child, ipywidgets.HTML)
    )
    assert "<img src=x" not in html
    assert "<b>0</b>" not in html
    assert "<i>p</i>" not in html


def test_close_leaves_no_widget(either):
    either.close()
    assert either.widget.comm is None


def test_state_knows_no_widget(campaign):
    heard = []
    state = Reduction()
    state.listen(heard.append)
    state.open(campaign)
    assert [topic for topic in heard if topic != "busy"] == ["campaign", "map", "results"]
    heard.clear()
    state.move(integrate=state.axis.integrate)
    state.use(0, used=True)
    state.use(99, used=False)
    assert heard == []


def test_maps_of_past_choices_are_kept_but_not_for_ever(campaign, solves):
    state = Reduction()
    state.open(campaign)
    for index in (0, 1, 2):
        state.use(index, used=False)
        state.use(index, used=True)
    assert len(solves) == 4
    assert len(state._maps) == 4


@pytest.mark.parametrize(
    ("length", "step"), [(900.0, 0.2), (1000.0, 0.5), (20.0, 0.01), (0.7, 0.0002)]
)
def test_steps_are_plain_numbers(length, step):
    assert plain_step(length) == step


def test_provenance_of_a_pass_is_folded_away_where_the_keyboard_reaches_it(folder):
    panel = MagneticLengthPanel()
    panel.open(folder)
    one = panel.state.campaign.passes[2]
    note = panel.passes.notes[2].value
    assert '<details class="fm-provenance"><summary aria-label="about pass_03.csv">' in note
    assert f"<dd>{one.source}</dd>" in note
    assert f"<dd>{one.sha256[:12]}…</dd>" in note
    assert f"<dd>{len(one.time)}</dd>" in note
    assert f"<dd>{one.time[-1] - one.time[0]:.4g} s</dd>" in note
    assert "rectangular coil &#x27;coil&#x27;, 0.3 m², window 10 mm" in note
    assert "20 turns, 50 mm long" in panel.passes.notes[0].value


def test_lines_of_the_map_are_taken_once(panel, monkeypatch):
    profiles = panel.state.profiles
    monkeypatch.setattr("fieldmap.show.panels.state.map_lines", lambda _: 1 / 0)
    panel.limits.integrate.low.value = -300.0
    assert panel.state.error == ""
    assert panel.state.profiles is profiles
    by_calls = fieldmap.evaluate(panel.state.fmap, panel.state.campaign, axis=panel.state.axis)
    shown = panel.state.results["peak_field"]
    assert (shown.value, shown.u) == (by_calls["peak_field"].value, by_calls["peak_field"].u)


@pytest.mark.slow
def test_hundreds_of_updates_leave_no_figures_and_little_memory(panel):
    """Widgets, figures and artists are used again: 200 moves may leave 20 MB at most."""

    def update(i):
        panel.limits.integrate.low.value = -390.0 + 0.1 * i

    for i in range(20):
        update(i)
    widgets, figures, before = len(_instances), _figures(), _memory()
    for i in range(20, 220):
        update(i)
    grown = _memory() - before
    assert panel.state.error == ""
    assert plt.get_fignums() == []
    assert len(_instances) == widgets
    assert _figures() == figures
    print(f"\n200 updates: {grown:+.1f} MB")
    assert grown < 20


def _memory():
    """Memory in use, MB."""
    gc.collect()
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE") / 1e6


def _figures():
    gc.collect()
    return sum(isinstance(one, Figure) for one in gc.get_objects())
