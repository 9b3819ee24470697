"""Noise levels left open: gradient of the restricted likelihood, and levels found again."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors, Noise
from fieldmap.estimate.fit import fit_line
from fieldmap.estimate.frame import Frame
from fieldmap.estimate.knots import knots_for
from fieldmap.estimate.model import PassModel, State, pass_information
from fieldmap.estimate.noise import total
from fieldmap.estimate.normal import NormalSystem
from fieldmap.estimate.spline import UniformSpline
from fieldmap.estimate.variance import Fitted, NoiseLevel, _part, _score, initial_level
from fieldmap.readings import Integrator, Pass, Stage
from tests.shop import MAIN, WIRE, measured, planned

OPEN = replace(MAIN, read_noise=None, walk_noise=None, u_drift=0.0, resolution=0.0)
TRUE = Noise(walk=200e-9, read=50e-9)


def small_problem():
    """One pass on few knots with a fixed smoothness prior: everything can be done densely."""
    rng = np.random.default_rng(3)
    n = 600
    spline = UniformSpline.covering(-0.11, 0.11, 0.01)
    position = np.linspace(-0.1, 0.1, n)
    time = np.arange(n) / 50
    walk = np.cumsum(rng.normal(size=n)) * 2e-7 / np.sqrt(50)
    flux = 0.5 * np.tanh(position / 0.03) + walk + rng.normal(size=n) * 5e-8
    one = Pass("p", replace(WIRE, width=0.0), OPEN, time, position, flux)
    model = PassModel(one, spline)
    D = spline.roughness().toarray()
    prior = D.T @ D / 0.02**2 + 1e-3 * np.eye(spline.size)
    return model, State(np.zeros(spline.size), np.zeros(0), []), prior


def restricted(model, state, prior, walk, read):
    """Restricted log-likelihood with b ~ N(0, prior⁻¹), by orthogonal factors of dense matrices."""
    rows = model.rows(state, Frame(0.0, 0.0))
    noise = total(model.noise(state, walk, read, 0.0))
    C = np.diag(noise.diagonal) + np.diag(noise.off, 1) + np.diag(noise.off, -1)
    root = np.linalg.cholesky(C)
    design = np.linalg.solve(root, rows.design.toarray())
    target = np.linalg.solve(root, rows.target)
    stacked = np.vstack([design, np.linalg.cholesky(prior).T])
    goal = np.append(target, np.zeros(len(prior)))
    Q, R = np.linalg.qr(stacked)
    rest = goal - Q @ (Q.T @ goal)
    return (
        -np.log(np.diag(root)).sum() - np.log(np.abs(np.diag(R))).sum() - 0.5 * float(rest @ rest)
    )


@pytest.mark.parametrize(("walk", "read"), [(2e-7, 5e-8), (1e-7, 3e-7), (1e-6, 2e-8)])
def test_score_is_the_derivative_of_the_restricted_likelihood(walk, read):
    model, state, prior = small_problem()
    rows, noise = model.rows(state, Frame(0.0, 0.0)), total(model.noise(state, walk, read, 0.0))
    data = pass_information(rows, noise)
    system = NormalSystem(data.matrix + prior)
    residual = rows.target - rows.design @ system.solve(data.right)
    parts = [_part(model, "walk", walk), _part(model, "read", read)]
    score, curvature = _score(Fitted(model, rows, noise, residual), parts, system.inverse())
    step = 1e-3
    for k, (dw, dr) in enumerate([(1, 0), (0, 1)]):
        ends = [
            restricted(model, state, prior, walk * np.exp(h * dw / 2), read * np.exp(h * dr / 2))
            for h in (step, -step)
        ]
        slope = (ends[0] - ends[1]) / (2 * step)
        assert score[k] == pytest.approx(slope, rel=1e-3, abs=1e-3)
    assert np.all(np.linalg.eigvalsh(curvature) > 0)


def test_stated_levels_are_taken_as_they_are():
    campaign = measured(planned((-0.4, 0.4)))
    models = [PassModel(one, UniformSpline.covering(-0.41, 0.41, 0.01)) for one in campaign.passes]
    level = initial_level(models)
    assert (level.walk_known, level.read_known, level.open) == (True, True, False)
    assert level.walk == MAIN.walk_noise
    # beside the resolution, a least noise of a part in 1e9 of the flux
    assert level.read == pytest.approx(np.hypot(50e-9, 1e-9 / np.sqrt(12)), rel=0.01)


def test_samples_of_a_voltage_have_walk_noise_only():
    stated = replace(MAIN, walk_noise=None)
    campaign = measured(
        planned((-0.4, 0.4), integrator=stated, record="voltage"),
        errors=Errors(noise={"main": TRUE}),
    )
    model = PassModel(campaign.passes[0], UniformSpline.covering(-0.41, 0.41, 0.01))
    level = initial_level([model])
    assert level.read_known
    assert level.read < 1e-9
    assert not level.walk_known


def found_levels(integrator, true=TRUE, count=12, record="cumulative", spacing=0.003):
    levels: list[NoiseLevel] = []
    for seed in range(count):
        campaign = measured(
            planned((-0.4, 0.4), (0.4, -0.4), integrator=integrator, rate=100.0, record=record),
            seed=seed,
            stage=Stage(),
            errors=Errors(noise={"main": true}),
        )
        knots = knots_for(campaign.passes, -0.4, 0.4, spacing)
        fit = fit_line(campaign.passes, [], Stage(), knots, 0.03)
        levels.append(fit.passes[0].level)
    return levels


@pytest.mark.slow
def test_both_levels_are_found_again():
    levels = found_levels(OPEN, spacing=0.002)
    walk = np.array([one.walk for one in levels]) / TRUE.walk
    read = np.array([one.read for one in levels]) / TRUE.read
    # each fit knows its levels to a few per cent; their mean over 12 fits to three times less
    assert walk.mean() == pytest.approx(1.0, abs=0.04)
    assert read.mean() == pytest.approx(1.0, abs=0.04)
    assert walk.std() < 0.1
    assert read.std() < 0.1


@pytest.mark.parametrize("known", ["walk_noise", "read_noise"])
def test_one_level_is_found_beside_a_stated_one(known):
    integrator = replace(OPEN, **{known: getattr(MAIN, known)})
    levels = found_levels(integrator, count=2)
    name = "read" if known == "walk_noise" else "walk"
    for one in levels:
        assert getattr(one, name) == pytest.approx(getattr(TRUE, name), rel=0.15)
        other = "walk" if name == "read" else "read"
        assert getattr(one, other) == pytest.approx(getattr(TRUE, other), rel=0.01)


def test_walk_of_voltage_samples_is_found():
    (level,) = found_levels(Integrator("main", u_drift=0.0), count=1, record="voltage")
    assert level.walk == pytest.approx(TRUE.walk, rel=0.1)


def test_a_level_that_is_not_there_fades_out():
    (level,) = found_levels(OPEN, Noise(walk=0.0, read=50e-9), count=1)
    assert level.read == pytest.approx(50e-9, rel=0.1)
    assert level.walk < 40e-9
