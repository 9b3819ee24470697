"""The budget: it sums to the quoted uncertainty, and each line is what the bench would do."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.bench.bench_errors import Errors, Noise
from fieldmap.estimate.fit import fit_line
from fieldmap.estimate.knots import grain, knots_for
from fieldmap.estimate.map import map_lines
from fieldmap.estimate.provenance import map_evidence, map_joint
from fieldmap.magnet.budget import Budget, Contribution, budget
from fieldmap.magnet.length import length_results
from fieldmap.readings import PointReference, ZeroReference
from tests.shop import AXIS, MAIN, RECT, ROUND, STAGE, WIRE, measured, planned

LOOSE = replace(RECT, u_window=5e-5, u_tilt=5e-3, temperature_coefficient=2e-5, u_temperature=0.5)


def campaign(*, integrator=MAIN, probe=LOOSE, references=None):
    wires = planned((-0.4, 0.4), (0.4, -0.4), probe=WIRE, integrator=integrator)
    coils = planned((-0.4, 0.4), probe=probe, integrator=integrator)
    stage = replace(STAGE, u_backlash=1e-5)
    point = [PointReference(0.0, 0.5, 1e-5)]
    return measured(wires + coils, point if references is None else references, stage=stage)


@pytest.fixture(scope="module")
def fmap():
    return fieldmap.stitch(campaign())


def test_every_budget_sums_to_the_quoted_uncertainty(fmap):
    found, results = budget(fmap), fieldmap.evaluate(fmap)
    quantities = results.lines[0].results
    assert set(found.results) == set(quantities)
    for key, one in found.results.items():
        assert one.u == pytest.approx(quantities[key].u, rel=1e-12), key
        assert sum(one.share(c) for c in one.contributions) == pytest.approx(1.0, rel=1e-12)
        assert (one.value, one.unit) == (quantities[key].value, quantities[key].unit)


def test_what_is_left_over_is_the_smoothness_itself(fmap):
    """The smoothness prior's own share, computed from its rows, is what the others leave."""
    evidence, joint = map_evidence(fmap), map_joint(fmap)
    found = budget(fmap)
    roughness = np.asarray(evidence.smoothness().rows)
    for key, row in _rows(fmap).items():
        direction = joint.covariance[:, : len(row)] @ row
        own = float(np.sum((roughness @ direction) ** 2))
        told = sum(c.u**2 for c in found[key].contributions if c.cause.startswith("smoothness"))
        assert told == pytest.approx(own, abs=1e-7 * found[key].u ** 2), key


def _rows(fmap):
    return {key: one.gradient for key, one in length_results(map_lines(fmap)[0], AXIS).items()}


def test_causes_and_their_kinds(fmap):
    causes = {(c.cause, c.evaluation) for c in budget(fmap)["magnetic_length"].contributions}
    expected = {
        "integrator walk",
        "read noise",
        "position jitter",
        "integrator drift",
        "active length",
        "effective area",
        "coil window",
        "probe tilt",
        "probe temperature",
        "position scale",
        "position offset",
        "trigger lag",
        "backlash",
        "point reference",
    }
    assert {cause for cause, kind in causes if kind == "B"} == expected
    assert ("smoothness of the profile", "A") in causes


def test_estimated_noise_is_type_a():
    open_noise = replace(MAIN, read_noise=None, walk_noise=None, u_drift=None)
    errors = Errors(noise={"main": Noise(2e-7, 5e-8)})
    scan = measured(
        planned((-0.4, 0.4), (0.4, -0.4), probe=WIRE, integrator=open_noise), errors=errors
    )
    kinds = {
        c.cause: c.evaluation for c in budget(fieldmap.stitch(scan))["central_field"].by_cause()
    }
    assert kinds["integrator walk"] == "A"
    assert kinds["position jitter"] == "B"
    assert kinds["active length"] == "B"


def test_offset_alone_moves_the_boundaries(fmap):
    found = budget(fmap)
    (offset,) = [c for c in found["boundary_in"].contributions if c.cause == "position offset"]
    assert offset.u == pytest.approx(STAGE.u_offset, rel=1e-3)
    (offset,) = [c for c in found["magnetic_length"].contributions if c.cause == "position offset"]
    assert offset.u < 1e-3 * STAGE.u_offset


