"""Campaigns at the ends of what can be measured: right numbers, or one clear sentence."""

from __future__ import annotations

import time
import warnings
from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import TanhMagnet
from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate import map_findings, map_lines, stitch
from fieldmap.magnet import evaluate
from fieldmap.readings import Axis, Campaign, Integrator, Magnet, Pass, PointReference, Stage
from tests.shop import AXIS, DIPOLE, MAGNET, MAIN, RECT, STAGE, WIRE, truth

OPEN = Integrator("main")
POINT = PointReference(0.0, 0.5, 1e-5)
THIN = replace(WIRE, width=0.0)
NO_FIELD = PointReference(0.0, 0.0, 1e-5)
ENDS = (-0.4, 0.4)


@pytest.fixture(autouse=True)
def _no_warning_leaks():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        yield


class Even:
    """The same field everywhere."""

    def __init__(self, level):
        self.level = level

    def integral(self, s):
        return self.level * np.asarray(s)


def scan(source, probe, ends, count, seed=0, **more):
    """One pass at constant speed; more may set lasting, walk, read and integrator."""
    rng = np.random.default_rng(seed)
    lasting, walk, read = (
        more.get(k, v) for k, v in (("lasting", 10.0), ("walk", 200e-9), ("read", 50e-9))
    )
    z, t = np.linspace(*ends, count), np.linspace(0.0, lasting, count)
    half = probe.extent / 2
    if probe.senses_level:
        flux = probe.gain * source.integral(z)
    else:
        flux = probe.gain / probe.extent * (source.integral(z + half) - source.integral(z - half))
    walked = walk * np.sqrt(lasting / (count - 1)) * np.cumsum(rng.standard_normal(count))
    flux = flux + walked + read * rng.standard_normal(count)
    return Pass(f"pass {ends[0]:g} {seed}", probe, more.get("integrator", MAIN), t, z, flux)


def campaign_of(passes, references=(POINT,), axis=AXIS, magnet=MAGNET, stage=STAGE):
    return Campaign("extreme", magnet, axis, stage, tuple(passes), references=tuple(references))


def results_of(campaign, **more):
    fmap = stitch(campaign, **more)
    return evaluate(fmap, campaign), fmap


def assert_true(campaign, source, *, relative, **more):
    """Integrated field, central field and length within 3 u of the truth, u being of some use."""
    results, fmap = results_of(campaign, **more)
    for key, value in truth(source, campaign.axis).items():
        assert abs(results[key].value - value) < 3 * results[key].u, key
        assert results[key].u < relative * abs(value), key
    return results, fmap


# --- few readings, and many -------------------------------------------------------------------


@pytest.mark.parametrize("probe", [THIN, RECT], ids=lambda one: one.name)
@pytest.mark.parametrize("count", [3, 4, 12])
def test_a_handful_of_readings_is_refused(probe, count):
    with pytest.raises(RefusedError, match="within the gap of 30 mm") as error:
        stitch(campaign_of([scan(DIPOLE, probe, ENDS, count)]))
    assert error.value.code == "readings-too-sparse"


def test_three_readings_beside_a_good_pass():
    few = replace(scan(DIPOLE, THIN, ENDS, 3, seed=1), name="few")
    assert_true(campaign_of([scan(DIPOLE, THIN, ENDS, 400), few]), DIPOLE, relative=1e-3)


def test_readings_a_gap_apart():
    # 2 passes of 28 readings: what is between them is uncertain, and said to be
    passes = [scan(DIPOLE, THIN, ends, 28, seed=7) for ends in (ENDS, ENDS[::-1])]
    _, fmap = assert_true(campaign_of(passes), DIPOLE, relative=0.02)
    assert "sampling-too-coarse" in {one.code for one in map_findings(fmap)}


@pytest.mark.slow
def test_a_million_readings_in_one_pass():
    began = time.process_time()
    campaign = campaign_of([scan(DIPOLE, RECT, ENDS, 1_000_000)])
    assert_true(campaign, DIPOLE, relative=1e-3, knot_spacing=0.006)
    assert time.process_time() - began < 30  # about 4 s and 0.3 GB on a machine of its own


@pytest.mark.slow
def test_a_hundred_passes():
    passes = [
        scan(DIPOLE, THIN, ENDS[:: 1 if seed % 2 else -1], 100, seed=seed) for seed in range(100)
    ]
    assert_true(campaign_of(passes), DIPOLE, relative=1e-3, knot_spacing=0.01)


