"""How long the panels take, step by step: prints times and ratios, asserts no timing."""

import time

import ipywidgets
import pytest

import fieldmap
from fieldmap.estimate.map import map_lines
from fieldmap.shipped import demo_folder
from fieldmap.show.panels import MagneticLengthPanel

DEMO = "gap_dipole"


def took(call, rounds=7):
    """Median time of a call, ms."""
    times = []
    for i in range(rounds):
        start = time.perf_counter()
        call(i)
        times.append(1e3 * (time.perf_counter() - start))
    return sorted(times)[len(times) // 2]


@pytest.fixture
def panel(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    yield MagneticLengthPanel()
    ipywidgets.Widget.close_all()


@pytest.mark.benchmark
def test_steps_of_a_panel(panel):
    source = demo_folder() / DEMO
    times = {"open (read, solve, show), first": took(lambda _: panel.open(source), 1)}
    times["open again"] = took(lambda _: panel.open(source), 3)
    state, figure = panel.state, panel.figure
    axis, fmap = state.axis, state.fmap

    def moved(i):
        return axis.moved(integrate=(axis.integrate[0] + 1e-3 * (i + 1), axis.integrate[1]))

    def fresh(i):
        fieldmap.evaluate(fmap, state.campaign, axis=moved(i), fringe=False)

    def again(i):
        more = {"fringe": False, "profiles": state.profiles}
        fieldmap.evaluate(fmap, state.campaign, axis=moved(i), **more)

    times["evaluate, from the map alone"] = took(fresh)
    times["evaluate, lines at hand"] = took(again)
    times["lines of the map"] = took(lambda _: map_lines(fmap))
    times["redraw"] = took(lambda _: figure.draw())
    limits = panel.limits.integrate.low
    times["limit moved (evaluate, show, keep)"] = took(lambda i: setattr(limits, "value", -400 + i))
    state.open(source)

    def toggled(i):
        panel.passes.boxes[i // 2].value = bool(i % 2)

    times["pass switched off (solve, show)"] = took(lambda i: toggled(2 * i), 1)
    times["pass switched on again (kept map)"] = took(lambda i: toggled(2 * i + 1), 1)
    spacing = float(fmap["knots"].values[..., 1].min())
    times["solve alone, knots known"] = took(
        lambda _: fieldmap.stitch(state.campaign, knot_spacing=spacing), 3
    )
    times["solve alone, knots to be found"] = took(lambda _: fieldmap.stitch(state.campaign), 3)
    unit = times["evaluate, lines at hand"]
    print(f"\n{DEMO}: {len(state.passes)} passes, {fmap.sizes['basis']} coefficients")
    for name, value in times.items():
        print(f"  {name:38s} {value:8.1f} ms {value / unit:8.1f}")
    assert state.error == ""
