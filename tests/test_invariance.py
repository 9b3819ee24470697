"""What must not change a result changes none: units, origins, orders, cuts, mirrored travel."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.estimate import map_lines, stitch
from fieldmap.magnet import evaluate
from fieldmap.readings import PointReference, Stage
from tests.changes import (
    amplified,
    cut,
    later,
    lifted,
    mirrored,
    moved,
    renamed,
    reordered,
    slower,
    stronger,
    turned,
)
from tests.shop import MAIN, RECT, ROUND, STAGE, WIRE, measured, out_and_back
from tests.study.draw import draw_campaign

POINT = PointReference(0.0, 0.5, 1e-5)
IN_U = 1e-3  # of a result's own u
OF_U = 1e-4  # of u itself, which has no more digits than two
PLACES = ("boundary_in", "boundary_out", "magnetic_centre")
KEYS = ("integrated_field", "central_field", "magnetic_length", *PLACES)
# noise and drift stated or open, voltage, increments, droop
DRAWN = (
    ("mixed", 4),
    *(
        pytest.param(one, marks=pytest.mark.slow)
        for one in (("wire+point", 1), ("rectangular+flip", 1))
    ),
)
CHANGES = {
    "order and names": lambda campaign: renamed(reordered(campaign)),
    "time since an epoch": later(1.7e9),
    "flux + 0.37 V s": lifted(0.37),
    "gain 1e-6": amplified(1e-6),
    "other unit of time": slower(1e3),
}


def results_of(campaign, spacing=None):
    fmap = stitch(campaign, knot_spacing=spacing)
    (line,) = map_lines(fmap)
    (found,) = evaluate(fmap, campaign, fringe=False).lines
    return {key: found.results[key] for key in KEYS}, line


def assert_same(got, expected, *, factor=None, shift=None, swapped=None):
    """Values within IN_U of their uncertainty, and uncertainties within OF_U of themselves."""
    factor, shift, swapped = factor or {}, shift or {}, swapped or {}
    for key in KEYS:
        one, other = got[swapped.get(key, key)], expected[key]
        by = factor.get(key, 1.0)
        value, u = one.value / by - shift.get(key, 0.0), one.u / abs(by)
        assert abs(value - other.value) < max(IN_U * other.u, 1e-9 * abs(other.value)), key
        assert u == pytest.approx(other.u, rel=OF_U), key


@pytest.fixture(scope="module", params=DRAWN, ids=lambda one: f"{one[0]} {one[1]}")
def drawn(request):
    """A campaign, knots of an eighth of the gap, and its results with them."""
    campaign, _ = draw_campaign(*request.param)
    spacing = campaign.magnet.gap / 8
    results, line = results_of(campaign, spacing)
    return campaign, spacing, results, line


@pytest.mark.parametrize("change", CHANGES.values(), ids=CHANGES)
def test_nothing_changes(drawn, change):
    campaign, spacing, expected, line = drawn
    got, other = results_of(change(campaign), spacing)
    assert_same(got, expected)
    assert other.spline.size == line.spline.size
    assert np.all(np.abs(other.b - line.b) < IN_U * np.sqrt(np.diagonal(line.covariance)))


def test_field_of_another_size(drawn):
    campaign, spacing, expected, _ = drawn
    for by in (1e-12, 1e6):
        factor = {"integrated_field": by, "central_field": by}
        got, _ = results_of(stronger(by)(campaign), spacing)
        assert_same(got, expected, factor=factor)


def test_sign_of_everything(drawn):
    campaign, spacing, expected, _ = drawn
    got, _ = results_of(turned(campaign), spacing)
    assert_same(got, expected, factor={"integrated_field": -1.0, "central_field": -1.0})


def test_mirrored_travel(drawn):
    campaign, spacing, expected, _ = drawn
    got, _ = results_of(mirrored(campaign), spacing)
    swapped = {"boundary_in": "boundary_out", "boundary_out": "boundary_in"}
    assert_same(got, expected, factor=dict.fromkeys(PLACES, -1.0), swapped=swapped)


def test_origin_of_position(drawn):
    # the knots move along; an uncertain scale is left out, for it stretches about the zero
    campaign, spacing, _, _ = drawn
    certain = replace(campaign, stage=replace(campaign.stage, u_scale=0.0))
    expected, line = results_of(certain, spacing)
    got, other = results_of(moved(10.0)(certain), spacing)
    assert_same(got, expected, shift=dict.fromkeys(PLACES, 10.0))
    assert other.spline.start == pytest.approx(line.spline.start + 10.0, abs=1e-9)


def test_an_uncertain_scale_counts_from_the_zero_of_the_stage():
    # ten metres from the zero, places are uncertain by ten metres times u_scale; lengths are not
    campaign = measured(out_and_back(RECT), [POINT], seed=2)
    near, _ = results_of(campaign, 0.005)
    far, _ = results_of(moved(10.0)(campaign), 0.005)
    for key in PLACES:
        grown = np.hypot(near[key].u, 10.0 * STAGE.u_scale)
        assert far[key].u == pytest.approx(grown, rel=0.02), key
    for key in ("integrated_field", "magnetic_length"):
        assert far[key].u == pytest.approx(near[key].u, rel=0.02), key


@pytest.mark.slow
@pytest.mark.parametrize(
    "change", [reordered, mirrored, amplified(1e-3)], ids=["reordered", "mirrored", "amplified"]
)
@pytest.mark.parametrize("kind", [("wire+point", 4), ("rectangular+point", 3)], ids=str)
def test_knots_that_are_found_are_the_same(kind, change):
    campaign, _ = draw_campaign(*kind)
    expected, line = results_of(campaign)
    got, other = results_of(change(campaign))
    assert other.spline.size == line.spline.size
    assert got["integrated_field"].value == pytest.approx(
        expected["integrated_field"].value, abs=IN_U * expected["integrated_field"].u
    )
    assert got["magnetic_length"].u == pytest.approx(expected["magnetic_length"].u, rel=OF_U)


# --- a pass cut in two ---------------------------------------------------------------------------

SURE = replace(MAIN, u_drift=0.0)


@pytest.mark.parametrize("probe", [WIRE, RECT, ROUND], ids=lambda one: one.name)
@pytest.mark.parametrize("at", [45, 61, 120])
def test_a_walk_is_cut_without_loss_at_a_reading_that_both_halves_have(probe, at):
    # a walk's increments are independent: where every reading is a bin of its own, no increment
    # is lost and none is shared. It takes a drift that is certain, and readings without noise.
    walk = replace(SURE, read_noise=0.0, resolution=0.0)
    campaign = measured(
        out_and_back(probe, integrator=walk, rate=10.0), [POINT], seed=2, stage=Stage()
    )
    expected, _ = results_of(campaign, 0.005)
    got, _ = results_of(cut(campaign, 0, at, shared=True), 0.005)
    assert_same(got, expected)


@pytest.mark.parametrize("probe", [WIRE, RECT], ids=lambda one: one.name)
@pytest.mark.parametrize("integrator", [SURE, MAIN], ids=["certain drift", "own drift"])
@pytest.mark.parametrize("shared", [True, False], ids=["shared", "cut"])
def test_a_cut_costs_little_and_gains_nothing(probe, integrator, shared):
    # The reading at the cut counts twice or an increment is lost, each half has a drift of its
    # own, and the bins begin anew: results move within their u, by 0.12 u at most where tried.
    campaign = measured(out_and_back(probe, integrator=integrator), [POINT], seed=2, stage=STAGE)
    expected, _ = results_of(campaign, 0.005)
    for at in (57, 307):
        got, _ = results_of(cut(campaign, 0, at, shared=shared), 0.005)
        for key in KEYS:
            assert abs(got[key].value - expected[key].value) < 0.25 * expected[key].u, key
            assert 0.998 < got[key].u / expected[key].u < 1.05, key


# --- the same campaign in files of other units ---------------------------------------------------

UNITS = {
    "SI": ("m", 1.0, "s", 1.0, "V s", 1.0, "T", 1.0),
    "bench": ("mm", 1e3, "ms", 1e3, "uV s", 1e6, "mT", 1e3),
    "fine": ("um", 1e6, "s", 1.0, "mV s", 1e3, "G", 1e4),
}


def written(campaign, folder, units):
    """A campaign file and tables, every quantity in the units named."""
    length, m, time, s, flux, v, field, t = units
    wire, main, stage = campaign.passes[0].probe, campaign.passes[0].integrator, campaign.stage
    axis = campaign.axis

    def of(value, by, unit):
        return f'"{value * by!r} {unit}"'

    def span(pair):
        return f"[{', '.join(of(one, m, length) for one in pair)}]"

    lines = [
        'format = "fieldmap-campaign/1"',
        'name = "units"',
        "[magnet]",
        'kind = "dipole"',
        'component = "By"',
        f"gap = {of(campaign.magnet.gap, m, length)}",
        "[axis]",
        'travel = "z"',
        f"integrate = {span(axis.integrate)}",
        f"flat = {span(axis.flat)}",
        "[probes.wire]",
        'kind = "wire"',
        f"turns = {wire.turns:g}",
        f"active_length = {of(wire.active_length, m, length)}",
        f"u_active_length = {of(wire.u_active_length, m, length)}",
        f"width = {of(wire.width, m, length)}",
        "[integrators.main]",
        'kind = "digital"',
        f"read_noise = {of(main.read_noise, v, flux)}",
        f"walk_noise = {of(main.walk_noise, v, flux + ' s^-0.5')}",
        f"u_drift = {of(main.u_drift, v, flux + '/s')}",
        f"resolution = {of(main.resolution, v, flux)}",
        "[stage]",
        f'u_scale = "{stage.u_scale!r}"',
        f"u_position = {of(stage.u_position, m, length)}",
        f"u_offset = {of(stage.u_offset, m, length)}",
        f"u_lag = {of(stage.u_lag, s, time)}",
    ]
    for number, one in enumerate(campaign.passes):
        name = f"pass_{number}.csv"
        lines += ["[[passes]]", f'file = "{name}"', 'probe = "wire"', 'integrator = "main"']
        rows = zip(one.time * s, one.position * m, one.flux * v, strict=True)
        table = [f"time [{time}],position [{length}],flux [{flux}]"]
        table += [",".join(repr(float(value)) for value in row) for row in rows]
        (folder / name).write_text("\n".join(table) + "\n", encoding="utf-8")
    for point in campaign.references:
        lines += ["[[references]]", 'kind = "point"', f"at = {of(point.at, m, length)}"]
        lines += [f"field = {of(point.field, t, field)}", f"u = {of(point.u, t, field)}"]
    path = folder / "campaign.toml"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def test_units_of_the_files(tmp_path):
    campaign = measured(out_and_back(), [POINT], seed=8)
    results = {}
    for name, units in UNITS.items():
        folder = tmp_path / name
        folder.mkdir()
        results[name], _ = results_of(fieldmap.load(written(campaign, folder, units)), 0.005)
    assert_same(results["bench"], results["SI"])
    assert_same(results["fine"], results["SI"])
    direct, _ = results_of(campaign, 0.005)
    assert_same(results["SI"], direct)
