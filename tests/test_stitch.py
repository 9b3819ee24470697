"""Stitching: what must not change a result does not, and what means nothing is refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors
from fieldmap.bench.sources import Slot, TanhMagnet
from fieldmap.bench.twin import read_flip, read_point
from fieldmap.errors import FieldmapError, InputError, RefusedError
from fieldmap.estimate import map_findings, map_lines, map_passes, reconstruct, stitch
from fieldmap.magnet import evaluate
from fieldmap.readings import (
    Axis,
    Coil,
    FlipReference,
    Integrator,
    Magnet,
    PointReference,
    Stage,
    Wire,
    ZeroReference,
    make_pass,
)
from tests.shop import MAGNET, MAIN, RECT, ROUND, STAGE, WIRE, measured, planned, remade, truth

SHORT = TanhMagnet(0.5, length=0.1, lam=0.03 / np.pi)
LINE = Axis("z", (-0.18, 0.18), (-0.02, 0.02))
KEYS = (
    "integrated_field",
    "central_field",
    "magnetic_length",
    "boundary_in",
    "boundary_out",
    "magnetic_centre",
)
POINT = PointReference(0.0, 0.5, 1e-5)
KNOTS = 0.005


@pytest.fixture(scope="module")
def mixed():
    """Wire and coil passes that overlap, with a point reference."""
    passes = [
        *planned((-0.2, 0.2), (0.2, -0.05), rate=25.0),
        *planned((-0.1, 0.2), (0.15, -0.17), probe=RECT, rate=25.0),
    ]
    return measured(passes, [POINT], source=SHORT, axis=LINE, seed=3)


@pytest.fixture(scope="module")
def base(mixed):
    return results_of(mixed)


def results_of(campaign, knot_spacing=KNOTS, **more):
    (line,) = evaluate(stitch(campaign, knot_spacing=knot_spacing, **more), campaign).lines
    return {key: line.results[key] for key in KEYS}


def assert_same(got, expected, in_u=1e-5, relative=1e-8):
    """Values to a small part of their uncertainty, uncertainties to many digits."""
    for key in KEYS:
        assert abs(got[key].value - expected[key].value) < in_u * expected[key].u, key
        assert got[key].u == pytest.approx(expected[key].u, rel=relative), key


def scaled(results, **factors):
    return {
        key: replace(one, value=one.value * factors.get(key, 1.0), u=one.u * factors.get(key, 1.0))
        for key, one in results.items()
    }


# --- what must not change a result ------------------------------------------------------------


def test_order_of_passes(mixed, base):
    assert_same(results_of(replace(mixed, passes=mixed.passes[::-1])), base)


@pytest.mark.parametrize("origin", [3.7, -1e3, 1.7e9])
def test_origin_of_time(mixed, base, origin):
    # a clock that counts seconds since 1970 keeps microseconds only
    moved = remade(mixed, lambda one: replace(one, time=one.time + origin))
    assert_same(results_of(moved), base, in_u=1e-2 if origin > 1e6 else 1e-5, relative=1e-4)


@pytest.mark.parametrize("constant", [1e-3, 10.0])
def test_constant_of_the_flux(mixed, base, constant):
    assert_same(results_of(remade(mixed, lambda one: replace(one, flux=one.flux + constant))), base)


@pytest.mark.parametrize("by", [0.25, -1.7, 100.0])
def test_origin_of_position(mixed, by):
    # with a sure scale: its zero is the origin, so shifting it would say something else
    sure = replace(mixed, stage=replace(mixed.stage, u_scale=0.0))
    moved = replace(
        remade(sure, lambda one: replace(one, position=one.position + by)),
        axis=Axis("z", (-0.18 + by, 0.18 + by), (-0.02 + by, 0.02 + by)),
        references=(replace(POINT, at=by),),
    )
    got = results_of(moved)
    for key in ("boundary_in", "boundary_out", "magnetic_centre"):
        got[key] = replace(got[key], value=got[key].value - by)
    assert_same(got, results_of(sure))


def test_unit_of_the_field(mixed, base):
    k = 1e3

    def stronger(one):
        noise = replace(
            one.integrator,
            read_noise=50e-9 * k,
            walk_noise=200e-9 * k,
            u_drift=1e-6 * k,
            resolution=1e-9 * k,
        )
        return replace(one, flux=one.flux * k, integrator=noise)

    point = replace(POINT, field=POINT.field * k, u=POINT.u * k)
    got = results_of(replace(remade(mixed, stronger), references=(point,)))
    assert_same(scaled(got, integrated_field=1 / k, central_field=1 / k), base)


def test_unit_of_length(mixed, base):
    k = 1e3

    def longer(one):
        if isinstance(one.probe, Wire):  # the flux in one metre of wire grows with the travel
            probe = replace(
                one.probe,
                width=one.probe.width * k,
                active_length=one.probe.active_length / k,
                u_active_length=one.probe.u_active_length / k,
            )
        else:
            probe = replace(one.probe, window=one.probe.window * k)
        return replace(one, position=one.position * k, probe=probe)

    stage = replace(STAGE, u_position=STAGE.u_position * k, u_offset=STAGE.u_offset * k)
    longer_line = replace(
        remade(mixed, longer),
        stage=stage,
        axis=Axis("z", (-180.0, 180.0), (-20.0, 20.0)),
        magnet=replace(MAGNET, gap=30.0, iron_length=270.0),
    )
    got = results_of(longer_line, knot_spacing=KNOTS * k)
    assert_same(scaled(got, **{key: 1 / k for key in KEYS if key != "central_field"}), base)


def test_reversed_axis(mixed, base):
    def mirrored(one):
        sign = -1 if isinstance(one.probe, Wire) else 1
        return replace(one, position=-one.position, flux=sign * one.flux)

    got = results_of(remade(mixed, mirrored))
    turned = {
        **base,
        "boundary_in": replace(base["boundary_out"], value=-base["boundary_out"].value),
        "boundary_out": replace(base["boundary_in"], value=-base["boundary_in"].value),
        "magnetic_centre": replace(base["magnetic_centre"], value=-base["magnetic_centre"].value),
    }
    assert_same(got, turned)


def test_a_pass_read_from_its_end(mixed, base):
    # other bins, the same readings: equal within a fraction of u
    def backwards(one):
        return replace(
            one,
            time=(one.time[-1] - one.time)[::-1],
            position=one.position[::-1],
            flux=one.flux[::-1],
        )

    assert_same(results_of(remade(mixed, backwards)), base, in_u=0.2, relative=0.02)


def test_turned_probe(mixed, base):
    turned = remade(
        mixed,
        lambda one: replace(one, flux=-one.flux, probe=replace(one.probe, polarity=-1)),
    )
    assert_same(results_of(turned), base)


def test_turned_field_turns_the_sign(mixed, base):
    turned = remade(mixed, lambda one: replace(one, flux=-one.flux))
    got = results_of(replace(turned, references=(replace(POINT, field=-0.5),)))
    for key in ("integrated_field", "central_field"):
        got[key] = replace(got[key], value=-got[key].value)
    assert_same(got, base)


def test_step_of_the_grid_changes_no_result(mixed, base):
    assert_same(results_of(mixed, step=1e-4), base, in_u=1e-12, relative=1e-12)


def test_names_of_passes(mixed, base):
    # arrays given to make_pass all bear one name unless told otherwise
    same = results_of(remade(mixed, lambda one: replace(one, name="pass")))
    assert_same(same, base)


# --- correlated uncertainties ------------------------------------------------------------------


def test_gain_cancels_in_the_length_of_one_probe():
    lengths, totals = [], []
    for u_area in (0.0, 6e-4, 6e-3):  # 0, 0.2 %, 2 %
        coil = replace(RECT, u_effective_area=u_area)
        campaign = measured(
            planned((-0.2, 0.2), (0.2, -0.2), probe=coil, rate=25.0),
            [ZeroReference(0.17, 0.2, 5e-6), ZeroReference(-0.2, -0.17, 5e-6)],
            source=SHORT,
            axis=LINE,
            seed=5,
        )
        found = results_of(campaign)
        lengths.append(found["magnetic_length"])
        totals.append(found["integrated_field"])
    assert totals[2].u == pytest.approx(0.02 * totals[2].value, rel=0.01)
    for length in lengths[1:]:
        assert length.u == pytest.approx(lengths[0].u, rel=1e-3)
        assert abs(length.value - lengths[0].value) < 0.02 * lengths[0].u


def test_a_poorly_known_gain_leaves_the_stated_value_alone():
    # without an absolute reference nothing in the readings speaks against the stated gain
    wire = replace(WIRE, u_active_length=5e-3)  # 10 %
    campaign = measured(
        planned((-0.2, 0.2), (0.2, -0.2), probe=wire, rate=25.0), source=SHORT, axis=LINE
    )
    found = results_of(campaign)
    known = truth(SHORT, LINE)
    assert found["integrated_field"].u == pytest.approx(0.1 * known["integrated_field"], rel=0.05)
    for key in ("integrated_field", "central_field"):
        assert abs(found[key].value - known[key]) < 0.02 * found[key].u
    assert abs(found["magnetic_length"].value - known["magnetic_length"]) < (
        4 * found["magnetic_length"].u
    )


QUIET = replace(MAIN, read_noise=5e-9, walk_noise=20e-9, u_drift=1e-7, resolution=0.0)


def on_a_quiet_bench(stage):
    """Noise so small that only what the stage leaves open is uncertain."""
    wire = replace(WIRE, u_active_length=0.0)
    campaign = measured(
        planned((-0.2, 0.2), (0.2, -0.2), probe=wire, integrator=QUIET, rate=50.0),
        source=SHORT,
        axis=LINE,
        stage=stage,
    )
    return results_of(campaign, knot_spacing=None)


def test_position_scale_does_not_cancel_in_the_length():
    found = on_a_quiet_bench(Stage(u_scale=1e-4))
    length = found["magnetic_length"]
    assert length.u == pytest.approx(1e-4 * length.value, rel=0.02)
    # ends of the integral in zero field: the integral itself does not know the scale
    assert found["integrated_field"].u < 0.05 * 1e-4 * found["integrated_field"].value


def test_an_offset_moves_centre_and_boundaries_together():
    found = on_a_quiet_bench(Stage(u_offset=5e-5))
    for key in ("boundary_in", "boundary_out", "magnetic_centre"):
        assert found[key].u == pytest.approx(5e-5, rel=0.02)
    assert found["magnetic_length"].u < 1e-6


# --- truth is met -------------------------------------------------------------------------------


def assert_true(campaign, source, knot_spacing=KNOTS, k=4.0):
    found = results_of(campaign, knot_spacing)
    for key, value in truth(source, campaign.axis).items():
        assert abs(found[key].value - value) < k * found[key].u, key
    return found


@pytest.mark.parametrize("record", ["cumulative", "increments", "voltage"])
def test_every_kind_of_record(record):
    passes = planned((-0.2, 0.2), (0.2, -0.2), rate=200.0, record=record)
    assert_true(measured(passes, source=SHORT, axis=LINE), SHORT)


@pytest.mark.parametrize("probe", [WIRE, RECT, ROUND], ids=lambda p: p.name)
@pytest.mark.parametrize("kind", ["point", "zero", "flip"])
def test_every_probe_with_every_reference(probe, kind):
    rng = np.random.default_rng(12)
    references = {
        "point": [read_point(SHORT, 0.01, 1e-5, rng)],
        "zero": [ZeroReference(0.17, 0.2, 5e-6), ZeroReference(-0.2, -0.17, 5e-6)],
        "flip": [read_flip(SHORT, replace(ROUND, name="flipped"), 0.0, 2e-6, rng)],
    }[kind]
    passes = planned((-0.2, 0.2), (0.2, -0.2), probe=probe, rate=50.0)
    assert_true(measured(passes, references, source=SHORT, axis=LINE, seed=4), SHORT)


def test_bench_errors_within_their_uncertainties():
    errors = Errors(
        gain={"wire": 3e-4, "coil": -2e-4},
        scale=-1.5e-5,
        offset=4e-5,
        lag=1.5e-3,
        drift=(8e-7, -5e-7, 2e-7, 1e-6),
    )
    passes = [
        *planned((-0.2, 0.2), (0.2, -0.2), rate=50.0),
        *planned((-0.2, 0.2), (0.2, -0.2), probe=RECT, rate=50.0),
    ]
    campaign = measured(passes, [POINT], source=SHORT, axis=LINE, errors=errors)
    found = assert_true(campaign, SHORT, k=3.0)
    assert found["magnetic_length"].u < 1e-5


def test_open_noise_levels():
    unknown = Integrator("main")
    wire = replace(WIRE, u_active_length=0.0)
    stated = planned((-0.2, 0.2), (0.2, -0.2), probe=wire, rate=50.0)
    campaign = measured(stated, source=SHORT, axis=LINE, stage=Stage())
    blind = remade(campaign, lambda one: replace(one, integrator=unknown))
    found, known = assert_true(blind, SHORT), results_of(campaign)
    assert found["integrated_field"].u < 3 * known["integrated_field"].u


def test_exact_readings_of_which_nothing_is_known():
    # what people try first: formula in, formula out
    z = np.linspace(-0.2, 0.2, 1601)
    flux = 1.0 * SHORT.integral(z)
    steady = Integrator("main", u_drift=0.0)
    wire = Wire("wire", turns=20, active_length=0.05, u_active_length=2e-5)
    one = make_pass(z, flux - flux[0], rate=100.0, probe=wire, integrator=steady)
    for knot_spacing in (0.003, 0.0015):
        profile = reconstruct(one, gap=0.03, knot_spacing=knot_spacing)
        results = evaluate(profile, axis=LINE)
        known = truth(SHORT, LINE)
        for key, value in known.items():  # nothing in them speaks against the stated gain
            assert abs(results[key].value - value) < 0.3 * WIRE.u_gain * value, key
        assert results["magnetic_length"].value == pytest.approx(known["magnetic_length"], rel=1e-6)
        assert "residuals-too-large" not in {one.code for one in results.findings}


# --- sizes ------------------------------------------------------------------------------------


def test_slot_of_a_millimetre():
    slot = Slot(1.2, width=0.01, height=0.01, length=0.008, gap=0.0012)
    axis = Axis("z", (-0.014, 0.014), (-0.001, 0.001))
    wire = Wire("wire", turns=1, active_length=0.005, u_active_length=2e-6, width=5e-5)
    quiet = Integrator("main", read_noise=2e-9, walk_noise=5e-9, u_drift=1e-8)
    stage = Stage(u_scale=2e-5, u_position=1e-6, u_offset=1e-5)
    campaign = measured(
        planned((-0.015, 0.015), (0.015, -0.015), probe=wire, integrator=quiet, speed=0.003),
        source=slot,
        axis=axis,
        stage=stage,
        magnet=Magnet("dipole", "By", gap=0.0012),
    )
    found = assert_true(campaign, slot, knot_spacing=None, k=3.0)
    assert found["magnetic_length"].u < 1e-3 * found["magnetic_length"].value
    fmap = stitch(campaign)
    (line,) = map_lines(fmap)
    z = np.linspace(-0.014, 0.014, 141)
    off = (line.field(z) - slot.field(z)) / line.u_field(z)
    assert np.sqrt(np.mean(off**2)) < 1.6  # one campaign: neighbouring points go together


@pytest.mark.slow
def test_magnet_of_three_metres():
    long = TanhMagnet(1.1, length=3.0, lam=0.05 / np.pi)
    axis = Axis("z", (-1.9, 1.9), (-0.5, 0.5))
    campaign = measured(
        planned((-2.0, 2.0), speed=0.1, rate=100.0, dwell=3.0),
        source=long,
        axis=axis,
        magnet=Magnet("dipole", "By", gap=0.05),
    )
    found = assert_true(campaign, long, knot_spacing=None, k=3.0)
    # the stated gain is all that is known of the level
    assert abs(found["central_field"].value - 1.1) < 0.05 * found["central_field"].u
    assert "knots-not-settled" not in {one.code for one in map_findings(stitch(campaign))}


REPRESENTATIVE = {
    "wire": (planned((-0.2, 0.2), (0.2, -0.2), rate=100.0), []),
    "mixed": (
        [*planned((-0.2, 0.1), rate=100.0), *planned((0.2, -0.2), probe=RECT, rate=100.0)],
        [],
    ),
    "coil": (planned((-0.2, 0.2), (0.2, -0.2), probe=RECT, rate=100.0), [POINT]),
    "round": (planned((-0.2, 0.2), (0.2, -0.2), probe=ROUND, rate=100.0), [POINT]),
    "long window": (
        planned((-0.2, 0.2), (0.2, -0.2), probe=replace(RECT, window=0.03), rate=100.0),
        [POINT],
    ),
}


@pytest.mark.slow
@pytest.mark.parametrize("kind", REPRESENTATIVE)
def test_halving_the_knots_moves_nothing(kind):
    passes, references = REPRESENTATIVE[kind]
    campaign = measured(passes, references, source=SHORT, axis=LINE, seed=8)
    fmap = stitch(campaign)
    spacing = float(fmap["knots"].values[0, 0, 1])
    chosen, finer = results_of(campaign, spacing), results_of(campaign, spacing / 2)
    for key in KEYS[:3]:
        assert abs(finer[key].value - chosen[key].value) < 0.1 * chosen[key].u, key
        assert finer[key].u == pytest.approx(chosen[key].u, rel=0.1), key


# --- lines ------------------------------------------------------------------------------------


def sloping(x, y):
    return (1 + 2 * x - 3 * y) * SHORT


def test_several_lines_of_unequal_length():
    passes = [
        *planned((-0.2, 0.2), (0.2, -0.2), x=0.0, rate=25.0),
        *planned((-0.19, 0.25), (0.25, -0.19), x=0.01, rate=25.0),
        *planned((-0.21, 0.18), (0.18, -0.21), x=0.01, y=0.005, probe=ROUND, rate=25.0),
    ]
    reference = PointReference(0.0, float(sloping(0.01, 0.005).field(0.0)), 1e-5, 0.01, 0.005)
    campaign = measured(passes, [reference], source=sloping, axis=LINE)
    fmap = stitch(campaign, knot_spacing=KNOTS)
    assert fmap.sizes["x"] == 2
    assert fmap.sizes["y"] == 2
    found = evaluate(fmap, campaign).lines
    assert [(line.x, line.y) for line in found] == [(0.0, 0.0), (0.01, 0.0), (0.01, 0.005)]
    for line in found:
        for key, value in truth(sloping(line.x, line.y), LINE).items():
            assert abs(line.results[key].value - value) < 4 * line.results[key].u
    # a corner of the grid that no pass travelled holds no number
    assert np.isnan(fmap["B"].sel(x=0.0, y=0.005)).all()
    assert not fmap["n_readings"].sel(x=0.0, y=0.005).any()
    # and so do the places beyond the end of a line
    first = fmap["B"].sel(x=0.0, y=0.0)
    assert np.isnan(first.sel(z=0.24, method="nearest"))
    assert np.isfinite(first.sel(z=slice(-0.2, 0.2))).all()


def test_a_line_alone_gives_what_it_gives_among_others():
    one = planned((-0.2, 0.2), (0.2, -0.2), x=0.0, rate=25.0)
    other = planned((-0.2, 0.2), x=0.01, rate=25.0)
    both = measured([*one, *other], source=SHORT, axis=LINE)
    alone = replace(both, passes=both.passes[:2])
    found = evaluate(stitch(both, knot_spacing=KNOTS), both).lines[0].results
    assert_same({key: found[key] for key in KEYS}, results_of(alone), in_u=1e-9, relative=1e-9)


def test_references_need_a_line():
    passes = [*planned((-0.2, 0.2), x=0.0, rate=25.0), *planned((-0.2, 0.2), x=0.01, rate=25.0)]
    campaign = measured(passes, source=SHORT, axis=LINE)
    for reference, words in [
        (POINT, "no x and y"),
        (replace(POINT, x=0.02), "x = 0.02 m, y = 0 m"),
        (FlipReference(ROUND, 0.0, 0.3, 1e-6), "no x and y"),
    ]:
        with pytest.raises(InputError, match=words):
            stitch(replace(campaign, references=(reference,)), knot_spacing=KNOTS)
    everywhere = replace(campaign, references=(ZeroReference(0.19, 0.2, 5e-6),))
    assert len(map_lines(stitch(everywhere, knot_spacing=KNOTS))) == 2


def test_a_reference_bears_on_its_own_line_only():
    passes = [*planned((-0.2, 0.2), x=0.0, rate=25.0), *planned((-0.2, 0.2), x=0.01, rate=25.0)]
    campaign = measured(passes, source=SHORT, axis=LINE)
    with_one = replace(campaign, references=(replace(POINT, x=0.01),))
    free = evaluate(stitch(campaign, knot_spacing=KNOTS), campaign).lines
    held = evaluate(stitch(with_one, knot_spacing=KNOTS), with_one).lines
    assert held[0].results == free[0].results
    assert held[1].results["central_field"].u < 0.6 * free[1].results["central_field"].u


# --- refusals ----------------------------------------------------------------------------------


def refused(campaign, code, **more):
    with pytest.raises(RefusedError) as caught:
        evaluate(stitch(campaign, knot_spacing=KNOTS, **more), campaign)
    assert caught.value.code == code
    assert "\n" not in str(caught.value)
    return str(caught.value)


def test_refuses_coil_passes_without_a_level():
    campaign = measured(planned((-0.2, 0.2), probe=RECT, rate=25.0), source=SHORT, axis=LINE)
    text = refused(campaign, "no-absolute-level")
    assert "pass_01.csv" in text
    assert "[[references]]" in text


def test_refuses_a_level_on_another_stretch():
    # two coil stretches, one reference: the other stretch has no level
    passes = planned((-0.2, -0.05), (0.05, 0.2), probe=RECT, rate=25.0)
    campaign = measured(passes, [PointReference(-0.1, 0.0, 1e-5)], source=SHORT, axis=LINE)
    assert "50 mm and 200 mm" in refused(campaign, "no-absolute-level")


def test_refuses_passes_that_do_not_meet():
    passes = planned((-0.2, -0.05), (0.05, 0.2), rate=25.0)
    campaign = measured(passes, source=SHORT, axis=LINE)
    assert "-50 mm and 50 mm" in refused(campaign, "passes-do-not-meet")


@pytest.mark.parametrize(
    ("integrate", "flat"), [((-0.3, 0.18), (-0.02, 0.02)), ((-0.18, 0.18), (0.1, 0.3))]
)
def test_refuses_limits_outside_the_map(mixed, integrate, flat):
    outside = replace(mixed, axis=Axis("z", integrate, flat))
    text = refused(outside, "limits-outside-map")
    assert "-200" in text
    assert "200 mm" in text


def test_refuses_where_nothing_was_measured(mixed):
    refused(replace(mixed, passes=()), "nothing-measured")


def test_refuses_a_probe_that_never_moved():
    flux = np.random.default_rng(1).normal(size=50)
    still = make_pass(np.zeros(50), flux, rate=10.0, probe=WIRE, integrator=MAIN)
    with pytest.raises(RefusedError) as caught:
        reconstruct(still)
    assert caught.value.code == "no-travel"


def test_refuses_a_clock_that_stands_still():
    z = np.linspace(-0.2, 0.2, 200)
    stopped = make_pass(z, SHORT.integral(z), time=np.zeros(200), probe=WIRE, integrator=MAIN)
    with pytest.raises(FieldmapError, match="time"):
        reconstruct(stopped, gap=0.03)


@pytest.mark.parametrize(
    "reference",
    [
        PointReference(0.3, 0.0, 1e-5),
        PointReference(0.0, 0.5, 0.0),
        PointReference(0.0, np.nan, 1e-5),
        PointReference(0.0, 0.5, np.inf),
        FlipReference(ROUND, -0.3, 0.0, 1e-6),
        FlipReference(ROUND, 0.0, 0.3, -1e-6),
        ZeroReference(0.21, 0.3, 5e-6),
        ZeroReference(0.19, 0.19, 5e-6),
        ZeroReference(0.18, 0.2, 0.0),
    ],
)
def test_refuses_references_that_mean_nothing(mixed, reference):
    with pytest.raises(FieldmapError) as caught:
        stitch(replace(mixed, references=(reference,)), knot_spacing=KNOTS)
    assert "references" in str(caught.value)


def test_a_zero_stretch_that_reaches_beyond_the_map_counts_within_it(mixed):
    beyond = replace(mixed, references=(ZeroReference(0.18, 0.5, 5e-6),))
    within = replace(mixed, references=(ZeroReference(0.18, 0.2, 5e-6),))
    high = max(float(one.position.max()) for one in mixed.passes)
    assert high == pytest.approx(0.2)
    assert_same(results_of(beyond), results_of(within), in_u=1e-6, relative=1e-6)


@pytest.mark.parametrize("spacing", [0.0, -1.0, np.nan, np.inf, 10.0])
def test_refuses_knots_that_are_none(mixed, spacing):
    with pytest.raises(InputError, match="knot_spacing"):
        stitch(mixed, knot_spacing=spacing)


@pytest.mark.parametrize("step", [0.0, -1.0, np.nan, 10.0])
def test_refuses_grid_steps_that_are_none(mixed, step):
    with pytest.raises(InputError, match="step"):
        stitch(mixed, knot_spacing=KNOTS, step=step)


@pytest.mark.parametrize("gap", [0.0, -0.03, np.nan])
def test_refuses_a_gap_that_is_none(mixed, gap):
    with pytest.raises(InputError, match="gap"):
        stitch(replace(mixed, magnet=replace(MAGNET, gap=gap)))


@pytest.mark.parametrize("time", [[0.0, 0.0, 1.0], [0.0, 0.5, 1.0]], ids=["2 bins", "3 bins"])
def test_a_very_short_pass_beside_a_good_one(mixed, base, time):
    short = make_pass(np.zeros(3), np.zeros(3), time, probe=WIRE, integrator=MAIN, name="tip")
    got = results_of(replace(mixed, passes=(*mixed.passes, short)))
    assert_same(got, base, in_u=0.1, relative=0.05)


def test_refuses_a_pass_of_one_instant_by_its_name(mixed):
    short = make_pass(np.zeros(3), np.zeros(3), np.zeros(3), probe=WIRE, name="tip")
    with pytest.raises(FieldmapError, match=r"tip.*time"):
        stitch(replace(mixed, passes=(*mixed.passes, short)), knot_spacing=KNOTS)


# --- plain arrays ------------------------------------------------------------------------------


def test_plain_arrays_through_make_pass_and_reconstruct():
    rng = np.random.default_rng(3)
    z = np.linspace(-0.2, 0.2, 801)
    walk = np.cumsum(rng.normal(size=801)) * 2e-7 / 10
    flux = 1.0 * SHORT.integral(z) + walk + 5e-8 * rng.normal(size=801)
    wire = Wire("wire", turns=20, active_length=0.05)
    one = make_pass(z, flux, rate=100.0, probe=wire, integrator=replace(MAIN, u_drift=1e-8))
    profile = reconstruct(one, gap=0.03)
    assert profile["B"].dims == ("y", "x", "z")
    results = evaluate(profile)
    low_third = 0.4 / 3
    assert results["integrated_field"].value == pytest.approx(SHORT.between(-0.2, 0.2), rel=1e-4)
    expected = SHORT.between(-0.2 + low_third, 0.2 - low_third) / low_third
    assert results["central_field"].value == pytest.approx(expected, rel=1e-4)


def test_reconstruct_needs_a_level_for_a_coil():
    z = np.linspace(-0.2, 0.2, 401)
    coil = Coil("coil", "rectangular", effective_area=0.3, window=0.01)
    flux = 0.3 * SHORT.field(z)
    one = make_pass(z, flux, rate=50.0, probe=coil, integrator=MAIN)
    with pytest.raises(RefusedError, match="reference"):
        reconstruct(one)
    level = PointReference(0.0, 0.5, 1e-5)
    assert "B" in reconstruct(one, references=[level], knot_spacing=KNOTS)


def test_reconstruct_and_stitch_agree():
    campaign = measured(planned((-0.2, 0.2), rate=25.0), source=SHORT, axis=LINE)
    by_stitch = stitch(campaign, knot_spacing=KNOTS)
    alone = reconstruct(campaign.passes[0], gap=0.03, stage=STAGE, knot_spacing=KNOTS)
    np.testing.assert_array_equal(alone["B"], by_stitch["B"])


def test_what_is_kept_of_each_pass(mixed):
    kept = map_passes(stitch(mixed, knot_spacing=KNOTS))
    assert [one["name"] for one in kept] == [f"pass_0{i}.csv" for i in (1, 2, 3, 4)]
    for one, measured_pass in zip(kept, mixed.passes, strict=True):
        assert one["readings"] == len(measured_pass.time)
        assert one["probe"] == measured_pass.probe.name
        assert 0.5 < one["chi_square"] / one["freedom"] < 1.5


def test_campaign_is_not_changed(mixed):
    before = [one.flux.copy() for one in mixed.passes]
    stitch(mixed, knot_spacing=KNOTS)
    for one, flux in zip(mixed.passes, before, strict=True):
        np.testing.assert_array_equal(one.flux, flux)


def test_tells_what_it_does():
    campaign = measured(planned((-0.2, 0.2), rate=25.0), source=SHORT, axis=LINE)
    told = []
    stitch(campaign, knot_spacing=0.01, tell=told.append)
    assert told
    assert all(isinstance(words, str) and words for words in told)
