"""The smoothness prior: its one weight against dense restricted likelihood, its local steps."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.model import Information
from fieldmap.estimate.normal import NormalSystem
from fieldmap.estimate.smoothing import FLOOR, Smoother
from fieldmap.estimate.spline import UniformSpline

SPLINE = UniformSpline(0.0, 0.01, 40)
D = SPLINE.roughness().toarray()


def smoother(reach=3, extra=0):
    return Smoother(SPLINE.roughness(), SPLINE.size + extra, reach)


def field_readings(b, sigma, rng, count=90, extra=0):
    """Independent readings of the field: design, values, and their information."""
    s = rng.uniform(SPLINE.start, SPLINE.stop, count)
    X = np.pad(SPLINE.field_rows(s), ((0, 0), (0, extra)))
    y = X[:, : SPLINE.size] @ b + rng.normal(size=count) * sigma
    return X, y, Information(X.T @ X / sigma**2, X.T @ y / sigma**2)


def test_precision_is_the_weighted_square_of_the_differences():
    one = smoother(extra=2)
    one.variance = np.linspace(1.0, 3.0, len(D))
    expected = np.zeros((SPLINE.size + 2, SPLINE.size + 2))
    expected[: SPLINE.size, : SPLINE.size] = D.T @ np.diag(1 / one.variance) @ D
    np.testing.assert_allclose(one.precision(), expected, rtol=1e-14, atol=1e-13)


@pytest.mark.parametrize("tau", [3e-3, 0.1, 3.0])
def test_one_weight_maximises_the_restricted_likelihood(tau):
    rng = np.random.default_rng(11)
    b = np.cumsum(np.cumsum(np.cumsum(rng.normal(size=SPLINE.size) * tau)))
    sigma = 0.5
    X, y, information = field_readings(b, sigma, rng)
    one = smoother()
    one.start(information)
    found = np.log(one.variance[0])
    assert np.ptp(one.variance) == 0

    # independent of the normal equations: b = parabola + effects of the differences, and the
    # likelihood of all contrasts that are free of the parabola
    places = np.arange(SPLINE.size) / SPLINE.size
    fixed = X @ np.vander(places, 3)
    contrasts = np.linalg.svd(fixed.T)[2][3:]
    effects = contrasts @ X @ np.linalg.pinv(D)

    def likelihood(log_variance):
        C = np.exp(log_variance) * effects @ effects.T + sigma**2 * np.eye(len(contrasts))
        z = contrasts @ y
        return -0.5 * (np.linalg.slogdet(C)[1] + z @ np.linalg.solve(C, z))

    around = np.linspace(found - 4, found + 4, 161)
    best = around[np.argmax([likelihood(v) for v in around])]
    assert found == pytest.approx(best, abs=0.15)


def test_one_weight_recovers_the_size_of_the_differences():
    rng = np.random.default_rng(2)
    found = []
    for _ in range(20):
        b = np.cumsum(np.cumsum(np.cumsum(rng.normal(size=SPLINE.size) * 0.7)))
        _, _, information = field_readings(b, 0.5, rng)
        one = smoother()
        one.start(information)
        found.append(one.variance[0])
    assert np.exp(np.mean(np.log(found))) == pytest.approx(0.49, rel=0.2)


def adapted(one, b, covariance, steps=200):
    for _ in range(steps):
        one.adapt(b, covariance)
    return one.variance


def test_known_differences_get_the_local_mean_of_their_squares():
    rng = np.random.default_rng(6)
    d = rng.normal(size=len(D)) * np.where(np.arange(len(D)) < 18, 1.0, 10.0)
    b = np.linalg.pinv(D) @ d
    one = smoother(reach=3)
    got = adapted(one, b, np.zeros((SPLINE.size, SPLINE.size)), 400)
    # the fixed point of v: sum of k (d²/v) + 1 = sum of k + 1 within reach
    kernel = np.array([1, 2, 3, 4, 3, 2, 1]) / 4
    square = np.convolve(d**2 / got, kernel, "same")
    freedom = np.convolve(np.ones(len(d)), kernel, "same")
    np.testing.assert_allclose(square, freedom, rtol=0.05)
    assert np.median(got[22:]) > 20 * np.median(got[:14])


def test_what_the_data_do_not_resolve_stays():
    one = smoother()
    one.variance = np.linspace(1.0, 2.0, len(D))
    prior_only = np.linalg.pinv(D.T @ np.diag(1 / one.variance) @ D)
    got = adapted(one, np.zeros(SPLINE.size), prior_only, 1)
    np.testing.assert_allclose(got, np.linspace(1.0, 2.0, len(D)), rtol=1e-6)


def test_no_variance_falls_below_its_floor():
    b = np.zeros(SPLINE.size)
    b[0] = 1.0  # one strong difference at one end, nothing elsewhere
    one = smoother(reach=1)
    got = adapted(one, b, np.zeros((SPLINE.size, SPLINE.size)), 60)
    assert got.min() == pytest.approx(FLOOR * got.max())
    assert np.all(np.isfinite(got))


def test_reach_is_cut_to_the_line():
    one = Smoother(UniformSpline(0, 1, 6).roughness(), 6, reach=50)
    one.adapt(np.arange(6.0) ** 3, np.zeros((6, 6)))
    assert one.variance.shape == (3,)


def test_local_weights_let_a_flat_stretch_be_flat_beside_a_step():
    rng = np.random.default_rng(9)
    edge = np.tanh((np.arange(SPLINE.size) - 20) / 1.5)
    sigma = 0.02
    _, _, information = field_readings(edge, sigma, rng, count=400)
    one = smoother(reach=4)
    one.start(information)
    single = NormalSystem(information.matrix + one.precision()).solve(information.right)
    for _ in range(10):
        system = NormalSystem(information.matrix + one.precision())
        one.adapt(system.solve(information.right), system.inverse())
    local = NormalSystem(information.matrix + one.precision()).solve(information.right)
    flat = slice(1, 12)

    def rms(b):
        return np.sqrt(np.mean((b - edge)[flat] ** 2))

    assert rms(local) < 0.75 * rms(single)