def test_one_gain_cancels_in_the_length():
    """A wire alone, field known to vanish at both ends: its length is no matter for L."""
    ends = [ZeroReference(-0.4, -0.38, 1e-7), ZeroReference(0.38, 0.4, 1e-7)]
    scan = measured(planned((-0.4, 0.4), (0.4, -0.4), probe=WIRE), ends)
    found = budget(fieldmap.stitch(scan))
    relative = WIRE.u_active_length / WIRE.active_length
    (field,) = [c for c in found["central_field"].contributions if c.cause == "active length"]
    assert field.u == pytest.approx(0.5 * relative, rel=1e-3)
    length = [c for c in found["magnetic_length"].contributions if c.cause == "active length"]
    assert sum(c.u for c in length) < 1e-3 * relative * 0.3


@pytest.mark.parametrize(
    ("cause", "change"),
    [
        ("point reference", lambda c: replace(c, references=(PointReference(0.0, 0.5001, 1e-5),))),
        ("effective area", lambda c: _probe(c, "coil", effective_area=0.3 * (1 + 1e-4))),
        ("active length", lambda c: _probe(c, "wire", active_length=0.05 * (1 + 1e-4))),
        ("coil window", lambda c: _probe(c, "coil", window=0.01 * (1 + 1e-3))),
    ],
)
def test_a_contribution_is_what_an_error_of_one_u_does(cause, change):
    """Move one stated value and solve again with the same smoothness: the result moves by u·c."""
    before, stated = campaign(), {"point reference": 1e-5, "effective area": 6e-5 / 0.3}
    stated |= {"active length": 2e-5 / 0.05, "coil window": 5e-5 / 0.01}
    step = {"point reference": 1e-4, "coil window": 1e-3}.get(cause, 1e-4)
    spline = knots_for(before.passes, -0.4, 0.4, 0.003)
    fits = [_refit(one, spline) for one in (before, change(before))]
    fmap = fieldmap.stitch(before, knot_spacing=0.003)
    found = budget(fmap)
    for key, row in _rows(fmap).items():
        moved = float(row @ (fits[1] - fits[0])) / step * stated[cause]
        (told,) = [c.u for c in found[key].contributions if c.cause == cause] or [0.0]
        assert told == pytest.approx(abs(moved), rel=0.05, abs=0.03 * found[key].u), key


def _probe(scan, name, **changes):
    def changed(one):
        if one.probe.name != name:
            return one
        return replace(one, probe=replace(one.probe, **changes))

    return replace(scan, passes=tuple(changed(one) for one in scan.passes))


def _refit(scan, spline):
    fit = fit_line(scan.passes, scan.references, scan.stage, spline, grain(0.03, -0.4, 0.4))
    return fit.values[: spline.size]


def test_correlation_of_the_results(fmap):
    found = budget(fmap)
    names = list(found.results)
    assert np.diagonal(found.correlation) == pytest.approx(1.0)
    assert found.correlation == pytest.approx(found.correlation.T)
    both = found.correlation[names.index("boundary_in"), names.index("boundary_out")]
    assert both > 0.9  # they share the offset


def test_contributions_of_one_cause_together():
    parts = (
        Contribution("integrator walk", "a.csv", "A", 3.0),
        Contribution("integrator walk", "b.csv", "A", 4.0),
        Contribution("integrator walk", "c.csv", "B", 2.0),
        Contribution("position scale", "", "B", 6.0),
    )
    together = Budget("magnetic_length", 1.0, "m", parts).by_cause()
    assert [(c.cause, c.where, c.evaluation, c.u) for c in together] == [
        ("position scale", "", "B", 6.0),
        ("integrator walk", "a.csv and b.csv", "A", 5.0),
        ("integrator walk", "c.csv", "B", 2.0),
    ]


def test_the_budget_of_a_loaded_map_is_the_same(fmap, tmp_path):
    fieldmap.save_map(fmap, tmp_path / "map.nc")
    again = budget(fieldmap.load_map(tmp_path / "map.nc"))
    for key, one in budget(fmap).results.items():
        assert again[key].contributions == one.contributions


def test_round_coils_and_lines():
    both = campaign(probe=replace(ROUND, u_window=5e-5))
    shifted = tuple(replace(one, x=0.01, name=f"x_{one.name}") for one in both.passes)
    point = (PointReference(0.0, 0.5, 1e-5, 0.0, 0.0), PointReference(0.0, 0.5, 2e-5, 0.01, 0.0))
    two = fieldmap.stitch(replace(both, passes=both.passes + shifted, references=point))
    results = fieldmap.evaluate(two)
    for line in (0, 1):
        for key, one in budget(two, line=line).results.items():
            assert one.u == pytest.approx(results.lines[line].results[key].u, rel=1e-12)
    names = {c.where for c in budget(two, line=1)["central_field"].contributions}
    assert "[[references]] 2" in names
    assert "x_pass_01.csv" in names
    assert "pass_01.csv" not in names
