"""The unknowns beside the field: which there are, in which order, with which priors."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.parameters import Nuisance, nuisances
from fieldmap.readings import Coil, Integrator, Pass, Stage, Wire

WIRE = Wire("wire", turns=20, active_length=0.05, u_active_length=2e-5)
COIL = Coil("coil", "round", effective_area=0.3, u_effective_area=6e-5, window=0.01)
STAGE = Stage(u_scale=2e-5, u_position=5e-6, u_offset=5e-5, u_lag=2e-3, u_backlash=1e-5)


def scan(name, probe=WIRE, integrator=Integrator("main", drift=1e-7, u_drift=1e-6)):  # noqa: B008 - frozen
    return Pass(name, probe, integrator, np.arange(3.0), np.arange(3.0), np.zeros(3))


def described(*args):
    return [(one.kind, one.where, one.mean, one.sd) for one in nuisances(*args)]


def test_a_drift_for_each_pass_a_gain_for_each_probe_and_the_stage():
    assert described([scan("a"), scan("b")], [WIRE, WIRE, COIL], STAGE) == [
        ("drift", "a", 1e-7, 1e-6),
        ("drift", "b", 1e-7, 1e-6),
        ("gain", "wire", 0.0, 2e-5 / 0.05),
        ("gain", "coil", 0.0, 6e-5 / 0.3),
        ("scale", "", 0.0, 2e-5),
        ("offset", "", 0.0, 5e-5),
        ("lag", "", 0.0, 2e-3),
        ("backlash", "", 0.0, 1e-5),
    ]


def test_tilt_temperature_and_window_belong_to_the_probe():
    coil = replace(
        COIL, u_window=1e-4, u_tilt=1e-2, temperature_coefficient=-2e-5, u_temperature=0.5
    )
    certain = Integrator("main", u_drift=0.0)
    found = described([scan("a", coil, certain)], [coil], Stage())
    assert [one[:2] for one in found] == [
        ("gain", "coil"),
        ("tilt", "coil"),
        ("temperature", "coil"),
        ("window", "coil"),
    ]
    means, sds = [one[2] for one in found], [one[3] for one in found]
    assert means == pytest.approx([0.0, -0.5e-4, 0.0, 0.0])
    assert sds == pytest.approx([2e-4, 1e-4 / np.sqrt(2), 1e-5, 1e-2])


def test_the_cosine_of_a_small_normal_angle_has_these_moments():
    # moments of cos t - 1 over t normal, by numerical integration
    u = 0.02
    t = np.linspace(-8 * u, 8 * u, 20001)
    weight = np.exp(-(t**2) / (2 * u**2))
    weight /= weight.sum()
    mean = weight @ (np.cos(t) - 1)
    sd = np.sqrt(weight @ (np.cos(t) - 1 - mean) ** 2)
    wire = replace(WIRE, u_active_length=0.0, u_tilt=u)
    (one,) = nuisances([], [wire], Stage())
    assert (one.mean, one.sd) == pytest.approx((mean, sd), rel=1e-3)


def test_what_is_certain_is_no_unknown():
    certain = Integrator("main", u_drift=0.0)
    assert described([scan("a", integrator=certain)], [Wire("w", 1, 0.1)], Stage()) == []


def test_a_drift_of_which_nothing_is_known_could_have_made_all_the_flux():
    one = replace(scan("a", integrator=Integrator("main")), flux=np.array([1e-3, 5e-3, 3e-3]))
    (only,) = nuisances([one], [], Stage())
    assert only.sd == pytest.approx(4e-3 / 2.0)


def test_name_and_unit():
    assert Nuisance("gain", "coil", 0.0, 1.0).name == "gain coil"
    assert Nuisance("lag", "", 0.0, 1.0).name == "lag"
    assert [Nuisance(k, "", 0.0, 1.0).unit for k in ("drift", "gain", "lag", "offset")] == [
        "V s/s",
        "1",
        "s",
        "m",
    ]
