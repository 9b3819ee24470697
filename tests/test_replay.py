"""A campaign over again: what stays, what is drawn, and how widely."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors, Noise, draw_errors
from fieldmap.bench.mapped import MappedField
from fieldmap.bench.replay import _sense, replay
from fieldmap.bench.response import flux
from fieldmap.bench.twin import read_flip, record
from fieldmap.errors import InputError
from fieldmap.estimate import map_lines, stitch
from fieldmap.estimate.corrected import reached
from fieldmap.magnet import evaluate
from fieldmap.readings import (
    Coil,
    FlipReference,
    Integrator,
    PointReference,
    Stage,
    ZeroReference,
)
from tests.shop import (
    DIPOLE,
    MAIN,
    RECT,
    STAGE,
    WIRE,
    measured,
    out_and_back,
    plan,
    planned,
    truth,
)

QUIET = Integrator("main", read_noise=0.0, walk_noise=0.0, u_drift=0.0)
SURE = replace(WIRE, u_active_length=0.0)
COARSE = {"knot_spacing": 0.01}
DRAWS = 150


def again(campaign, fmap, seed=0):
    return replay(campaign, fmap, np.random.default_rng(seed))


def many(campaign, fmap, see):
    return np.array([see(again(campaign, fmap, seed)) for seed in range(DRAWS)])


def within(sample, sd, mean=0.0):
    """Whether mean and spread of a sample are those expected, at four standard errors."""
    n = len(sample)
    assert abs(np.mean(sample) - mean) < 4 * sd / np.sqrt(n)
    assert np.std(sample, ddof=1) == pytest.approx(sd, rel=4 / np.sqrt(2 * n))


@pytest.fixture(scope="module")
def wires():
    campaign = measured(out_and_back(rate=25.0), seed=3)
    return campaign, stitch(campaign, **COARSE)


@pytest.fixture(scope="module")
def certain():
    """Nothing is uncertain and nothing noisy."""
    passes = out_and_back(SURE, integrator=QUIET, rate=25.0)
    campaign = measured(passes, stage=Stage(), seed=4)
    return campaign, stitch(campaign, **COARSE)


@pytest.mark.parametrize("how", ["cumulative", "increments"])
def test_time_stamps_and_recorded_positions_stay(how):
    campaign = measured(out_and_back(rate=25.0, record=how), seed=1)
    new = again(campaign, stitch(campaign, **COARSE)).campaign
    for one, other in zip(campaign.passes, new.passes, strict=True):
        np.testing.assert_array_equal(one.time, other.time)
        np.testing.assert_array_equal(one.position, other.position)
        assert (one.name, one.record) == (other.name, other.record)
        # the same magnet: alike, and yet not the same readings
        assert 0 < np.std(one.flux - other.flux) < 1e-3 * np.ptp(one.flux)
    assert new.limits == campaign.limits
    assert new.axis == campaign.axis


def test_an_ideal_bench_reads_the_map(certain):
    campaign, fmap = certain
    (line,) = map_lines(fmap)
    for one in again(campaign, fmap).campaign.passes:
        exact = flux(MappedField(line), one.probe, one.position)
        np.testing.assert_allclose(one.flux - one.flux[0], exact - exact[0], atol=1e-12)


def test_an_ideal_bench_gives_the_map_back(certain):
    campaign, fmap = certain
    found = evaluate(stitch(again(campaign, fmap).campaign, **COARSE), fringe=False)
    for key, value in truth(DIPOLE, campaign.axis).items():
        assert found[key].value == pytest.approx(evaluate(fmap, fringe=False)[key].value, rel=1e-7)
        assert found[key].value == pytest.approx(value, rel=1e-4)


def test_errors_are_those_that_the_campaign_states(wires):
    campaign, fmap = wires
    drawn = [again(campaign, fmap, seed).errors for seed in range(DRAWS)]
    within([one.gain["wire"] for one in drawn], WIRE.u_gain)
    for name in ("scale", "offset", "lag"):
        within([getattr(one, name) for one in drawn], getattr(STAGE, f"u_{name}"))
    within(np.concatenate([one.drift for one in drawn]), MAIN.u_drift)


def test_gain_reaches_the_flux(wires):
    campaign, fmap = wires
    (line,) = map_lines(fmap)
    one = campaign.passes[0]
    exact = np.diff(flux(MappedField(line), one.probe, one.position[[0, -1]]))[0]
    expected = np.hypot(
        abs(exact) * WIRE.u_gain, np.ptp(one.time) * MAIN.u_drift
    )  # noise is far below both
    within(many(*wires, lambda new: np.ptp(new.campaign.passes[0].flux)), expected, abs(exact))


def test_noise_is_as_stated():
    noisy = replace(QUIET, read_noise=1e-6, walk_noise=2e-6)
    campaign = measured(out_and_back(SURE, integrator=noisy, rate=25.0), stage=Stage(), seed=5)
    fmap = stitch(campaign, **COARSE)
    one = campaign.passes[0]
    (line,) = map_lines(fmap)
    exact = flux(MappedField(line), one.probe, one.position)

    def noise(new):
        return new.campaign.passes[0].flux - exact

    lasted = np.ptp(one.time)
    ends = many(
        campaign,
        fmap,
        lambda new: np.ptp(noise(new)[[0, -1]]) * np.sign(noise(new)[-1] - noise(new)[0]),
    )
    within(ends, np.sqrt(4e-12 * lasted + 2e-12))
    bends = np.diff(noise(again(campaign, fmap)), 2)  # 6 parts of read noise, 2 steps of walk
    assert np.std(bends) == pytest.approx(np.sqrt(6e-12 + 2 * 4e-12 / 25.0), rel=0.1)


def test_noise_and_drift_that_are_not_stated_are_those_fitted():
    silent = Integrator("main", resolution=2e-7)
    true = Errors(drift=(4e-6, 5e-6), noise={"main": Noise(5e-7, 3e-7)})
    campaign = measured(out_and_back(integrator=silent, rate=25.0, dwell=5.0), seed=6, errors=true)
    fmap = stitch(campaign, knot_spacing=0.004)  # coarse knots would add their misfit to the noise
    new = again(campaign, fmap)
    assert new.errors.drift == pytest.approx((4e-6, 5e-6), abs=6e-7)
    assert again(campaign, fmap, 1).errors.drift == new.errors.drift
    still = campaign.passes[0].time < 4.5
    (one, *_), (first, *_) = campaign.passes, new.campaign.passes
    bends = [np.std(np.diff(each.flux[still], 2)) for each in (one, first)]
    assert bends[1] == pytest.approx(bends[0], rel=0.25)
    steps = first.flux / silent.resolution
    np.testing.assert_allclose(steps, np.round(steps), atol=1e-6)


def test_voltage_records_note_their_jitter_in_the_position():
    stage = Stage(u_position=1e-5)
    noisy = replace(QUIET, walk_noise=2e-6)
    campaign = measured(out_and_back(SURE, integrator=noisy, record="voltage"), stage=stage, seed=7)
    fmap = stitch(campaign, **COARSE)
    one = campaign.passes[0]
    (line,) = map_lines(fmap)
    exact = flux(MappedField(line), one.probe, one.position)
    new = again(campaign, fmap)
    moved = new.campaign.passes[0].position - one.position
    assert np.std(moved) == pytest.approx(1e-5, rel=0.1)
    gained = many(campaign, fmap, lambda new: (new.campaign.passes[0].flux - exact)[-1])
    within(gained, 2e-6 * np.sqrt(np.ptp(one.time)), -exact[0])


def test_points_and_flips_are_read_again():
    coil = replace(RECT, u_effective_area=0.0)
    point = PointReference(0.01, 0.5, 2e-5)
    flip = read_flip(DIPOLE, coil, 0.0, 3e-6, np.random.default_rng(1))
    passes = out_and_back(coil, rate=25.0)
    campaign = measured(passes, (point, flip), stage=Stage(), seed=8)
    fmap = stitch(campaign, **COARSE)
    (line,) = map_lines(fmap)
    here = float(line.field(np.array([0.01]))[0])
    within(many(campaign, fmap, lambda new: new.campaign.references[0].field), 2e-5, here)
    linked = 2 * float(flux(MappedField(line), coil, 0.0))
    drawn = many(campaign, fmap, lambda new: new.campaign.references[1].flux_change)
    within(drawn, 3e-6, linked)
    kept = again(campaign, fmap).campaign.references
    assert [(one.at, type(one)) for one in kept] == [(0.01, PointReference), (0.0, FlipReference)]


def test_a_field_said_to_vanish_gets_the_level_that_this_allows():
    zeros = (ZeroReference(-0.4, -0.36, 1e-4), ZeroReference(0.36, 0.4, 2e-4))
    campaign = measured(out_and_back(RECT, rate=25.0), zeros, seed=9)
    fmap = stitch(campaign, **COARSE)

    def means(new):
        (line,) = map_lines(new.truth)
        return [line.integral(zero.start, zero.stop)[0] / 0.04 for zero in zeros]

    drawn = many(campaign, fmap, means)
    for column, zero in zip(drawn.T, zeros, strict=True):
        within(column, zero.u)
    assert abs(np.corrcoef(drawn.T)[0, 1]) < 4 / np.sqrt(DRAWS)
    new = again(campaign, fmap)
    assert new.campaign.references == zeros
    np.testing.assert_array_equal(fmap["coefficient"], stitch(campaign, **COARSE)["coefficient"])
    # only the level moved: what it adds is straight between the stretches
    added = new.truth["coefficient"].values[0, 0] - fmap["coefficient"].values[0, 0]
    inner = added[8:-8]
    np.testing.assert_allclose(np.diff(inner, 2), 0, atol=1e-12)


def test_current_and_temperature_are_followed():
    warm = replace(SURE, temperature_coefficient=1e-3, reference_temperature=20.0)
    passes = out_and_back(warm, integrator=QUIET, rate=25.0)
    magnet = replace(plan(passes).magnet, current=100.0)
    campaign = record(
        plan(passes, stage=Stage(), magnet=magnet),
        DIPOLE,
        np.random.default_rng(1),
        Errors(),
        current=lambda time: 100.0 + 0.02 * time,
        temperature=lambda time: 22.0 + 0.1 * time,
    )
    fmap = stitch(campaign, **COARSE)
    assert evaluate(fmap, fringe=False)["integrated_field"].value == pytest.approx(0.15, rel=1e-4)
    for one, other in zip(campaign.passes, again(campaign, fmap).campaign.passes, strict=True):
        np.testing.assert_allclose(other.flux, one.flux, atol=2e-5 * np.ptp(one.flux))


def test_droop_comes_and_goes():
    old = replace(QUIET, kind="analog", leak_time=500.0)
    campaign = measured(out_and_back(SURE, integrator=old), stage=Stage(), seed=1)
    fmap = stitch(campaign, **COARSE)
    (line,) = map_lines(fmap)
    for one in again(campaign, fmap).campaign.passes:
        exact = flux(MappedField(line), one.probe, one.position)
        np.testing.assert_allclose(one.flux - one.flux[0], exact - exact[0], atol=1e-7)


def test_lines_are_measured_each_by_its_own_field():
    passes = [*planned((-0.4, 0.4), rate=25.0), *planned((-0.4, 0.4), rate=25.0, x=0.02)]
    campaign = record(
        plan(passes), lambda x, _: (1 + x) * DIPOLE, np.random.default_rng(1), Errors()
    )
    fmap = stitch(campaign, **COARSE)
    first, second = again(campaign, fmap).campaign.passes
    ratio = np.ptp(second.flux) / np.ptp(first.flux)
    assert ratio == pytest.approx(1.02, abs=3e-4)


def test_one_seed_one_replay(wires):
    first, same, other = (again(*wires, seed).campaign.passes[0].flux for seed in (4, 4, 5))
    np.testing.assert_array_equal(first, same)
    assert np.any(first != other)


def test_refuses_the_map_of_another_campaign(wires):
    campaign, fmap = wires
    renamed = replace(campaign, passes=tuple(replace(p, name="other") for p in campaign.passes))
    with pytest.raises(InputError, match=r"pass 'other \(1\)', which is not in the map"):
        again(renamed, fmap)
    moved = replace(campaign, passes=tuple(replace(p, x=0.5) for p in campaign.passes))
    with pytest.raises(InputError, match=r"no line at x = 0\.5 m"):
        again(moved, fmap)


def test_positions_a_lag_later():
    time = np.linspace(0.0, 10.0, 101)
    np.testing.assert_allclose(reached(time, 0.05 * time, 0.03), 0.05 * (time + 0.03))
    np.testing.assert_allclose(reached(time, 0.05 * time, -0.03), 0.05 * (time - 0.03))
    standing = np.clip(time, 2.0, 8.0)
    np.testing.assert_allclose(reached(time, standing, 0.5), np.clip(time + 0.5, 2.0, 8.0))


def test_sense_turns_where_the_travel_does():
    rng = np.random.default_rng(1)
    there = np.concatenate([np.zeros(50), np.linspace(0, 1, 200), np.ones(50)])
    path = np.concatenate([there, there[::-1]]) + 1e-4 * rng.standard_normal(600)
    sense = _sense(path, 2e-3)
    assert np.all(sense[:250] == 1)
    assert np.all(sense[350:] == -1)
    assert np.count_nonzero(np.diff(sense)) == 1  # dwells turn nothing
    assert np.all(_sense(-path, 2e-3)[:250] == -1)
    assert np.all(_sense(np.zeros(5), 1.0) == 1)


def test_new_kinds_of_errors_are_drawn_where_stated():
    tilted = Coil(
        "coil",
        "round",
        0.3,
        window=0.01,
        u_window=1e-4,
        u_tilt=0.01,
        temperature_coefficient=2e-5,
        u_temperature=2.0,
    )
    campaign = measured(out_and_back(tilted, rate=25.0), [PointReference(0.0, 0.5, 1e-5)], seed=2)
    rng = np.random.default_rng(3)
    drawn = [draw_errors(campaign, rng, passes=campaign.passes) for _ in range(DRAWS)]
    for name, u in (("window", 1e-4), ("tilt", 0.01), ("warmth", 2.0)):
        within([getattr(one, name)["coil"] for one in drawn], u)
