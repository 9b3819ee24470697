"""Corrections at work: readings mended, what is uncertain of them estimated, results true."""

from __future__ import annotations

import json
import os
from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

import fieldmap
from fieldmap.bench.trials import confirm
from fieldmap.errors import InputError
from fieldmap.estimate.checks import prepared
from fieldmap.estimate.corrected import integrator_scale, reached, step_times
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.findings.stated import contradicted
from fieldmap.estimate.map import check_map, map_findings, map_lines, map_passes
from fieldmap.estimate.parameters import Nuisance, nuisances
from fieldmap.estimate.provenance import map_corrections
from fieldmap.magnet.functionals import line_functionals
from fieldmap.readings import Correction, Stage, corrected
from tests.repairs import FACTOR, LAG, LAST, SHIFT, STEP, U_FACTOR, U_LAG, U_SHIFT, faulty
from tests.shop import AXIS, DIPOLE, MAGNET, MAIN, WIRE, measured, planned, truth

SPACING = 6e-3
TRUE = truth(DIPOLE, AXIS)
TRUE["boundary_in"] = -TRUE["magnetic_length"] / 2  # the magnet lies about zero
LAST_HALF = "pass_02.csv"
KEYS = tuple(TRUE)
CASES = (
    ("factor", "cumulative"),
    ("lag", "cumulative"),
    ("shift", "cumulative"),
    ("step", "cumulative"),
    ("spikes", "cumulative"),
    ("spikes", "increments"),
    ("spikes", "voltage"),
)
SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
TRIALS = 30


def stitched(campaign):
    return fieldmap.stitch(campaign, knot_spacing=SPACING)


def results_of(fmap):
    return line_functionals(map_lines(fmap)[0], AXIS, MAGNET.gap)


@pytest.fixture(scope="module")
def scan():
    return measured(planned((-0.2, 0.2), rate=20.0)).passes[0]


def mended(one, *corrections, **more):
    campaign = measured(planned((-0.2, 0.2), rate=20.0))
    made = tuple(replace(each, where=one.name) for each in corrections)
    whole = replace(campaign, passes=(replace(one, **more),), corrections=made)
    return prepared(whole).passes[0]


class TestArrays:
    def test_flux(self, scan):
        turned = mended(scan, Correction("polarity", ""), Correction("factor", "", 4.0))
        np.testing.assert_array_equal(turned.flux, -4.0 * scan.flux)
        np.testing.assert_array_equal(turned.position, scan.position)

    def test_positions(self, scan):
        moved = mended(scan, Correction("shift", "", 2e-3), Correction("lag", "", 0.1))
        # at 50 mm/s a tenth of a second is 5 mm, apart from the ramps
        middle = np.abs(scan.position) < 0.15
        np.testing.assert_allclose((moved.position - scan.position)[middle], 7e-3, atol=1e-6)
        np.testing.assert_array_equal(moved.flux, scan.flux)

    def test_a_lag_reaches_beyond_the_ends(self):
        time, position = np.arange(10.0), 0.1 * np.arange(10.0)
        np.testing.assert_allclose(reached(time, position, 2.0), 0.1 * (time + 2), atol=1e-12)
        np.testing.assert_allclose(reached(time, position, -3.0), 0.1 * (time - 3), atol=1e-12)

    def test_readings_left_out(self, scan):
        cut = Correction("spikes", "", start=1.9, stop=2.1)
        left = mended(scan, cut, temperature=scan.time, current=2 * scan.time)
        gone = (scan.time >= 1.9) & (scan.time <= 2.1)
        assert 3 <= gone.sum() == len(scan.time) - len(left.time)
        np.testing.assert_array_equal(left.time, scan.time[~gone])
        np.testing.assert_array_equal(left.temperature, scan.time[~gone])
        np.testing.assert_array_equal(left.current, 2 * scan.time[~gone])

    def test_what_rings_beside_a_wild_voltage_goes_too(self, scan):
        cut = Correction("spikes", "", start=2.0, stop=2.0)
        left = mended(scan, cut, record="voltage")
        assert len(scan.time) - len(left.time) == 1 + 2 * 8

    def test_made_once(self, scan):
        campaign = measured(planned((-0.2, 0.2), rate=20.0))
        campaign = corrected(campaign, [Correction("factor", scan.name, 10.0)])
        once = prepared(campaign)
        assert once.corrections == ()
        assert prepared(once).passes[0] is once.passes[0]
        again = prepared(replace(once, corrections=campaign.corrections))
        assert again.passes[0] is once.passes[0]

    def test_a_pass_that_is_not_there(self):
        campaign = measured(planned((-0.2, 0.2), rate=20.0))
        wrong = replace(campaign, corrections=(Correction("polarity", "other"),))
        with pytest.raises(InputError, match="'other', which is no measured pass"):
            stitched(wrong)


