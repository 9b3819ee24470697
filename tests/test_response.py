"""The ideal probe: averages over windows and bundles, checked by hand and by quadrature."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from fieldmap.bench.response import flux
from fieldmap.bench.sources import EngeMagnet, Loop, Slot, Source, TanhMagnet, Uniform
from fieldmap.errors import RefusedError
from fieldmap.readings.probe import Coil, Wire

WIRE = Wire("wire", turns=20, active_length=0.05)
BUNDLE = replace(WIRE, width=0.004)
RECTANGULAR = Coil("coil", "rectangular", effective_area=0.3, window=0.01)
ROUND = Coil("round", "round", effective_area=0.3, window=0.01)
POINT = Coil("point", "round", effective_area=0.3)
PROBES = [WIRE, BUNDLE, RECTANGULAR, ROUND, POINT]
MAGNET = TanhMagnet(0.5, 0.1, 0.006)
SLOT = Slot(1.2, width=0.01, height=0.01, length=0.008, gap=0.0012)
ENGE = EngeMagnet(0.5, 0.2, 0.03, (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111))
HERE = np.linspace(-0.08, 0.08, 33)

every_probe = pytest.mark.parametrize("probe", PROBES, ids=lambda probe: f"{probe.name}")
every_source = pytest.mark.parametrize("source", [MAGNET, SLOT, ENGE, Loop(0.05, 1e4, 0.02)])


@dataclass(frozen=True)
class Cubic(Source):
    """B = 4 s^3 + 3 s^2, F = s^4 + s^3: windows average it in closed form."""

    @property
    def total(self):
        return math.nan

    def _field(self, s):
        return 4 * s**3 + 3 * s**2

    def _integral(self, s):
        return s**4 + s**3


def test_wire_collects_the_running_integral():
    np.testing.assert_allclose(flux(Cubic(), WIRE, HERE), 1.0 * (HERE**4 + HERE**3), rtol=1e-14)


def test_bundle_averages_the_running_integral_over_its_width():
    w2 = 0.004**2
    expected = HERE**4 + HERE**2 * w2 / 2 + w2**2 / 80 + HERE**3 + HERE * w2 / 4
    np.testing.assert_allclose(flux(Cubic(), BUNDLE, HERE), expected, rtol=1e-12, atol=1e-19)


def test_rectangular_coil_averages_the_field_over_its_window():
    w2 = 0.01**2
    expected = 0.3 * (4 * HERE**3 + HERE * w2 + 3 * HERE**2 + w2 / 4)
    np.testing.assert_allclose(flux(Cubic(), RECTANGULAR, HERE), expected, rtol=1e-12, atol=1e-16)


def test_round_coil_averages_the_field_over_its_disc():
    r2 = 0.005**2  # the mean of u^2 over a disc is r^2/4
    expected = 0.3 * (4 * HERE**3 + 3 * HERE * r2 + 3 * HERE**2 + 3 * r2 / 4)
    np.testing.assert_allclose(flux(Cubic(), ROUND, HERE), expected, rtol=1e-12, atol=1e-18)


def test_coil_without_extent_reads_the_field():
    for shape in ("round", "rectangular"):
        probe = replace(POINT, shape=shape)
        np.testing.assert_array_equal(flux(MAGNET, probe, HERE), 0.3 * MAGNET.field(HERE))


@every_source
@pytest.mark.parametrize("window", [0.0004, 0.006, 0.03])
def test_round_coil_against_adaptive_quadrature(source, window):
    probe, r = replace(ROUND, window=window), window / 2

    def chord(angle, s):
        return 2 / math.pi * math.sin(angle) ** 2 * float(source.field(s + r * math.cos(angle)))

    for s in (0.0, 0.0037, -0.052):
        points = np.arccos(np.clip((np.array([-0.05, -0.004, 0.0, 0.004]) - s) / r, -1, 1))
        expected, _ = quad(
            chord, 0, math.pi, (s,), points=points, epsabs=0, epsrel=1e-12, limit=400
        )
        assert float(flux(source, probe, s)) == pytest.approx(0.3 * expected, rel=1e-11)


@every_source
@pytest.mark.parametrize("width", [0.0004, 0.006, 0.03])
def test_bundle_against_adaptive_quadrature(source, width):
    probe = replace(BUNDLE, width=width)
    for s in (0.001, 0.0037, -0.052):
        points = [p for p in (-0.05, -0.004, 0.0, 0.004) if abs(p - s) < width / 2]
        expected, _ = quad(
            lambda u: float(source.integral(u)),
            s - width / 2,
            s + width / 2,
            points=points or None,
            epsabs=0,
            epsrel=1e-12,
            limit=400,
        )
        assert float(flux(source, probe, s)) == pytest.approx(expected / width, rel=1e-11)


@every_probe
def test_reading_is_linear_in_the_source(probe):
    combined = flux(2.0 * MAGNET + Uniform(0.1).shifted(0.03), probe, HERE)
    parts = 2.0 * flux(MAGNET, probe, HERE) + flux(Uniform(0.1).shifted(0.03), probe, HERE)
    np.testing.assert_allclose(combined, parts, rtol=1e-12, atol=1e-15)


@every_probe
def test_polarity_turns_the_sign(probe):
    turned = replace(probe, polarity=-1)
    np.testing.assert_array_equal(flux(MAGNET, turned, HERE), -flux(MAGNET, probe, HERE))


@pytest.mark.parametrize("probe", [RECTANGULAR, ROUND, POINT], ids=lambda probe: probe.name)
def test_coil_tells_no_difference_in_a_uniform_field(probe):
    np.testing.assert_allclose(flux(Uniform(0.4), probe, HERE), 0.12, rtol=1e-13)


@pytest.mark.parametrize("probe", [WIRE, BUNDLE], ids=["wire", "bundle"])
def test_wire_cuts_a_uniform_field(probe):
    np.testing.assert_allclose(np.diff(flux(Uniform(0.4), probe, [0.0, 0.1, 0.3])), [0.04, 0.08])


@every_probe
@given(by=st.floats(-0.3, 0.3))
def test_moving_magnet_and_probe_together_changes_nothing(probe, by):
    together = flux(MAGNET.shifted(by), probe, HERE + by)
    np.testing.assert_allclose(together, flux(MAGNET, probe, HERE), rtol=0, atol=1e-13)


@every_probe
def test_shape_is_kept(probe):
    grid = HERE[:32].reshape(2, 4, 4)
    readings = flux(MAGNET, probe, grid)
    assert readings.shape == (2, 4, 4)
    assert float(flux(MAGNET, probe, grid[1, 2, 3])) == pytest.approx(readings[1, 2, 3], rel=1e-13)
    assert flux(MAGNET, probe, []).shape == (0,)


@every_probe
def test_long_passes_are_read_piecewise_alike(probe):
    s = np.linspace(-0.1, 0.1, 10_001)
    some = [0, 4095, 4096, 8192, 10_000]
    np.testing.assert_allclose(flux(MAGNET, probe, s)[some], flux(MAGNET, probe, s[some]), 1e-13)


@every_probe
def test_missing_position_gives_a_missing_reading(probe):
    readings = flux(MAGNET, probe, [0.0, math.nan, 0.02])
    np.testing.assert_array_equal(np.isnan(readings), [False, True, False])


def test_field_sharper_than_any_window_is_refused():
    cliff = TanhMagnet(0.5, 0.1, 1e-10)
    with pytest.raises(RefusedError, match="too sharply"):
        flux(cliff, ROUND, [0.049, 0.0501])


def test_rounding_of_cancelling_parts_is_let_pass():
    noisy = MAGNET + Uniform(1e8) - Uniform(1e8)
    assert not np.array_equal(noisy.field(HERE), MAGNET.field(HERE))
    np.testing.assert_allclose(flux(noisy, ROUND, HERE), flux(MAGNET, ROUND, HERE), atol=1e-8)
