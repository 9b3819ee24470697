"""The probe's nodes on the spline against brute-force averages over bundle and window."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad

from fieldmap.bench.response import flux
from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate.response import response
from fieldmap.readings import Coil, Wire

WIRE = Wire("wire", turns=20, active_length=0.05)
BUNDLE = replace(WIRE, width=0.4e-3)
RECT = Coil("coil", "rectangular", effective_area=0.3, window=0.01)
ROUND = Coil("round", "round", effective_area=0.3, window=0.01)
POINT = Coil("point", "round", effective_area=0.3)
GAP = 0.03
MAGNET = TanhMagnet(0.5, 0.1, GAP / np.pi)
HERE = np.linspace(-0.08, 0.08, 33)


def read(probe, source=MAGNET, s=HERE, spacing=GAP / 10):
    nodes = response(probe, spacing)
    function = source.integral if nodes.of_integral else source.field
    return sum(w * function(s + o) for o, w in zip(nodes.offsets, nodes.weights, strict=True))


def test_thin_wire_reads_the_running_integral():
    np.testing.assert_array_equal(read(WIRE), 1.0 * MAGNET.integral(HERE))


def test_coil_without_extent_reads_the_field():
    for shape in ("round", "rectangular"):
        np.testing.assert_array_equal(read(replace(POINT, shape=shape)), 0.3 * MAGNET.field(HERE))


@pytest.mark.parametrize("probe", [BUNDLE, RECT, ROUND], ids=lambda p: p.name)
def test_brute_force_average(probe):
    half = probe.extent / 2
    if probe is BUNDLE:
        weigh = lambda u: MAGNET.integral(s + u) / probe.width  # noqa: E731 - a formula
    elif probe is RECT:
        weigh = lambda u: MAGNET.field(s + u) / probe.window  # noqa: E731
    else:
        weigh = lambda u: MAGNET.field(s + u) * 2 / (np.pi * half**2) * np.sqrt(half**2 - u**2)  # noqa: E731
    for s in (-0.052, -0.03, 0.001, 0.048):
        expected = probe.gain * quad(weigh, -half, half, epsabs=1e-13, epsrel=1e-12)[0]
        (got,) = read(probe, s=np.array([s]))
        assert got == pytest.approx(expected, rel=0, abs=1e-7 * probe.gain * 0.5)


@pytest.mark.parametrize("probe", [WIRE, BUNDLE, RECT, ROUND, POINT], ids=lambda p: p.name)
@pytest.mark.parametrize("window", [1e-3, 0.01, 0.03])
def test_agrees_with_the_simulated_bench(probe, window):
    if isinstance(probe, Coil) and probe.window:
        probe = replace(probe, window=window)
    got, expected = read(probe), flux(MAGNET, probe, HERE)
    offset = got[0] - expected[0] if isinstance(probe, Wire) else 0.0
    np.testing.assert_allclose(got - offset, expected, rtol=0, atol=1e-7 * abs(probe.gain) * 0.5)


@pytest.mark.parametrize("probe", [BUNDLE, RECT, ROUND, POINT], ids=lambda p: p.name)
def test_polarity_turns_the_sign(probe):
    turned = replace(probe, polarity=-1)
    np.testing.assert_array_equal(read(turned), -read(probe))


@pytest.mark.parametrize("probe", [RECT, ROUND, POINT], ids=lambda p: p.name)
def test_weights_of_a_coil_sum_to_its_area(probe):
    nodes = response(probe, 0.002)
    if nodes.of_integral:
        assert nodes.weights @ nodes.offsets == pytest.approx(probe.gain, rel=1e-14)
    else:
        assert nodes.weights.sum() == pytest.approx(probe.gain, rel=1e-14)


def test_weights_of_a_bundle_sum_to_its_gain():
    assert response(BUNDLE, 0.002).weights.sum() == BUNDLE.gain


def test_round_window_averages_the_square_like_a_disc():
    # the mean of u^2 over a disc along one direction is r^2/4
    nodes = response(ROUND, 0.002)
    assert nodes.weights @ nodes.offsets**2 == pytest.approx(ROUND.gain * 0.005**2 / 4, rel=1e-13)


def test_round_window_needs_more_nodes_where_knots_are_closer():
    assert len(response(ROUND, 0.01).offsets) == 8
    assert len(response(ROUND, 0.001).offsets) == 20
    assert len(response(ROUND, 1e-6).offsets) == 64
