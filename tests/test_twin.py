"""The simulated bench: each error and each noise on its own, against what it should do."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors, Noise
from fieldmap.bench.response import flux
from fieldmap.bench.sources import TanhMagnet, Uniform
from fieldmap.bench.travel import RAMP
from fieldmap.bench.twin import Recorded, read_flip, read_point, record
from fieldmap.errors import InputError
from fieldmap.readings import (
    Axis,
    Campaign,
    Coil,
    Integrator,
    Magnet,
    PlannedPass,
    Stage,
    Wire,
    make_pass,
)
from fieldmap.readings.records import undo_droop

WIRE = Wire("wire", turns=20, active_length=0.05, width=0.4e-3)
RECTANGULAR = Coil("coil", "rectangular", effective_area=0.3, window=0.01)
ROUND = Coil("round", "round", effective_area=0.3, window=0.01)
QUIET = Integrator("main", read_noise=0.0, walk_noise=0.0)
MAGNET = TanhMagnet(0.5, 0.3, 0.03)
OUT = PlannedPass("out", WIRE, QUIET, -0.3, 0.3, speed=0.05, rate=50.0, dwell=2.0)
BACK = replace(OUT, name="back", start=0.3, stop=-0.3)
PROBES = [WIRE, RECTANGULAR, ROUND]

every_probe = pytest.mark.parametrize("probe", PROBES, ids=lambda probe: probe.name)


def plan_of(*planned, stage=None, current=None):
    return Campaign(
        name="trial",
        magnet=Magnet("dipole", "By", gap=0.03, current=current),
        axis=Axis("z", (-0.3, 0.3), (-0.05, 0.05)),
        stage=stage or Stage(),
        planned=planned,
    )


def measure(planned, errors=None, source=MAGNET, stage=None, seed=1, **options):
    current = 50.0 if "current" in options else None
    plan = plan_of(planned, stage=stage, current=current)
    rng = np.random.default_rng(seed)
    return record(plan, source, rng, errors or Errors(), **options).passes[0]


def ideal(one, at):
    """Flux of a perfect reading at true positions, from its first one."""
    linked = flux(MAGNET, one.probe, at)
    return linked - linked[0]


def cruising(one):
    """Readings at full speed."""
    start = OUT.dwell + RAMP + 0.05
    return (one.time > start) & (one.time < one.time[-1] - start)


# --- an ideal bench -------------------------------------------------------------------------


@every_probe
def test_ideal_bench_reads_the_probe_where_it_stands(probe):
    one = measure(replace(OUT, probe=probe))
    np.testing.assert_allclose(one.flux, ideal(one, one.position), atol=2e-9)


def test_pass_dwells_at_both_ends_and_moves_at_the_planned_speed():
    one = measure(OUT)
    assert np.all(one.position[one.time <= 2.0] == -0.3)
    assert np.all(one.position[one.time >= one.time[-1] - 1.9] == 0.3)
    speed = np.diff(one.position) / np.diff(one.time)
    np.testing.assert_allclose(speed[cruising(one)[1:]], 0.05, rtol=1e-6)
    np.testing.assert_allclose(np.diff(one.time), 0.02, rtol=1e-9)


def test_increments_add_up_to_the_cumulative_record():
    whole = measure(OUT)
    steps = measure(replace(OUT, record="increments"))
    assert steps.record == "increments"
    assert steps.samples[0] == 0.0
    np.testing.assert_allclose(np.cumsum(steps.samples), whole.flux, atol=1e-12)
    np.testing.assert_array_equal(steps.flux, np.cumsum(steps.samples))


@every_probe
def test_voltage_integrates_to_the_cumulative_record(probe):
    whole = measure(replace(OUT, probe=probe))
    volts = measure(replace(OUT, probe=probe, record="voltage"))
    np.testing.assert_allclose(volts.flux, whole.flux, atol=1e-5 * np.ptp(whole.flux))


def test_a_pass_from_inside_the_magnet_integrates_as_well():
    inside = replace(OUT, start=0.0, stop=0.1, record="voltage")
    whole = measure(replace(inside, record="cumulative"))
    np.testing.assert_allclose(measure(inside).flux, whole.flux, atol=1e-6 * np.ptp(whole.flux))


def test_flux_is_what_readings_make_of_the_samples():
    for how in ("cumulative", "increments", "voltage"):
        one = measure(replace(OUT, record=how, integrator=replace(QUIET, read_noise=1e-7)))
        made = make_pass(one.position, one.samples, one.time, probe=WIRE, record=how)
        np.testing.assert_array_equal(made.flux, one.flux)


# --- errors, one at a time ------------------------------------------------------------------


def test_gain_error_scales_the_flux_of_its_probe_only():
    off = Errors(gain={"wire": 2e-3, "coil": 1.0})
    np.testing.assert_allclose(measure(OUT, off).flux, 1.002 * measure(OUT).flux, atol=1e-15)


def test_drift_grows_with_time():
    one = measure(OUT, Errors(drift=(3e-6,)))
    np.testing.assert_allclose(one.flux - measure(OUT).flux, 3e-6 * one.time, atol=1e-15)


def test_drift_is_as_expected_where_no_error_is_given():
    drifting = replace(OUT, integrator=replace(QUIET, drift=2e-6))
    one = measure(drifting)
    np.testing.assert_allclose(one.flux - measure(OUT).flux, 2e-6 * one.time, atol=1e-15)


def test_drift_is_a_constant_voltage():
    volts = replace(OUT, record="voltage")
    gained = measure(volts, Errors(drift=(3e-6,))).samples - measure(volts).samples
    np.testing.assert_allclose(gained, 3e-6, atol=1e-14)


def test_lag_moves_the_probe_on_by_speed_times_lag():
    one = measure(OUT, Errors(lag=4e-3))
    expected = ideal(one, one.position + 0.05 * 4e-3)
    moving = cruising(one)
    linked = flux(MAGNET, WIRE, -0.3)  # in the first dwell the lag does nothing
    expected += flux(MAGNET, WIRE, -0.3 + 0.05 * 4e-3) - linked
    np.testing.assert_allclose(one.flux[moving], expected[moving], atol=1e-9)


def test_scale_and_offset_move_the_probe():
    errors = Errors(scale=1e-3, offset=2e-4)
    one = measure(OUT, errors)
    np.testing.assert_allclose(one.flux, ideal(one, 1.001 * one.position + 2e-4), atol=2e-9)


def test_backlash_parts_the_two_directions():
    errors = Errors(backlash=2e-4)
    for planned, side in ((OUT, 1e-4), (BACK, -1e-4)):
        one = measure(planned, errors)
        np.testing.assert_allclose(one.flux, ideal(one, one.position + side), atol=2e-9)


def test_errors_move_a_voltage_as_they_move_a_flux():
    errors = Errors(gain={"coil": 1e-3}, scale=1e-3, offset=2e-4, lag=5e-3, backlash=1e-4)
    planned = replace(OUT, probe=RECTANGULAR)
    whole = measure(planned, errors)
    volts = measure(replace(planned, record="voltage"), errors)
    np.testing.assert_allclose(volts.flux, whole.flux, atol=1e-5 * np.ptp(whole.flux))


# --- noise ----------------------------------------------------------------------------------


LONG = replace(OUT, rate=1000.0, dwell=20.0)


def test_read_noise_is_independent_from_reading_to_reading():
    one = measure(LONG, Errors(noise={"main": Noise(walk=0.0, read=1e-7)}))
    noise = one.flux - ideal(one, one.position)
    assert np.std(noise) == pytest.approx(1e-7, rel=0.02)
    assert abs(np.corrcoef(noise[1:], noise[:-1])[0, 1]) < 0.02


def test_walk_grows_with_the_root_of_time():
    one = measure(LONG, Errors(noise={"main": Noise(walk=2e-7, read=0.0)}))
    steps = np.diff(one.flux - ideal(one, one.position))
    assert np.std(steps) == pytest.approx(2e-7 * np.sqrt(1e-3), rel=0.02)
    ends = [
        measure(OUT, Errors(noise={"main": Noise(2e-7, 0.0)}), seed=seed).flux[-1]
        for seed in range(300)
    ]
    assert np.std(ends) == pytest.approx(2e-7 * np.sqrt(one_duration()), rel=0.1)


def test_voltage_noise_integrates_to_the_walk():
    volts = replace(OUT, record="voltage")
    noisy = Errors(noise={"main": Noise(2e-7, 0.0)})
    ends = [measure(volts, noisy, seed=seed).flux[-1] for seed in range(300)]
    assert np.std(ends) == pytest.approx(2e-7 * np.sqrt(one_duration()), rel=0.1)
    long = measure(replace(LONG, record="voltage"), noisy)
    quiet = measure(replace(LONG, record="voltage"))
    noise = long.samples - quiet.samples
    assert np.std(noise) == pytest.approx(2e-7 / np.sqrt(1e-3), rel=0.02)


def one_duration():
    return 2 * 2.0 + 0.6 / 0.05 + RAMP


def test_voltage_has_no_read_noise():
    volts = replace(OUT, record="voltage", integrator=Integrator("main", walk_noise=0.0))
    np.testing.assert_array_equal(measure(volts).flux, measure(volts, seed=2).flux)


def test_jitter_moves_each_reading_of_an_integrator():
    stage = Stage(u_position=5e-6)
    uniform = Uniform(0.5)
    one = measure(LONG, source=uniform, stage=stage)
    ideal_flux = 0.5 * (one.position - one.position[0])  # gain 1 m
    noise = one.flux - ideal_flux
    assert np.std(noise) == pytest.approx(0.5 * 5e-6, rel=0.02)
    assert np.all(one.position[one.time < 20.0] == -0.3)


def test_jitter_is_in_the_noted_position_beside_a_voltage():
    one = measure(replace(LONG, record="voltage"), stage=Stage(u_position=5e-6))
    still = one.time < 20.0
    assert np.std(one.position[still]) == pytest.approx(5e-6, rel=0.02)
    np.testing.assert_allclose(one.samples[still], 0.0, atol=1e-12)


def test_true_noise_may_differ_from_what_is_stated():
    stated = replace(LONG, integrator=replace(QUIET, read_noise=1e-9))
    one = measure(stated, Errors(noise={"main": Noise(0.0, 1e-7)}))
    assert np.std(one.flux - ideal(one, one.position)) == pytest.approx(1e-7, rel=0.02)


# --- instruments ----------------------------------------------------------------------------


def test_flux_comes_in_steps_of_the_resolution():
    coarse = replace(OUT, integrator=replace(QUIET, resolution=1e-6))
    one = measure(coarse)
    np.testing.assert_allclose(one.flux * 1e6, np.round(one.flux * 1e6), atol=1e-6)
    assert np.abs(one.flux - measure(OUT).flux).max() == pytest.approx(0.5e-6, rel=0.05)


def test_resolution_need_not_be_a_decimal():
    step = 10.0 / 2**23
    one = measure(replace(OUT, integrator=replace(QUIET, resolution=step)))
    np.testing.assert_allclose(one.flux / step, np.round(one.flux / step), atol=1e-6)


def test_increments_of_quantised_readings_do_not_lose_the_sum():
    coarse = replace(OUT, record="increments", integrator=replace(QUIET, resolution=1e-6))
    assert measure(coarse).flux[-1] == pytest.approx(measure(OUT).flux[-1], abs=1.1e-6)


def test_analog_integrator_droops_and_the_readings_undo_it():
    leaky = replace(QUIET, kind="analog", leak_time=50.0)
    one = measure(replace(OUT, integrator=leaky, rate=200.0))
    whole = measure(replace(OUT, rate=200.0))
    shown = one.samples
    last = one.time > one.time[-1] - 1.9  # nothing moves: what is held decays
    held = shown[last][0] * np.exp(-(one.time[last] - one.time[last][0]) / 50.0)
    np.testing.assert_allclose(shown[last], held, rtol=1e-9)
    assert shown[-1] < 0.95 * whole.flux[-1]
    np.testing.assert_array_equal(one.flux, undo_droop(shown, one.time, 50.0))
    np.testing.assert_allclose(one.flux, whole.flux, atol=1e-6 * whole.flux[-1])


def test_full_scale_clips():
    small = replace(OUT, integrator=replace(QUIET, full_scale=0.1))
    assert measure(small).flux.max() == 0.1
    assert measure(OUT).flux.max() > 0.14


def test_encoder_counts_are_whole():
    one = measure(OUT, per_count=5e-6)
    counts = one.position / 5e-6
    np.testing.assert_allclose(counts, np.round(counts), atol=1e-6)
    assert np.abs(one.position - measure(OUT).position).max() <= 2.6e-6


# --- options --------------------------------------------------------------------------------


def settling(time):
    return 50.0 - 0.5 * np.exp(-time / 4.0)


@every_probe
def test_field_follows_the_recorded_current(probe):
    one = measure(replace(OUT, probe=probe), current=settling)
    np.testing.assert_array_equal(one.current, settling(one.time))
    linked = flux(MAGNET, probe, one.position)
    if probe is WIRE:
        linked = linked - flux(MAGNET, probe, -0.3)
    expected = linked * settling(one.time) / 50.0
    np.testing.assert_allclose(one.flux, expected - expected[0], atol=2e-9)


@every_probe
def test_a_changing_current_induces_a_voltage_of_its_own(probe):
    planned = replace(OUT, probe=probe, start=-0.05)
    whole = measure(planned, current=settling)
    volts = measure(replace(planned, record="voltage"), current=settling)
    np.testing.assert_allclose(volts.flux, whole.flux, atol=2e-5 * np.ptp(whole.flux))


def test_temperature_is_recorded_and_does_nothing():
    one = measure(OUT, temperature=lambda time: 20.0 + 0.01 * time)
    np.testing.assert_array_equal(one.temperature, 20.0 + 0.01 * one.time)
    np.testing.assert_array_equal(one.flux, measure(OUT).flux)


def test_every_line_has_a_field_of_its_own():
    plan = plan_of(OUT, replace(OUT, x=0.01))
    measured = record(
        plan, lambda x, y: (1.0 + 10.0 * x + y) * MAGNET, np.random.default_rng(1), Errors()
    )
    on_axis, beside = measured.passes
    assert (on_axis.x, beside.x) == (0.0, 0.01)
    np.testing.assert_allclose(beside.flux, 1.1 * on_axis.flux, atol=1e-15)


# --- the campaign ---------------------------------------------------------------------------


def test_plan_becomes_record():
    plan = plan_of(OUT, BACK)
    measured = record(plan, MAGNET, np.random.default_rng(1), Errors())
    assert measured.planned == ()
    assert [one.name for one in measured.passes] == ["pass_01.csv", "pass_02.csv"]
    assert all(isinstance(one, Recorded) for one in measured.passes)
    assert measured.passes[1].position[0] == 0.3
    assert plan.planned == (OUT, BACK)


def test_measured_passes_are_kept_and_their_names_not_reused():
    first = record(plan_of(OUT), MAGNET, np.random.default_rng(1), Errors())
    kept = replace(first.passes[0], name="pass_02.csv")
    both = record(replace(plan_of(BACK), passes=(kept,)), MAGNET, np.random.default_rng(1))
    assert [one.name for one in both.passes] == ["pass_02.csv", "pass_03.csv"]
    assert both.passes[0] is kept


def test_the_same_seed_gives_the_same_readings_and_touches_no_global_state():
    stage = Stage(u_position=5e-6, u_lag=1e-3)
    noisy = replace(OUT, integrator=Integrator("main", read_noise=1e-7, walk_noise=1e-7))
    state = np.random.get_state()[1].copy()  # noqa: NPY002 - it must not move
    first, again, other = (
        record(plan_of(noisy, stage=stage), MAGNET, np.random.default_rng(seed)).passes[0]
        for seed in (1, 1, 2)
    )
    np.testing.assert_array_equal(first.flux, again.flux)
    assert np.any(first.flux != other.flux)
    np.testing.assert_array_equal(state, np.random.get_state()[1])  # noqa: NPY002 - as above


def test_errors_left_out_are_drawn():
    plan = plan_of(OUT, stage=Stage(u_offset=1e-3))
    spread = [
        record(plan, MAGNET, np.random.default_rng(seed)).passes[0].flux[-1] for seed in range(5)
    ]
    assert np.ptp(spread) > 0.0


def test_refusals_say_what_is_missing():
    rng = np.random.default_rng(1)
    with pytest.raises(InputError, match="no planned pass"):
        record(plan_of(), MAGNET, rng)
    unknown = replace(OUT, integrator=Integrator("main"))
    with pytest.raises(InputError, match="no walk_noise or no read_noise"):
        record(plan_of(unknown), MAGNET, rng)
    with pytest.raises(InputError, match="one for each of 1 passes"):
        record(plan_of(OUT), MAGNET, rng, Errors(drift=(0.0, 0.0)))
    with pytest.raises(InputError, match="nominal current"):
        record(plan_of(OUT), MAGNET, rng, current=settling)
    leaky = Integrator("main", "analog", read_noise=0.0, walk_noise=0.0, leak_time=100.0)
    droops = replace(OUT, integrator=leaky, record="increments")
    with pytest.raises(InputError, match="leak_time"):
        record(plan_of(droops), MAGNET, rng)


# --- references -----------------------------------------------------------------------------


def test_point_reads_the_field_within_its_uncertainty():
    rng = np.random.default_rng(1)
    readings = [read_point(MAGNET, 0.02, 1e-5, rng) for _ in range(2000)]
    errors = [reading.field - float(MAGNET.field(0.02)) for reading in readings]
    assert np.std(errors) == pytest.approx(1e-5, rel=0.05)
    assert abs(np.mean(errors)) < 1e-6
    assert (readings[0].at, readings[0].u) == (0.02, 1e-5)


def test_flip_reads_twice_the_flux_where_the_stage_truly_stands():
    rng = np.random.default_rng(1)
    errors = Errors(gain={"coil": 1e-3}, scale=1e-3, offset=2e-4)
    flips = [read_flip(MAGNET, RECTANGULAR, 0.14, 1e-6, rng, errors) for _ in range(2000)]
    changes = np.array([flip.flux_change for flip in flips])
    linked = float(flux(MAGNET, RECTANGULAR, 0.14 * 1.001 + 2e-4))
    assert np.mean(changes) == pytest.approx(2 * 1.001 * linked, abs=1e-7)
    assert np.std(changes) == pytest.approx(1e-6, rel=0.05)
    assert flips[0].probe is RECTANGULAR