class TestUnknowns:
    def test_what_is_uncertain_is_an_unknown(self, scan):
        one = mended(
            scan,
            Correction("factor", "", 10.0, 0.02),
            Correction("lag", "", 0.1, 2e-3),
            Correction("shift", "", 1e-3, 1e-4),
            Correction("step", "", start=2.0),
        )
        found = [u for u in nuisances([one], [WIRE], Stage()) if u.kind not in ("drift", "gain")]
        assert [(u.kind, u.where, u.sd) for u in found] == [
            ("pass factor", "pass_01.csv", 0.02),
            ("pass lag", "pass_01.csv", 2e-3),
            ("pass shift", "pass_01.csv", 1e-4),
            ("step", "pass_01.csv at 2 s", float(np.ptp(one.flux))),
        ]

    def test_what_is_certain_is_none(self, scan):
        one = mended(scan, Correction("polarity", ""), Correction("shift", "", 1e-3))
        kinds = {u.kind for u in nuisances([one], [WIRE], Stage())}
        assert kinds == {"drift", "gain"}

    def test_left_out_increments_leave_a_step(self, scan):
        cut = Correction("spikes", "", start=1.9, stop=2.1)
        assert step_times(mended(scan, cut)) == {}
        assert step_times(mended(scan, cut, record="increments")) == {"pass_01.csv at 1.9 s": 1.9}

    @pytest.mark.parametrize(
        ("corrections", "scale"),
        [
            ([Correction("polarity", "")], -1.0),
            ([Correction("factor", "", 1000.0)], 1.0),  # a slip of units: noise as stated
            ([Correction("factor", "", -0.1)], -1.0),
            ([Correction("factor", "", 0.5), Correction("polarity", "")], -0.5),
        ],
    )
    def test_noise_follows_a_probe_and_not_a_unit(self, scan, corrections, scale):
        assert integrator_scale(mended(scan, *corrections)) == pytest.approx(scale)

    def test_drift_follows_it_too(self, scan):
        drifting = replace(scan.integrator, drift=3e-6)
        halved = mended(scan, Correction("factor", "", -0.5), integrator=drifting)
        (drift,) = [u for u in nuisances([halved], [WIRE], Stage()) if u.kind == "drift"]
        assert (drift.mean, drift.sd) == (-1.5e-6, 0.5e-6)


@pytest.mark.parametrize(("kind", "factor"), [("polarity", 1.0), ("factor", 10.0)])
def test_an_exact_correction_gives_the_sound_map_again(kind, factor):
    given = faulty("polarity", 3)
    last = given.sound.passes[-1]
    flux = -last.flux if kind == "polarity" else last.flux / factor
    spoilt = replace(given.sound, passes=(*given.sound.passes[:-1], replace(last, flux=flux)))
    again = stitched(corrected(spoilt, [Correction(kind, LAST, factor)]))
    sound = stitched(given.sound)
    np.testing.assert_allclose(again["B"], sound["B"], rtol=1e-9, atol=1e-12)
    np.testing.assert_allclose(again["B_se"], sound["B_se"], rtol=1e-9)
    spoilt_results = results_of(stitched(spoilt))
    assert abs(spoilt_results["integrated_field"].value - TRUE["integrated_field"]) > 1e-3


def departures(kind, how, seeds):
    """Error over u, and difference from the sound campaign over its u, by result."""
    errors, differences, found = [], [], []
    for seed in seeds:
        given = faulty(kind, seed, how=how)
        fmap = stitched(corrected(given.faulty, [given.correction]))
        mine, sound = results_of(fmap), results_of(stitched(given.sound))
        errors.append([(mine[key].value - TRUE[key]) / mine[key].u for key in KEYS])
        differences.append([(mine[key].value - sound[key].value) / sound[key].u for key in KEYS])
        found.append(map_corrections(fmap)[0])
    return np.array(errors), np.array(differences), found


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "how"), CASES)
def test_a_corrected_campaign_tells_the_truth(kind, how):
    errors, differences, found = departures(kind, how, (100, 101))
    assert np.abs(errors).max() < 4
    assert np.abs(differences).max() < 2
    assert all(one.correction.kind == kind for one in found)
    given = faulty(kind, 100, how=how)
    mended = corrected(given.faulty, [given.correction])
    assert misfit(mended) < 1.6
    assert misfit(given.faulty) > 3 * misfit(mended)  # the fault mattered


