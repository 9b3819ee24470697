"""Drawn errors have the spread that the campaign states."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.bench_errors import Errors, Noise, draw_errors, noise_of
from fieldmap.errors import InputError
from fieldmap.readings import (
    Axis,
    Campaign,
    Coil,
    FlipReference,
    Integrator,
    Magnet,
    PlannedPass,
    Stage,
    Wire,
)

WIRE = Wire("wire", turns=20, active_length=0.05, u_active_length=5e-5)
COIL = Coil("coil", "round", effective_area=0.3, u_effective_area=6e-5, window=0.01)
MAIN = Integrator("main", read_noise=5e-8, walk_noise=1e-7, drift=2e-6, u_drift=1e-6)
OUT = PlannedPass("out", WIRE, MAIN, -0.3, 0.3, speed=0.05, rate=50.0)
PLAN = Campaign(
    name="trial",
    magnet=Magnet("dipole", "By", gap=0.03),
    axis=Axis("z", (-0.3, 0.3), (-0.05, 0.05)),
    stage=Stage(u_scale=1e-5, u_offset=1e-4, u_lag=1e-3, u_backlash=1e-5, u_position=1e-6),
    planned=(OUT, replace(OUT, name="back")),
    references=(FlipReference(COIL, 0.0, 0.3, 1e-6),),
)


def test_spread_is_as_stated():
    rng = np.random.default_rng(1)
    drawn = [draw_errors(PLAN, rng) for _ in range(4000)]
    stated = {"scale": 1e-5, "offset": 1e-4, "lag": 1e-3, "backlash": 1e-5}
    for name, u in stated.items():
        values = [getattr(errors, name) for errors in drawn]
        assert np.std(values) == pytest.approx(u, rel=0.04)
        assert abs(np.mean(values)) < 0.06 * u
    for probe, u in (("wire", 1e-3), ("coil", 2e-4)):
        assert np.std([errors.gain[probe] for errors in drawn]) == pytest.approx(u, rel=0.04)
    drifts = np.array([errors.drift for errors in drawn])
    assert drifts.shape == (4000, 2)
    assert drifts.std() == pytest.approx(1e-6, rel=0.03)
    assert drifts.mean() == pytest.approx(2e-6, rel=0.02)
    assert abs(np.corrcoef(drifts.T)[0, 1]) < 0.05


def test_what_is_certain_has_no_error():
    rng = np.random.default_rng(1)
    certain = replace(MAIN, u_drift=None)
    sure = replace(PLAN, stage=Stage(), planned=(replace(OUT, integrator=certain),))
    errors = draw_errors(sure, rng)
    assert errors.drift == (2e-6,)
    assert (errors.scale, errors.offset, errors.lag, errors.backlash) == (0.0, 0.0, 0.0, 0.0)


def test_the_same_seed_draws_the_same():
    first, again = (draw_errors(PLAN, np.random.default_rng(7)) for _ in range(2))
    assert first == again


def test_noise_given_goes_before_noise_stated():
    assert noise_of(OUT, Errors()) == Noise(walk=1e-7, read=5e-8)
    assert noise_of(OUT, Errors(noise={"main": Noise(1.0, 2.0)})) == Noise(1.0, 2.0)
    assert noise_of(OUT, Errors(noise={"other": Noise(1.0, 2.0)})) == Noise(1e-7, 5e-8)


def test_noise_unknown_is_refused_and_the_remedy_named():
    silent = replace(OUT, integrator=replace(MAIN, read_noise=None))
    with pytest.raises(InputError, match=r"give the errors noise=\{'main': Noise\(walk, read\)\}"):
        noise_of(silent, Errors())
    assert noise_of(replace(silent, record="voltage"), Errors()) == Noise(1e-7, 0.0)
    with pytest.raises(InputError, match="no walk_noise"):
        noise_of(replace(OUT, integrator=replace(MAIN, walk_noise=None)), Errors())
