"""What a map tells of how it came about."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.estimate.provenance import (
    line_reference_numbers,
    map_evidence,
    map_integrators,
    map_joint,
    map_probes,
    map_references,
    map_stage,
    map_unknowns,
    reference_fits,
)
from fieldmap.readings import FlipReference, PointReference, ZeroReference
from tests.shop import MAIN, RECT, ROUND, STAGE, WIRE, measured, planned

REFERENCES = [
    FlipReference(ROUND, 0.0, 0.3, 2e-6),
    ZeroReference(0.38, 0.4, 5e-6),
    PointReference(0.0, 0.5, 1e-5),
]


@pytest.fixture(scope="module")
def fmap():
    scans = planned((-0.4, 0.4), probe=WIRE) + planned((0.4, -0.4), probe=RECT)
    return fieldmap.stitch(measured(scans, REFERENCES))


def test_probes_integrators_stage_and_references(fmap):
    assert map_probes(fmap) == [WIRE, RECT, ROUND]
    assert map_integrators(fmap) == [MAIN]
    assert map_stage(fmap) == STAGE
    flip, zero, point = map_references(fmap)
    assert (flip["kind"], flip["probe"], flip["flux_change"]) == ("flip", "round", 0.3)
    assert (zero["kind"], zero["start"], zero["stop"]) == ("zero", 0.38, 0.4)
    assert (point["kind"], point["at"], point["field"], point["u"]) == ("point", 0.0, 0.5, 1e-5)
    assert line_reference_numbers(fmap) == [1, 2, 3]


def test_unknowns_and_their_joint_estimate(fmap):
    unknowns = map_unknowns(fmap)
    assert [one.kind for one in unknowns] == [
        *["drift"] * 2,
        *["gain"] * 3,
        "scale",
        "offset",
        "lag",
    ]
    assert unknowns[5].sd == STAGE.u_scale
    joint = map_joint(fmap)
    assert joint.values.shape == (int(fmap["knots"].values[0, 0, 2]) + len(unknowns),)
    np.testing.assert_allclose(joint.covariance, joint.covariance.T, rtol=1e-6, atol=1e-17)
    assert np.sqrt(joint.covariance[-2, -2]) == pytest.approx(1.0, rel=1e-3)  # nobody tells offset


def test_evidence_survives_the_file(fmap, tmp_path):
    fieldmap.save_map(fmap, tmp_path / "map.nc")
    kept, back = map_evidence(fmap), map_evidence(fieldmap.load_map(tmp_path / "map.nc"))
    assert (kept.design != back.design).nnz == 0
    for name in ("target", "owner", "references", "reference_target", "prior", "frame"):
        np.testing.assert_array_equal(getattr(kept, name), getattr(back, name))
    for cause, part in kept.noise.items():
        np.testing.assert_array_equal(part.diagonal, back.noise[cause].diagonal)
        np.testing.assert_array_equal(part.off, back.noise[cause].off)


def test_lines_keep_their_evidence_apart():
    one = measured(planned((-0.4, 0.4), (0.4, -0.4), probe=WIRE))
    longer = measured(planned((-0.45, 0.4), (0.4, -0.4), (-0.4, 0.4), probe=WIRE), seed=1)
    beside = tuple(replace(p, x=0.02, name=f"x_{p.name}") for p in longer.passes)
    alone = [fieldmap.stitch(one), fieldmap.stitch(replace(longer, passes=beside))]
    both = fieldmap.stitch(replace(one, passes=one.passes + beside))
    for line, single in enumerate(alone):
        np.testing.assert_array_equal(map_evidence(both, line).target, map_evidence(single).target)
        np.testing.assert_array_equal(
            map_evidence(both, line).design.toarray(), map_evidence(single).design.toarray()
        )
        assert set(map_evidence(both, line).owner) == set(range(2 + line))


def test_a_map_without_evidence_is_one_sentence(fmap):
    with pytest.raises(fieldmap.InputError, match="reduce the campaign again"):
        map_evidence(fmap.drop_vars("design"))


def test_fits_of_references_on_their_lines(fmap):
    """A point: the field there. A stretch of no field: its mean there; both by the profile."""
    flip, zero, point = reference_fits(fmap)
    assert [fit.number for fit in (flip, zero, point)] == [1, 2, 3]
    (line,) = fieldmap.estimate.map_lines(fmap)
    mean = line.integral(0.38, 0.4)[0] / 0.02
    assert zero.difference == pytest.approx(mean / 5e-6, abs=0.05)
    at_point = (line.field(np.array([0.0]))[0] - 0.5) / 1e-5
    assert point.difference == pytest.approx(at_point, abs=0.05)
    # the flipped coil was used nowhere else, so its area takes up what would be left
    assert abs(flip.difference) < 0.01
    assert flip.told < 0.02
    assert all(0 <= fit.told <= 1 + 1e-9 for fit in (flip, zero, point))
