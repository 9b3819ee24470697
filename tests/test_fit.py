"""The joint estimate of one line: residuals, nuisances found, other knots, rebinning."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors
from fieldmap.estimate.fit import fit_line
from fieldmap.estimate.knots import knots_for
from fieldmap.readings import PointReference
from tests.shop import DIPOLE, MAIN, RECT, ROUND, STAGE, WIRE, measured, out_and_back, planned

POINT = PointReference(0.0, 0.5, 1e-5)


def fitted(campaign, spacing=0.004, **more):
    knots = knots_for(campaign.passes, -0.4, 0.4, spacing)
    return fit_line(campaign.passes, campaign.references, campaign.stage, knots, 0.03, **more)


def posterior(fit, kind, where=""):
    """Value and standard uncertainty of one nuisance."""
    names = [(one.kind, one.where) for one in fit.unknowns]
    index = fit.spline.size + names.index((kind, where))
    return fit.values[index], np.sqrt(fit.covariance[index, index])


@pytest.fixture(scope="module")
def wires():
    return measured(out_and_back(), [POINT], seed=1)


@pytest.fixture(scope="module")
def wires_fitted(wires):
    return fitted(wires)


@pytest.mark.parametrize("probe", [WIRE, RECT, ROUND], ids=lambda p: p.name)
def test_residuals_are_white(probe):
    fit = fitted(measured(out_and_back(probe), [POINT], seed=2))
    for one in fit.passes:
        count = len(one.residual)
        assert one.position.shape == (count,)
        assert one.freedom < count
        square = float(one.residual @ one.residual)
        assert abs(square / one.freedom - 1) < 4 * np.sqrt(2 / one.freedom)
        neighbours = float(one.residual[1:] @ one.residual[:-1]) / square
        assert abs(neighbours) < 5 / np.sqrt(count)


def test_freedom_adds_up(wires_fitted):
    # what passes, reference and priors determine together is the number of unknowns at most
    spent = sum(len(one.residual) - one.freedom for one in wires_fitted.passes)
    assert 0 < spent < len(wires_fitted.values)


def test_covariance_is_symmetric_and_positive(wires_fitted):
    covariance = wires_fitted.covariance
    scale = np.sqrt(np.diagonal(covariance))
    np.testing.assert_allclose(
        covariance / np.outer(scale, scale), (covariance / np.outer(scale, scale)).T, atol=1e-12
    )
    assert np.linalg.eigvalsh(covariance / np.outer(scale, scale)).min() > -1e-10


def test_field_agrees_with_the_truth(wires_fitted):
    z = np.linspace(-0.38, 0.38, 191)
    rows = wires_fitted.spline.field_rows(z)
    size = wires_fitted.spline.size
    u = np.sqrt(np.einsum("ij,jk,ik->i", rows, wires_fitted.covariance[:size, :size], rows))
    off = (rows @ wires_fitted.values[:size] - DIPOLE.field(z)) / u
    assert np.sqrt(np.mean(off**2)) < 1.6
    assert np.abs(off).max() < 6


def test_a_lag_is_found_by_going_back():
    errors = Errors(lag=1.5e-3)
    fit = fitted(measured(out_and_back(), [POINT], errors=errors, seed=3))
    value, u = posterior(fit, "lag")
    assert u < 0.2 * STAGE.u_lag
    assert abs(value - 1.5e-3) < 4 * u


def test_one_way_cannot_tell_a_lag_from_an_offset():
    campaign = measured(planned((-0.4, 0.4)), errors=Errors(lag=1.5e-3), seed=3)
    value, u = posterior(fitted(campaign), "lag")
    assert u == pytest.approx(STAGE.u_lag, rel=0.1)
    assert abs(value) < 0.3 * u


def test_drifts_are_found_where_the_probe_dwells():
    campaign = measured(
        out_and_back(dwell=10.0), [POINT], errors=Errors(drift=(9e-7, -4e-7)), seed=4
    )
    fit = fitted(campaign)
    for name, true in (("pass_01.csv", 9e-7), ("pass_02.csv", -4e-7)):
        value, u = posterior(fit, "drift", name)
        assert u < 0.3 * MAIN.u_drift
        assert abs(value - true) < 4 * u


def test_the_ratio_of_two_gains_is_found():
    errors = Errors(gain={"wire": 4e-4, "coil": -2e-4})
    passes = [*out_and_back(), *out_and_back(RECT)]
    fit = fitted(measured(passes, [POINT], errors=errors, seed=5))
    wire, coil = posterior(fit, "gain", "wire"), posterior(fit, "gain", "coil")
    assert abs(wire[0] - 4e-4) < 4 * wire[1]
    assert abs(coil[0] + 2e-4) < 4 * coil[1]
    assert max(wire[1], coil[1]) < 0.15 * WIRE.u_gain
    assert abs((wire[0] - coil[0]) - 6e-4) < 4e-5


def test_a_large_lag_is_followed_by_moving_the_readings():
    stage = replace(STAGE, u_lag=0.03)
    campaign = measured(out_and_back(), [POINT], stage=stage, errors=Errors(lag=0.04), seed=6)
    fit = fitted(campaign)
    value, u = posterior(fit, "lag")
    assert abs(value - 0.04) < 5 * u + 1e-4
    for one in fit.passes:
        assert float(one.residual @ one.residual) < 1.3 * one.freedom


def test_a_fit_on_other_knots_may_start_from_an_earlier_one(wires, wires_fitted):
    fresh = fitted(wires, 0.002)
    knots = knots_for(wires.passes, -0.4, 0.4, 0.002)
    resumed = fit_line(wires.passes, wires.references, wires.stage, knots, 0.03, like=wires_fitted)
    row = knots.integral_row(-0.4, 0.4)
    level = knots.integral_row(-0.05, 0.05) / 0.1
    size = knots.size
    for weights in (row, level):
        u = np.sqrt(weights @ fresh.covariance[:size, :size] @ weights)
        assert abs(weights @ (fresh.values - resumed.values)[:size]) < 0.25 * u
        resumed_u = np.sqrt(weights @ resumed.covariance[:size, :size] @ weights)
        assert resumed_u == pytest.approx(u, rel=0.15)


def test_smoothness_carries_over_to_other_knots(wires_fitted):
    own = wires_fitted.spline
    np.testing.assert_allclose(wires_fitted.roughness_for(own), wires_fitted.roughness, rtol=1e-9)
    finer = type(own).covering(own.start, own.stop, own.spacing / 2)
    ratio = wires_fitted.roughness_for(finer).max() / wires_fitted.roughness.max()
    assert ratio == pytest.approx(2.0**-5, rel=0.3)
    b = wires_fitted.coefficients_for(finer)
    z = np.linspace(-0.38, 0.38, 77)
    before = own.field_rows(z) @ wires_fitted.values[: own.size]
    np.testing.assert_allclose(finer.field_rows(z) @ b, before, atol=5e-3)


def test_tells_of_every_round(wires):
    told = []
    fitted(wires, 0.01, tell=told.append)
    assert len(told) >= 2


def test_what_is_not_determined_is_an_error():
    campaign = measured(out_and_back(RECT), seed=1)  # coil passes, no level
    with pytest.raises(np.linalg.LinAlgError):
        fitted(campaign)