# --- small and large magnets ------------------------------------------------------------------


def test_a_gap_of_a_millimetre():
    source = TanhMagnet(0.5, length=0.003, lam=0.001 / np.pi)
    wire = replace(THIN, active_length=0.005, u_active_length=1e-6)
    ends = (-0.006, 0.006)
    campaign = campaign_of(
        [scan(source, wire, one, 800, seed=3) for one in (ends, ends[::-1])],
        axis=Axis("z", (-0.0058, 0.0058), (-3e-4, 3e-4)),
        magnet=Magnet("dipole", "By", 1e-3),
        stage=Stage(u_scale=20e-6, u_position=1e-6, u_offset=5e-6, u_lag=1e-3),
    )
    assert_true(campaign, source, relative=0.03)


@pytest.mark.slow
def test_a_magnet_of_ten_metres():
    # knots of 20 mm: 600 of them; the finest that the gap of 100 mm asks for take half a minute
    source = TanhMagnet(1.5, length=10.0, lam=0.1 / np.pi)
    ends = (-6.0, 6.0)
    campaign = campaign_of(
        [scan(source, THIN, one, 6000, seed=4, lasting=100.0) for one in (ends, ends[::-1])],
        [PointReference(0.0, 1.5, 1e-5)],
        axis=Axis("z", (-5.8, 5.8), (-1.0, 1.0)),
        magnet=Magnet("dipole", "By", 0.1),
    )
    assert_true(campaign, source, relative=1e-3, knot_spacing=0.02)


def test_a_range_of_a_micrometre():
    axis = Axis("z", (0.0, 1e-6), (3e-7, 6e-7))
    quiet = Integrator("main", read_noise=1e-12, walk_noise=1e-12, u_drift=1e-12)
    one = scan(Even(0.5), THIN, (0.0, 1e-6), 500, walk=1e-12, read=1e-12, integrator=quiet)
    results, _ = results_of(campaign_of([one], axis=axis, stage=Stage()))
    assert abs(results["integrated_field"].value - 0.5e-6) < 3 * results["integrated_field"].u
    assert results["integrated_field"].u < 1e-3 * 0.5e-6


# --- no field, and nothing but field ----------------------------------------------------------


@pytest.mark.parametrize("probe", [THIN, RECT], ids=lambda one: one.name)
def test_no_field_has_no_length(probe):
    results, _ = results_of(campaign_of([scan(Even(0.0), probe, ENDS, 600)], [NO_FIELD]))
    for key in ("integrated_field", "central_field"):
        assert abs(results[key].value) < 3 * results[key].u
    assert "magnetic_length" not in results.lines[0].results
    assert "no-central-field" in {one.code for one in results.findings}


def test_no_field_and_no_noise():
    silent = scan(Even(0.0), THIN, ENDS, 600, walk=0.0, read=0.0)
    results, _ = results_of(campaign_of([silent], [NO_FIELD]))
    assert results["integrated_field"].value == pytest.approx(0.0, abs=1e-9)
    assert "magnetic_length" not in results.lines[0].results


@pytest.mark.parametrize("probe", [THIN, RECT], ids=lambda one: one.name)
def test_a_field_without_ends(probe):
    results, fmap = results_of(
        campaign_of([scan(Even(0.5), probe, ENDS, 400, seed=1)]), knot_spacing=0.01
    )
    (line,) = map_lines(fmap)
    z = np.linspace(-0.39, 0.39, 40)
    assert np.all(np.abs(line.field(z) - 0.5) < 4 * line.u_field(z))
    for key, value in {
        "integrated_field": 0.4,
        "central_field": 0.5,
        "magnetic_length": 0.8,
    }.items():
        assert abs(results[key].value - value) < 3.5 * results[key].u, key
    assert results["boundary_in"].value == pytest.approx(-0.4, abs=1e-3)
    assert results["boundary_out"].value == pytest.approx(0.4, abs=1e-3)
    assert "tail-not-converging" in {one.code for one in results.findings}


# --- size of the field, and noise -------------------------------------------------------------


