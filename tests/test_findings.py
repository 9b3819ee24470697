"""Nothing wrong passes in silence: faults of every kind are remarked, sound campaigns are not."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors, Noise
from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate import map_findings, stitch
from fieldmap.estimate.findings import Finding, pass_findings
from fieldmap.estimate.findings.stated import departures
from fieldmap.readings import Axis, Coil, Integrator, PointReference, Stage
from tests.shop import MAIN, RECT, ROUND, STAGE, WIRE, measured, planned
from tests.solved_lines import fitted, four_passes

SHORT = TanhMagnet(0.5, length=0.1, lam=0.03 / np.pi)
LINE = Axis("z", (-0.18, 0.18), (-0.02, 0.02))
POINT = PointReference(0.0, 0.5, 1e-5)
OPEN = replace(MAIN, read_noise=None, walk_noise=None)
NOISE = {"main": Noise(200e-9, 50e-9)}
FAULTY = "pass_02.csv"


def bench(integrator=MAIN, probes=(WIRE, WIRE), references=(), seed=0, **more):
    passes = [
        *planned((-0.2, 0.2), (0.2, -0.2), probe=probes[0], integrator=integrator, rate=50.0),
        *planned((-0.2, 0.2), (0.2, -0.2), probe=probes[1], integrator=integrator, rate=50.0),
    ]
    more.setdefault("errors", Errors(noise=NOISE))
    return measured(passes, references, source=SHORT, axis=LINE, seed=seed, **more)


def remarks(campaign, spacing=0.004):
    return map_findings(stitch(campaign, knot_spacing=spacing))


def warnings(campaign):
    return [one for one in remarks(campaign) if one.severity == "warn"]


def with_fault(campaign, fault):
    passes = list(campaign.passes)
    passes[1] = fault(passes[1])
    return replace(campaign, passes=tuple(passes))


def flux_changed(change):
    """A fault that changes the flux, given as a function of it and of time."""
    return lambda one: replace(one, flux=change(one.flux.copy(), one.time))


def spike(flux, _):
    flux[250] += 1e-4
    return flux


def jump(flux, _):
    flux[250:] += 2e-5
    return flux


def stuck(flux, _):
    flux[230:300] = flux[230]
    return flux


def position_jump(one):
    position = one.position.copy()
    position[250:] += 2e-3
    return replace(one, position=position)


FAULTS = {
    "spike": flux_changed(spike),
    "jump in flux": flux_changed(jump),
    "jump in position": position_jump,
    "clipping": flux_changed(lambda flux, _: np.clip(flux, -0.03, 0.03)),
    "stuck": flux_changed(stuck),
    "reversed polarity": flux_changed(lambda flux, _: -flux),
    "power of ten": flux_changed(lambda flux, _: 10 * flux),
    "noise": flux_changed(
        lambda flux, _: flux + 3e-7 * np.random.default_rng(0).normal(size=len(flux))
    ),
    "hum": flux_changed(lambda flux, time: flux + 1e-6 * np.sin(4.4 * time)),
}


@pytest.mark.parametrize(
    "integrator", [MAIN, pytest.param(OPEN, marks=pytest.mark.slow)], ids=["stated", "open"]
)
@pytest.mark.parametrize("fault", FAULTS)
def test_a_faulty_pass_is_named(fault, integrator):
    found = warnings(with_fault(bench(integrator), FAULTS[fault]))
    assert FAULTY in {one.where for one in found}


@pytest.mark.parametrize("integrator", [MAIN, OPEN], ids=["noise stated", "noise open"])
@pytest.mark.parametrize("probe", [WIRE, RECT, ROUND], ids=lambda p: p.name)
def test_sound_campaigns_are_not_warned_of(probe, integrator):
    references = [] if probe is WIRE else [POINT]
    for seed in range(3):
        found = warnings(bench(integrator, (probe, probe), references, seed))
        assert [one.code for one in found] == []


def test_a_gain_that_disagrees_with_what_is_stated_is_remarked():
    # 1 %, fifty times the coil's uncertainty, against the wire; the wire's against a reference
    # (a coil beside one point reference tells differences only: nothing there contradicts a gain)
    coil_off = bench(probes=(WIRE, RECT), errors=Errors(gain={"coil": 0.01}, noise=NOISE))
    assert "stated-value-contradicted" in {one.code for one in warnings(coil_off)}
    wire_off = Errors(gain={"wire": 0.01}, noise=NOISE)
    found = warnings(bench(probes=(WIRE, WIRE), references=[POINT], errors=wire_off))
    assert [(one.code, one.where) for one in found] == [("stated-value-contradicted", "wire")]


def test_a_lag_that_is_not_stated_is_remarked():
    late = Errors(lag=4e-3, noise=NOISE)
    assert warnings(bench(stage=Stage(u_position=5e-6), errors=late))
    assert not warnings(bench(stage=replace(STAGE, u_lag=4e-3), errors=late))


def test_full_scale_and_voltage_and_leak():
    small = replace(MAIN, full_scale=0.04, max_voltage=0.02, leak_time=100.0)
    one = replace(bench().passes[0], integrator=small)
    found = {finding.code: finding for finding in pass_findings([one, one])}
    assert {"full-scale-exceeded", "voltage-exceeded", "leak-time-ignored"} == set(found)
    assert len(pass_findings([one, one])) == 3  # the same remark stands once
    assert "0.04 V s" in found["full-scale-exceeded"].text
    assert found["voltage-exceeded"].where == "pass_01.csv"
    assert found["leak-time-ignored"].severity == "note"
    assert pass_findings(bench().passes) == []


def test_drift_that_is_not_separated_from_the_field():
    loose, sure = replace(MAIN, u_drift=1e-4), replace(WIRE, u_active_length=0.0)

    def codes(dwell):
        passes = planned((-0.2, 0.2), probe=sure, integrator=loose, rate=50.0, dwell=dwell)
        return {one.code for one in remarks(measured(passes, source=SHORT, axis=LINE))}

    assert "drift-not-separated" in codes(0.0)
    assert "drift-not-separated" not in codes(20.0)


def test_what_is_taken_on_trust_is_named():
    (found,) = [one for one in remarks(bench()) if one.code == "taken-on-trust"]
    assert found.severity == "note"
    for words in ("gain wire", "scale", "offset"):
        assert words in found.text
    assert "lag" not in found.text.split(":")[0]  # the way back tells it
    (found,) = [one for one in remarks(bench(references=[POINT])) if one.code == "taken-on-trust"]
    assert "gain wire" not in found.text


def test_sampling_and_window_against_the_gap():
    coarse = measured(planned((-0.2, 0.2), rate=4.0), source=SHORT, axis=LINE)
    found = {one.code: one for one in remarks(coarse, 0.01)}
    assert found["sampling-too-coarse"].severity == "warn"
    assert "12.5 mm apart" in found["sampling-too-coarse"].text
    long = Coil("long", "rectangular", effective_area=0.3, window=0.05)
    smeared = measured(
        planned((-0.2, 0.2), probe=long, rate=50.0), [POINT], source=SHORT, axis=LINE
    )
    assert "window-too-long" in {one.code for one in remarks(smeared)}


def test_residuals_far_smaller_than_stated():
    timid = Integrator("main", read_noise=5e-7, walk_noise=2e-6, u_drift=1e-6)
    campaign = bench(timid, errors=Errors(noise=NOISE), stage=Stage())
    assert "residuals-too-small" in {one.code for one in remarks(campaign)}


def test_every_remark_is_one_sentence_with_a_place_or_a_number():
    campaign = with_fault(bench(), FAULTS["spike"])
    for one in remarks(campaign):
        assert "\n" not in one.text
        assert one.text.rstrip().endswith(".")
        assert any(c.isdigit() for c in one.text) or one.code == "assumed"
        assert one.as_dict() == {
            "code": one.code,
            "severity": one.severity,
            "where": one.where,
            "text": one.text,
        }
        assert isinstance(one, Finding)


def test_departures_are_unit_normals_or_nothing():
    # nothing checks a wire's size without a reference; the way back tells the lag
    off = []
    for seed in range(8):
        fit = fitted(four_passes(seed=seed))
        found = dict(zip([one.name for one in fit.unknowns], departures(fit).tolist(), strict=True))
        assert found["gain wire"] == found["scale"] == 0.0
        off += [abs(value) for name, value in found.items() if name.startswith("drift")]
    assert max(off) < 4.5
    late = fitted(four_passes(errors=Errors(lag=0.02, noise=NOISE)))
    lag = [one.kind for one in late.unknowns].index("lag")
    assert departures(late)[lag] > 8