def misfit(campaign):
    """Rms of residuals, in what the noise gives: 1 where all is well."""
    passes = map_passes(stitched(campaign))
    square, freedom = (sum(one[key] for one in passes) for key in ("chi_square", "freedom"))
    return np.sqrt(square / freedom)


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "how"), CASES[::3] if SAMPLE else CASES)
def test_errors_are_as_large_as_their_uncertainty(kind, how):
    errors, differences, _ = departures(kind, how, range(TRIALS))
    sizes = np.sqrt(np.mean(errors**2, axis=0))
    # 30 trials tell the ratio to about 13 %
    assert (sizes > 0.7).all(), sizes
    assert (sizes < 1.3).all(), sizes
    assert (np.sqrt(np.mean(differences**2, axis=0)) < 0.8).all()


@pytest.mark.parametrize(
    ("kind", "value", "u"),
    [("factor", FACTOR, U_FACTOR), ("lag", LAG, U_LAG), ("shift", SHIFT, U_SHIFT)],
)
def test_the_other_passes_find_how_large_it_was(kind, value, u):
    given = faulty(kind, 7)
    fmap = stitched(corrected(given.faulty, [given.correction]))
    (found,) = map_corrections(fmap)
    relative = u * value if kind == "factor" else u
    assert found.u < 0.1 * relative
    assert found.value != value
    assert abs(found.value - value) < 4 * relative


def test_the_size_of_a_step_is_found():
    given = faulty("step", 7)
    (found,) = map_corrections(stitched(corrected(given.faulty, [given.correction])))
    assert abs(found.value - STEP) < 4 * found.u < 1e-4
    assert found.unit == "V s"


CERTAIN = replace(WIRE, u_active_length=0.0)
STEADY = replace(MAIN, u_drift=1e-9)
HALVES = planned((-0.4, 0.05), (-0.05, 0.4), probe=CERTAIN, integrator=STEADY, rate=20.0)
GAP = (4.8, 5.4)  # s into the second: 30 mm of the fringe


@pytest.mark.parametrize(("kind", "costs"), [("step", 1.01), ("spikes", 3.0)])
def test_what_one_pass_alone_saw_costs_as_much_as_is_lost(kind, costs):
    """A step takes the increment that it falls in; lost increments take all that they held."""
    offer = Correction(kind, LAST_HALF, start=GAP[0], stop=GAP[1] if kind == "spikes" else 0.0)
    for seed in (1, 2):
        sound = measured(HALVES, seed=seed, stage=Stage())
        last = replace(sound.passes[-1], record="increments")
        flux = last.flux + STEP * (last.time >= GAP[0])
        spoilt = replace(sound, passes=(sound.passes[0], replace(last, flux=flux)))
        mine, plain = (
            results_of(fieldmap.stitch(one, knot_spacing=3e-3))["integrated_field"]
            for one in (corrected(spoilt, [offer]), sound)
        )
        assert mine.u > costs * plain.u
        assert abs(mine.value - TRUE["integrated_field"]) < 3.5 * mine.u


def test_what_other_passes_saw_costs_little():
    given = faulty("step", 1)
    both, sound = (
        results_of(stitched(one))
        for one in (corrected(given.faulty, [given.correction]), given.sound)
    )
    assert sound["integrated_field"].u < both["integrated_field"].u
    assert both["integrated_field"].u < 1.05 * sound["integrated_field"].u


@pytest.mark.parametrize(("kind", "value", "u"), [("lag", 0.02, 4e-3), ("shift", 1e-3, 2e-4)])
def test_what_no_other_pass_tells_stays_uncertain(kind, value, u):
    """A lag of the only pass shifts the whole profile: the readings know nothing of it."""
    campaign = measured(planned((-0.4, 0.4), rate=20.0), stage=Stage())
    late = stitched(corrected(campaign, [Correction(kind, "pass_01.csv", value, u)]))
    (found,) = map_corrections(late)
    assert found.u == pytest.approx(u, rel=0.02)
    assert found.value == pytest.approx(value, abs=0.1 * u)
    metres = u * (0.05 if kind == "lag" else 1.0)
    plain = results_of(stitched(campaign))["boundary_in"].u
    expected = np.hypot(plain, metres)
    assert results_of(late)["boundary_in"].u == pytest.approx(expected, rel=0.05)
    notes = {one.code: one.text for one in map_findings(late)}
    assert f"pass {kind} pass_01.csv" in notes["taken-on-trust"]