@pytest.mark.parametrize("by", [2e-12, 2e6])
@pytest.mark.parametrize("stated", [True, False], ids=["stated", "open"])
def test_a_field_of_any_size(by, stated):
    source = TanhMagnet(0.5 * by, length=0.3, lam=0.03 / np.pi)
    known = Integrator("main", read_noise=50e-9 * by, walk_noise=200e-9 * by, u_drift=1e-6 * by)
    more = {"read": 50e-9 * by, "walk": 200e-9 * by, "integrator": known if stated else OPEN}
    campaign = campaign_of(
        [scan(source, THIN, one, 400, seed=2, **more) for one in (ENDS, ENDS[::-1])],
        [PointReference(0.0, 0.5 * by, 1e-5 * by)],
    )
    assert_true(campaign, source, relative=2e-3)


def test_readings_without_noise():
    exact = [scan(DIPOLE, probe, ENDS, 800, walk=0.0, read=0.0) for probe in (THIN, RECT)]
    for one in exact:
        results, _ = assert_true(campaign_of([one]), DIPOLE, relative=1e-3, knot_spacing=0.004)
        assert abs(results["magnetic_length"].value - 0.3) < 1e-5


@pytest.mark.parametrize("probe", [THIN, RECT], ids=lambda one: one.name)
def test_noise_stated_as_none_is_refused_where_it_leaves_no_digits(probe):
    # Weights of 1e24 on readings of 0.1 V s: the level that the reference gives is lost to rounding
    none = Integrator("main", read_noise=1e-15, walk_noise=1e-15, u_drift=1e-12)
    one = scan(DIPOLE, probe, ENDS, 800, walk=0.0, read=0.0, integrator=none)
    with pytest.raises(RefusedError, match="without a single digit") as error:
        stitch(campaign_of([one], stage=Stage()), knot_spacing=0.003)
    assert error.value.code == "not-determined"
    assert probe.name in str(error.value) or "level" in str(error.value)


def test_few_digits_are_warned_of():
    quiet = Integrator("main", read_noise=3e-10, walk_noise=3e-10, u_drift=1e-6)
    passes = [
        scan(DIPOLE, RECT, one, 800, seed=5, walk=3e-10, read=3e-10, integrator=quiet)
        for one in (ENDS, ENDS[::-1])
    ]
    _, fmap = results_of(campaign_of(passes, stage=Stage()), knot_spacing=0.003)
    (said,) = [one for one in map_findings(fmap) if one.code == "ill-conditioned"]
    assert said.severity == "warn"
    assert "may move results by" in said.text


# --- time and place that stand still ----------------------------------------------------------


def test_passes_that_do_not_meet_are_refused_whatever_their_references():
    places = (-0.2, 0.2)
    references = [PointReference(s, float(DIPOLE.field([s])[0]), 1e-5) for s in places]
    passes = [scan(DIPOLE, RECT, ends, 300) for ends in ((-0.4, -0.1), (0.1, 0.4))]
    with pytest.raises(RefusedError, match="no reading between -100 mm and 100 mm"):
        stitch(campaign_of(passes, references))


@pytest.mark.parametrize("integrator", [MAIN, OPEN], ids=["stated", "open"])
def test_a_dwell_in_the_middle(integrator):
    z = np.concatenate([np.linspace(-0.4, 0, 300), np.zeros(200), np.linspace(0, 0.4, 300)])
    t = np.arange(800) * 0.02
    rng = np.random.default_rng(1)
    walk = 200e-9 * np.sqrt(0.02) * np.cumsum(rng.standard_normal(800))
    flux = THIN.gain * DIPOLE.integral(z) + walk + 50e-9 * rng.standard_normal(800)
    campaign = campaign_of([Pass("dwell", THIN, integrator, t, z, flux)])
    assert_true(campaign, DIPOLE, relative=2e-3)


@pytest.mark.parametrize("integrator", [MAIN, OPEN], ids=["stated", "open"])
def test_stamps_that_are_equal_in_tens(integrator):
    one = scan(DIPOLE, THIN, ENDS, 800, seed=1, integrator=integrator)
    one = replace(one, time=np.repeat(np.linspace(0, 10, 80), 10))
    assert_true(campaign_of([one]), DIPOLE, relative=3e-3, knot_spacing=0.004)


def test_one_stamp_for_a_whole_pass_is_refused():
    one = scan(DIPOLE, THIN, ENDS, 100)
    with pytest.raises(InputError, match="time that goes on"):
        stitch(campaign_of([replace(one, time=np.full(100, 3.0))]))


def test_more_knots_than_can_be_solved_are_refused():
    with pytest.raises(InputError, match="knot_spacing"):
        stitch(campaign_of([scan(DIPOLE, THIN, ENDS, 400)]), knot_spacing=1e-6)
