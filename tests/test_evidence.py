"""What a line was estimated from: it gives the estimate back."""

from __future__ import annotations

import numpy as np
import pytest

import fieldmap
from fieldmap.estimate.evidence import NOISES
from fieldmap.estimate.noise import total
from fieldmap.estimate.provenance import map_evidence, map_joint
from fieldmap.readings import PointReference
from tests.shop import RECT, ROUND, WIRE, measured, planned

POINT = [PointReference(0.0, 0.5, 1e-5)]


@pytest.fixture(scope="module", params=[WIRE, RECT, ROUND], ids=lambda probe: probe.name)
def fmap(request):
    scans = planned((-0.4, 0.1), (0.4, -0.1), (-0.2, 0.2), probe=request.param)
    return fieldmap.stitch(measured(scans, POINT))


def test_evidence_and_smoothness_give_the_covariance_back(fmap):
    evidence, joint = map_evidence(fmap), map_joint(fmap)
    squares, smooth = evidence.squares(), evidence.smoothness()
    precision = squares.matrix + smooth.rows.T @ smooth.rows
    scale = np.sqrt(np.diagonal(joint.covariance))
    product = (precision * scale) @ (joint.covariance / scale[:, None])
    assert np.abs(product - np.eye(len(scale))).max() < 1e-3


def test_evidence_and_smoothness_give_the_estimate_back(fmap):
    evidence, joint = map_evidence(fmap), map_joint(fmap)
    squares, smooth = evidence.squares(), evidence.smoothness()
    gradient = (
        squares.matrix @ joint.values
        - squares.right
        + smooth.rows.T @ (smooth.rows @ joint.values - smooth.target)
    )
    moved = joint.covariance @ gradient
    assert np.abs(moved / np.sqrt(np.diagonal(joint.covariance))).max() < 0.05  # where it settled


def test_the_sum_of_squares_is_that_of_the_residuals(fmap):
    """About one for each increment, less what the unknowns took."""
    evidence, joint = map_evidence(fmap), map_joint(fmap)
    matrix, right, constant = evidence.squares()
    left = joint.values @ matrix @ joint.values - 2 * right @ joint.values + constant
    spent = np.vdot(matrix, joint.covariance)
    count = len(evidence.target) + len(evidence.references) + len(evidence.prior)
    assert left == pytest.approx(count - spent, abs=5 * np.sqrt(2 * count))
    nothing = np.zeros_like(right)
    assert nothing @ matrix @ nothing - 2 * right @ nothing + constant == constant


def test_variances_are_those_of_dense_matrices(fmap):
    evidence, joint = map_evidence(fmap), map_joint(fmap)
    direction = joint.covariance @ np.cos(np.arange(len(joint.values)))
    recorded = evidence.recorded(direction)
    np.testing.assert_allclose(
        recorded[: evidence.size],
        direction[: evidence.size] - evidence.frame @ direction[evidence.size :],
    )
    dense = {cause: _dense(part) for cause, part in evidence.noise.items()}
    weight = np.linalg.inv(sum(dense.values()))
    sensitivity = weight @ (evidence.design @ recorded)
    found = evidence.noise_variances(direction)
    for cause in NOISES:
        whole = sensitivity @ dense[cause] @ sensitivity
        assert found[cause].sum() == pytest.approx(whole, rel=1e-6)
        assert len(found[cause]) == 3
        assert np.all(found[cause] >= -1e-12 * found[cause].max())


def test_passes_are_not_correlated_with_each_other(fmap):
    evidence = map_evidence(fmap)
    last = np.flatnonzero(np.diff(evidence.owner))
    assert len(last) == 2
    assert not total(evidence.noise).off[last].any()


def _dense(part):
    return np.diag(part.diagonal) + np.diag(part.off, 1) + np.diag(part.off, -1)