@pytest.fixture(scope="module")
def mixed_map():
    """All kinds at once."""
    given = faulty("step", 5)
    first, second = (one.name for one in given.sound.passes[:2])
    more = [
        Correction("lag", first, 1e-4, 2e-3),
        Correction("shift", second, 1e-5, 1e-4),
        Correction("factor", LAST, 1.0 + 1e-6, 1e-3),
        Correction("spikes", second, start=3.0, stop=3.1),
    ]
    return corrected(given.faulty, [given.correction, *more])


@pytest.fixture(scope="module")
def fmap(mixed_map):
    return stitched(mixed_map)


def test_the_budget_names_them_and_leaves_nothing_over(fmap):
    budgets = fieldmap.budget(fmap)
    results = results_of(fmap)
    for key in ("integrated_field", "central_field", "magnetic_length", "boundary_in"):
        assert budgets[key].u == pytest.approx(results[key].u, rel=1e-12)
    causes = {one.cause for one in budgets["boundary_in"].contributions}
    assert {"lag of a pass", "shift of a pass", "factor of a pass", "step in the flux"} <= causes
    kinds = {one.cause: one.evaluation for one in budgets["integrated_field"].contributions}
    assert kinds["step in the flux"] == "A"
    assert kinds["factor of a pass"] == "B"


def test_the_map_keeps_them(fmap, mixed_map, tmp_path):
    fieldmap.save_map(fmap, tmp_path / "map.nc")
    again = fieldmap.load_map(tmp_path / "map.nc")
    made = map_corrections(again)
    assert {one.correction for one in made} == set(mixed_map.corrections)
    assert [(one.value, one.u) for one in made[:2]] == [
        (one.value, one.u) for one in map_corrections(fmap)[:2]
    ]
    notes = [one for one in map_findings(again) if one.code == "correction-switched-on"]
    assert [one.where for one in notes] == [one.name for one in mixed_map.passes]
    assert "read 0.1 ms late, u = 2 ms" in notes[0].text


def test_wide_priors_contradict_nothing(fmap):
    codes = {one.code for one in map_findings(fmap)}
    assert not codes & {"stated-value-contradicted", "correction-contradicted"}
    (trusted,) = [one.text for one in map_findings(fmap) if one.code == "taken-on-trust"]
    assert "step" not in trusted


@pytest.mark.parametrize(("off", "found"), [(3.0, False), (9.0, True)])
def test_a_correction_that_is_said_too_certain_is_contradicted(off, found):
    unknowns = [
        Nuisance("pass lag", "a.csv", 0.0, 1e-4),
        Nuisance("step", "a.csv at 1 s", 0.0, 1e-2),
    ]
    fit = SimpleNamespace(
        spline=SimpleNamespace(size=0),
        unknowns=unknowns,
        values=off * np.array([1e-4, 1e-2]),  # a step states no size that could be contradicted
        covariance=np.diag([1e-12, 1e-12]),
    )
    texts = [one.text for one in contradicted(fit)]
    assert len(texts) == found
    for text in texts:
        assert "the lag that is switched on by 0.0009 s" in text
        assert "widen that u in [[corrections]]" in text


def with_finding(fmap, entry):
    facts = {
        "code": "x",
        "severity": "warn",
        "where": "pass_01.csv",
        "text": "t",
        "correction": entry,
    }
    return fmap.assign_attrs(findings=json.dumps([facts]))


def test_a_finding_comes_back_with_its_offer(fmap):
    offer = Correction("lag", "pass_01.csv", 0.05, 1e-3)
    (found,) = map_findings(with_finding(fmap, offer.as_entry()))
    assert found == Finding("x", "warn", "pass_01.csv", "t", offer)
    assert found.as_dict()["correction"] == offer.as_entry()
    assert "--correct pass_01.csv" in found.offer


@pytest.mark.parametrize("entry", [{"kind": "lag"}, {"kind": "gain", "pass": "a"}, 3, "lag"])
def test_a_broken_offer_is_refused_in_a_sentence(fmap, entry):
    with pytest.raises(InputError, match="reduce the campaign again") as refused:
        check_map(with_finding(fmap, entry), "map.nc")
    assert "\n" not in str(refused.value)


@pytest.mark.slow
@pytest.mark.parametrize("kind", ["factor", "lag", "step"])
def test_trials_of_a_corrected_campaign_confirm_it(kind):
    given = faulty(kind, 4)
    campaign = corrected(given.faulty, [given.correction])
    found = confirm(campaign, stitched(campaign), trials=TRIALS, workers=1)
    assert not found.refusals
    for key in KEYS:
        assert 0.65 < found[key].ratio < 1.35, key
