"""Faults put into simulated campaigns: each does what it says, no more, and the same for a seed."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Noise
from fieldmap.bench.faults import FAULTS, SEVERITIES, Setting, inject
from fieldmap.bench.faults.ideal import Observer
from fieldmap.bench.faults.table import table_of
from fieldmap.bench.response import flux
from fieldmap.bench.sources import TanhMagnet
from fieldmap.errors import InputError
from fieldmap.estimate import stitch
from fieldmap.estimate.findings.assumed import assumptions
from fieldmap.readings import FlipReference, Integrator, Pass, PointReference, ZeroReference
from tests.shop import DIPOLE, MAIN, RECT, ROUND, WIRE, measured, planned

ANALOG = replace(MAIN, kind="analog", leak_time=1000.0)
RECORDS = ("cumulative", "increments", "voltage")
REFERENCES = (PointReference(0.0, 0.5, 2e-5), ZeroReference(0.36, 0.4, 1e-5))
UNCHANGED = ("stray-field",)  # of coils, which do not sense it
LEAPS = ("polarity-several", "swapped-columns", "other-file")  # severities are variants, not sizes


def setting(*, probe=WIRE, how="cumulative", integrator=MAIN, source=DIPOLE, seed=1, **more):
    passes = planned(
        (-0.4, 0.4),
        (0.4, -0.4),
        (-0.4, 0.1),
        probe=probe,
        integrator=integrator,
        record=how,
        **more,
    )
    campaign = measured(passes, REFERENCES, seed=seed, source=source)
    noise = {one.name: Noise(200e-9, 50e-9) for one in campaign.passes}
    return Setting(campaign, lambda _: source, noise)


@pytest.fixture(scope="module")
def settings():
    return {how: setting(how=how) for how in RECORDS}


def put(whole, key, severity, seed=3):
    return inject(whole, key, severity, np.random.default_rng(seed))


def struck(whole, faulty):
    """The one pass that is wrong: its index, as it was and as it is."""
    (index,) = [
        i
        for i, (own, now) in enumerate(
            zip(whole.campaign.passes, faulty.campaign.passes, strict=True)
        )
        if now is not own
    ]
    return index, whole.campaign.passes[index], faulty.campaign.passes[index]


def columns(campaign):
    """All that a fault may change, for comparing."""
    passes = [
        (one.name, one.probe, *(getattr(one, name) for name in ("time", "position", "flux")))
        for one in campaign.passes
    ]
    return passes, campaign.references


def same(first, other):
    (passes, references), (others, other_references) = columns(first), columns(other)
    return (
        references == other_references
        and len(passes) == len(others)
        and all(
            a[:2] == b[:2] and all(map(np.array_equal, a[2:], b[2:]))
            for a, b in zip(passes, others, strict=True)
        )
    )


def change(whole, faulty):
    """How much larger positions, times and flux became in all, each by its own size."""
    total = 0.0
    for own, now in zip(whole.campaign.passes, faulty.campaign.passes, strict=False):
        rows = faulty.rows.get(own.name, np.arange(len(own.time)))
        for name in ("position", "time", "flux"):
            before, after = getattr(own, name), getattr(now, name)
            total += np.abs(after - before[rows]).sum() / np.ptp(before)
    return total


def test_there_are_many_kinds_and_each_is_told_in_words():
    assert len(FAULTS) >= 28
    for key, kind in FAULTS.items():
        assert key == kind.key
        assert len(kind.sizes) == len(SEVERITIES)
        assert list(kind.sizes) == sorted(kind.sizes) or key in ("missed-triggers", "repeated-rows")
        assert all((kind.words, kind.of, kind.reason))
    revealed = {kind.revealed_by for kind in FAULTS.values()}
    assert {"overlap", "smoothness", "redundancy of probes", "nothing"} <= revealed


@pytest.mark.parametrize("key", FAULTS)
@pytest.mark.parametrize("how", RECORDS)
def test_every_kind_changes_something_and_the_same_for_a_seed(settings, how, key):
    whole = settings[how]
    untouched = columns(whole.campaign)
    for severity in (2, 5):
        try:
            faulty = put(whole, key, severity)
        except InputError:  # the reader of tables refuses it
            with pytest.raises(InputError):
                put(whole, key, severity)
            continue
        assert not same(faulty.campaign, whole.campaign)
        assert same(faulty.campaign, put(whole, key, severity).campaign)
        assert faulty.where
    assert columns(whole.campaign)[1] is untouched[1]


@pytest.mark.parametrize("probe", [RECT, ROUND], ids=["rect", "round"])
@pytest.mark.parametrize("how", RECORDS)
def test_coils_have_them_too(probe, how):
    whole = setting(probe=probe, how=how)
    for key in FAULTS:
        try:
            faulty = put(whole, key, 4)
        except InputError:
            continue
        assert same(faulty.campaign, whole.campaign) == (key in UNCHANGED), key


@pytest.mark.parametrize("key", [key for key in FAULTS if key not in LEAPS])
def test_a_severer_one_is_larger(settings, key):
    whole = settings["cumulative"]
    sizes = []
    for severity in SEVERITIES:
        try:
            sizes.append(change(whole, put(whole, key, severity)))
        except InputError:
            sizes.append(np.inf)
    assert sizes == sorted(sizes)


def test_another_seed_strikes_elsewhere(settings):
    whole = settings["cumulative"]
    struck_ones = {put(whole, "encoder-slip", 3, seed).where for seed in range(20)}
    assert len(struck_ones) == 3


@pytest.mark.parametrize("how", RECORDS)
@pytest.mark.parametrize("integrator", [MAIN, ANALOG], ids=["digital", "analog"])
def test_the_table_of_a_pass_gives_the_pass_again(how, integrator):
    if how == "increments" and integrator is ANALOG:
        pytest.skip("refused: droop depends on the level shown")
    one = setting(how=how, integrator=integrator).campaign.passes[0]
    bare = Pass(one.name, one.probe, one.integrator, one.time, one.position, one.flux, record=how)
    for known in (one, bare):  # with the samples at hand, and without
        again = table_of(known).as_pass()
        np.testing.assert_allclose(again.flux, one.flux, rtol=0, atol=1e-15)
        assert np.array_equal(again.position, one.position)
    # samples that were recovered answer to a fault like those that were kept
    step = 1e-4 * (np.arange(len(one.time)) > 200)
    kept, found = (table_of(known).with_flux(step).as_pass().flux for known in (one, bare))
    np.testing.assert_allclose(kept - one.flux, found - one.flux, rtol=0, atol=1e-12)


@pytest.mark.parametrize("how", RECORDS)
@pytest.mark.parametrize("integrator", [MAIN, ANALOG], ids=["digital", "analog"])
def test_an_integrator_step_is_one_step(how, integrator):
    if how == "increments" and integrator is ANALOG:
        pytest.skip("refused: droop depends on the level shown")
    whole = setting(how=how, integrator=integrator)
    index, own, now = struck(whole, put(whole, "integrator-step", 4))
    moved = now.flux - own.flux
    assert abs(moved[0]) < 1e-12
    assert moved[-1] == pytest.approx(moved[-5], rel=1e-6)
    expected = 100.0 * np.hypot(200e-9 * np.sqrt(whole.gap_time(index)), 50e-9)
    assert abs(moved[-1]) == pytest.approx(expected, rel=1e-6)


def test_a_slip_moves_all_that_follows(settings):
    index, own, now = struck(settings["cumulative"], put(settings["cumulative"], "encoder-slip", 4))
    moved = now.position - own.position
    assert np.unique(moved.round(12)).size == 2
    assert np.abs(moved).max() == pytest.approx(0.1 * 0.03)
    assert np.array_equal(now.flux, own.flux)
    assert index in (0, 1, 2)


def test_lost_counts_fall_short_of_the_travel(settings):
    whole = settings["cumulative"]
    for seed in range(6):
        _, own, now = struck(whole, put(whole, "lost-counts", 4, seed))
        lost = now.position[-1] - own.position[-1]
        assert lost == pytest.approx(-np.sign(own.position[-1] - own.position[0]) * 0.003)


@pytest.mark.parametrize("how", RECORDS)
def test_a_whole_pass_of_wrong_polarity_is_turned_round(settings, how):
    _, own, now = struck(settings[how], put(settings[how], "polarity", 5))
    np.testing.assert_allclose(np.diff(now.flux), -np.diff(own.flux), rtol=0, atol=1e-14)


@pytest.mark.parametrize("how", RECORDS)
def test_a_range_change_multiplies_what_follows(settings, how):
    _, own, now = struck(settings[how], put(settings[how], "range-change", 5))
    ratio = (now.flux[-1] - now.flux[-100]) / (own.flux[-1] - own.flux[-100])
    assert ratio == pytest.approx(10.0, rel=1e-3) or ratio == pytest.approx(0.1, rel=1e-3)


def test_saturation_clips(settings):
    _, own, now = struck(settings["cumulative"], put(settings["cumulative"], "saturation", 4))
    assert np.abs(now.flux).max() == pytest.approx(0.8 * np.abs(own.flux).max())
    inside = np.abs(own.flux) < np.abs(now.flux).max()
    assert np.array_equal(now.flux[inside], own.flux[inside])


@pytest.mark.parametrize(("key", "kept"), [("missed-triggers", 0.6), ("truncated-file", 0.1)])
def test_rows_are_lost(settings, key, kept):
    _, own, now = struck(settings["cumulative"], put(settings["cumulative"], key, 5))
    assert len(now.time) == pytest.approx(kept * len(own.time), abs=2)
    assert set(now.time) <= set(own.time)


def test_a_lost_increment_is_flux_lost(settings):
    whole = settings["increments"]
    faulty = put(whole, "missed-triggers", 4)
    _, own, now = struck(whole, faulty)
    lost = np.setdiff1d(np.arange(len(own.time)), faulty.rows[own.name])
    assert own.flux[-1] - now.flux[-1] == pytest.approx(np.diff(own.flux)[lost - 1].sum())


def test_repeated_rows_repeat(settings):
    faulty = put(settings["cumulative"], "repeated-rows", 3)
    _, own, now = struck(settings["cumulative"], faulty)
    assert len(now.time) == len(own.time) + 10
    assert (np.diff(now.time) == 0).sum() == 10
    assert faulty.structural


def test_repeated_voltages_are_refused_as_by_the_reader(settings):
    with pytest.raises(InputError, match="time that grows"):
        put(settings["voltage"], "repeated-rows", 3)


def test_a_clock_that_jumps_leaves_flux_alone_but_for_voltages(settings):
    for how in RECORDS:
        _, own, now = struck(settings[how], put(settings[how], "clock-jump", 3))
        assert now.time[-1] - own.time[-1] == pytest.approx(1.0)
        assert np.array_equal(now.flux, own.flux) == (how != "voltage")


def test_spikes_are_three(settings):
    _, own, now = struck(settings["cumulative"], put(settings["cumulative"], "spikes", 3))
    off = now.flux - own.flux
    assert np.count_nonzero(off) == 3
    assert np.abs(off[off != 0]) == pytest.approx(200 * 50e-9)


def test_coarse_samples_are_whole_steps(settings):
    _, own, now = struck(settings["cumulative"], put(settings["cumulative"], "quantisation", 4))
    step = 200 * 50e-9
    np.testing.assert_allclose(now.flux / step, np.round(now.flux / step), atol=1e-6)
    assert np.abs(now.flux - own.flux).max() <= step / 2 * (1 + 1e-9)


@pytest.mark.parametrize("how", RECORDS)
def test_a_late_pass_reads_the_flux_of_later(settings, how):
    whole = settings[how]
    index, own, now = struck(whole, put(whole, "lag", 4))
    late = [200 * 2e-3, -200 * 2e-3]
    there = [np.interp(own.time + by, own.time, own.position) for by in late]
    expected = [flux(DIPOLE, WIRE, p) - flux(DIPOLE, WIRE, own.position) for p in there]
    moved = now.flux - own.flux
    off = [np.abs(moved - (one - one[0])).max() for one in expected]
    # a spline through samples of a voltage overshoots where the stage starts and stops
    assert min(off) < (1e-5 if how == "voltage" else 1e-9)
    assert np.abs(moved).max() > 5e-3
    assert index in (0, 1, 2)


def test_play_is_seen_in_both_directions(settings):
    whole = settings["cumulative"]
    faulty = put(whole, "backlash", 4)
    out, back = (
        now.flux[450] - now.flux[0] - own.flux[450] + own.flux[0]
        for own, now in zip(whole.campaign.passes[:2], faulty.campaign.passes, strict=False)
    )
    # a wire in the middle of the magnet collects its turns, length, field and half of the play
    assert abs(out) == pytest.approx(20 * 0.05 * 0.5 * 0.0015, rel=0.02)
    assert out == pytest.approx(-back, rel=0.02)


@pytest.mark.parametrize(
    ("key", "size"), [("tilt", np.cos(0.1) - 1), ("field-changed", 1e-2), ("turns-one-pass", 0.1)]
)
def test_a_gain_of_one_pass(settings, key, size):
    _, own, now = struck(settings["cumulative"], put(settings["cumulative"], key, 4))
    share = np.ptp(now.flux) / np.ptp(own.flux) - 1
    assert share == pytest.approx(size, rel=1e-3) or share in (
        pytest.approx(-size, rel=1e-3),
        pytest.approx(1 / (1 + size) - 1, rel=1e-3),
    )


def test_another_magnet_is_stronger_and_longer(settings):
    whole = settings["cumulative"]
    _, own, now = struck(whole, put(whole, "other-magnet", 4))
    moved = np.diff(now.flux - own.flux)
    off = []
    for factor in (1.01, 1 / 1.01):
        other = TanhMagnet(0.5 * factor, length=0.3 * factor, lam=0.03 / np.pi * factor)
        expected = np.diff(flux(other, WIRE, own.position) - flux(DIPOLE, WIRE, own.position))
        off.append(np.abs(moved - expected).max())
    assert min(off) < 1e-8  # the bundle's width is stretched, too
    assert max(off) > 1e-6


def test_a_stray_field_grows_along_the_travel(settings):
    _, own, now = struck(settings["cumulative"], put(settings["cumulative"], "stray-field", 4))
    moved = now.flux - own.flux
    np.testing.assert_allclose(
        np.abs(moved), 20 * 0.05 * 1e-3 * 0.5 * np.abs(own.position - own.position[0]), rtol=1e-6
    )


def test_drift_follows_the_recorded_temperature(settings):
    whole = settings["cumulative"]
    faulty = put(whole, "drift-with-temperature", 5)
    for own, now in zip(whole.campaign.passes, faulty.campaign.passes, strict=True):
        rate = np.diff(now.flux - own.flux) / np.diff(own.time)
        assert np.corrcoef(rate, now.temperature[1:])[0, 1] > 0.9999


def test_units_and_columns(settings):
    whole = settings["increments"]
    _, own, now = struck(whole, put(whole, "flux-unit", 3))
    assert np.ptp(now.flux) / np.ptp(own.flux) in (pytest.approx(1e3), pytest.approx(1e-3))
    _, own, now = struck(whole, put(whole, "position-unit", 2))
    assert np.ptp(now.position) / np.ptp(own.position) in (pytest.approx(100), pytest.approx(0.01))
    _, own, now = struck(whole, put(whole, "swapped-columns", 2))
    np.testing.assert_allclose(np.diff(now.flux), own.position[1:] * 1e-3, atol=1e-12)


def test_descriptions_that_are_wrong(settings):
    whole = settings["cumulative"]
    (area,) = {one.probe.active_length for one in put(whole, "area-everywhere", 4).campaign.passes}
    assert area in (pytest.approx(0.05 * 1.1), pytest.approx(0.05 / 1.1))
    (wide,) = {one.probe.width for one in put(whole, "window-misstated", 4).campaign.passes}
    assert wide == pytest.approx(0.4e-3 + 0.2 * 0.03)
    _, own, now = struck(whole, put(whole, "other-probe", 5))
    assert (own.probe, now.probe.senses_level) == (WIRE, False)


def test_files_mixed_up(settings):
    whole = settings["cumulative"]
    faulty = put(whole, "duplicated-pass", 3)
    assert len(faulty.campaign.passes) == 3 + 4
    assert len({one.name for one in faulty.campaign.passes}) == 7
    faulty = put(whole, "other-file", 1)
    _, _, now = struck(whole, faulty)
    assert any(np.array_equal(now.flux, one.flux) for one in whole.campaign.passes)
    assert faulty.structural


def test_references_that_are_wrong(settings):
    whole = settings["cumulative"]
    for seed in range(8):
        point, zero = put(whole, "reference-misread", 3, seed).campaign.references
        assert abs(point.field - 0.5) == pytest.approx(30 * 2e-5) or point.field == 0.5
        assert zero.u in (1e-5, pytest.approx(1e-5 / 30))
        assert (point.field == 0.5) != (zero.u == 1e-5)
        point, zero = put(whole, "reference-misplaced", 4, seed).campaign.references
        assert (abs(point.at), zero.stop) in ((pytest.approx(0.03), 0.4), (0.0, 0.37))


def test_a_fault_that_has_no_place_is_none():
    bare = setting()
    bare = replace(bare, campaign=replace(bare.campaign, references=()))
    assert put(bare, "reference-misread", 3) is None


@pytest.mark.parametrize(("key", "severity"), [("gremlins", 1), ("lag", 6)])
def test_refuses_what_it_does_not_know(settings, key, severity):
    with pytest.raises(InputError, match="expected"):
        put(settings["cumulative"], key, severity)


def test_what_is_taken_on_trust_depends_on_what_there_is(settings):
    full = settings["cumulative"].campaign
    starts = [sentence.partition(":")[0] for sentence in assumptions(full)]
    assert starts == ["all positions are in the right unit and to the right scale"]
    bare = replace(full, references=(), passes=full.passes[:1])
    assert len(assumptions(bare)) == 4
    flip = FlipReference(RECT, 0.0, 0.3, 1e-6)
    coil = setting(probe=RECT).campaign
    said = assumptions(replace(coil, references=(flip,)))
    assert len(said) == 2
    assert said[1].startswith("the size and angle of 'coil'")


# --- the ideal observer


@pytest.fixture(scope="module")
def watched():
    whole = setting(rate=20.0)
    return whole, Observer(whole, stitch(whole.campaign, knot_spacing=0.01))


def statistic(watched, key, severity, seed=3):
    return watched[1].statistic(key, severity, np.random.default_rng(seed))


def test_the_statistic_is_that_of_the_readings_less_what_the_unknowns_explain(watched):
    """z² = Δᵀ(C⁻¹ - C⁻¹A V AᵀC⁻¹)Δ with dense matrices, where no other field is thought of."""
    line = watched[1].lines[0]
    fields, line.others = line.others, []
    try:
        found = statistic(watched, "integrator-step", 3)
        faulty = inject(watched[1].setting, "integrator-step", 3, np.random.default_rng(3))
    finally:
        line.others = fields
    moved = np.concatenate([line._increments(faulty, k) for k in range(3)])
    noise = line.noise @ np.eye(len(moved))
    design = line.evidence.design.toarray()
    inverse = np.linalg.inv(noise)
    references = line.evidence.references
    normal = line.normal + references.T @ references
    shared = design.T @ inverse @ moved
    expected = moved @ inverse @ moved - shared @ np.linalg.solve(normal, shared)
    assert found**2 == pytest.approx(expected, rel=1e-6)


def test_the_statistic_grows_with_the_fault(watched):
    # the quiet twin has the same step, so it is as large as the fault to rounding
    small, large = (statistic(watched, "integrator-step", severity) for severity in (2, 4))
    assert large == pytest.approx(10 * small, rel=1e-3)


def test_what_readings_show_and_what_they_cannot(watched):
    assert statistic(watched, "polarity", 5) > 1000
    assert statistic(watched, "setup-moved", 4) > 30
    assert statistic(watched, "duplicated-pass", 1) == np.inf
    assert statistic(watched, "truncated-file", 2) < 1e-6


def test_without_a_second_probe_or_reference_a_wrong_area_cannot_be_told():
    whole = setting(rate=20.0)
    whole = replace(whole, campaign=replace(whole.campaign, references=()))
    observer = Observer(whole, stitch(whole.campaign, knot_spacing=0.003))
    for key in ("area-everywhere", "tilt-everywhere", "position-scale-everywhere"):
        assert observer.statistic(key, 4, np.random.default_rng(3)) < 7, key
    # ten times the flux is ten times the drift, which is known; a tenth of it is not told
    units = [
        observer.statistic("flux-unit-everywhere", 1, np.random.default_rng(seed))
        for seed in range(6)
    ]
    assert min(units) < 7


def test_an_unstated_drift_is_taken_as_found():
    free = Integrator("main", read_noise=50e-9, walk_noise=200e-9)
    whole = setting(integrator=free, rate=20.0)
    observer = Observer(whole, stitch(whole.campaign, knot_spacing=0.01))
    assert observer.statistic("clock-jump", 1, np.random.default_rng(3)) < 1
