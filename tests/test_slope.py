"""Slope of the flux: the difference quotient of the flux, and closed forms."""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.bench.response import flux
from fieldmap.bench.slope import flux_slope
from fieldmap.bench.sources import EngeMagnet, Slot, Solenoid, TanhMagnet
from fieldmap.readings import Coil, Wire

PROBES = [
    Wire("wire", turns=20, active_length=0.05),
    Wire("bundle", turns=20, active_length=0.05, width=0.002, polarity=-1),
    Coil("rectangular", "rectangular", effective_area=0.3, window=0.01),
    Coil("round", "round", effective_area=0.3, window=0.01, polarity=-1),
]
SOURCES = [
    TanhMagnet(0.5, 0.1, 0.01),
    Solenoid(0.02, 0.1, 1.0, 1e5),
    EngeMagnet(0.5, 0.1, 0.02, (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111)),
]
HERE = np.linspace(-0.12, 0.12, 97)


@pytest.mark.parametrize("probe", PROBES, ids=lambda probe: probe.name)
@pytest.mark.parametrize("source", SOURCES, ids=lambda source: type(source).__name__)
def test_slope_is_the_derivative_of_the_flux(source, probe):
    h = 2e-5
    near = flux(source, probe, HERE + h) - flux(source, probe, HERE - h)
    far = flux(source, probe, HERE + 2 * h) - flux(source, probe, HERE - 2 * h)
    quotient = (8 * near - far) / (12 * h)
    slope = flux_slope(source, probe, HERE)
    np.testing.assert_allclose(slope, quotient, atol=1e-9 * np.abs(slope).max())


def test_round_coil_in_a_cubic_field_by_hand():
    # mean of the chord-weighted 3 (s + u)^2 over a disc of radius r: 3 s^2 + 3 r^2 / 4
    class Cubic(TanhMagnet):
        def _field(self, s):
            return s**3

    coil = Coil("round", "round", effective_area=2.0, window=0.02)
    expected = 2.0 * (3 * HERE**2 + 0.75 * 0.01**2)
    np.testing.assert_allclose(flux_slope(Cubic(1, 1, 1), coil, HERE), expected, rtol=1e-12)


def test_a_coil_without_extent_feels_the_gradient():
    source = TanhMagnet(0.5, 0.1, 0.01)
    point = Coil("point", "round", effective_area=0.3)
    h = 1e-4
    quotient = 0.3 * (source.field(HERE + h) - source.field(HERE - h)) / (2 * h)
    slope = flux_slope(source, point, HERE)
    np.testing.assert_allclose(slope, quotient, atol=1e-4 * np.abs(slope).max())


def test_a_slot_of_a_millimetre_is_resolved():
    slot = Slot(1.2, width=0.01, height=0.01, length=0.008, gap=0.0012)
    coil = Coil("round", "round", effective_area=0.01, window=0.001)
    s = np.linspace(0.003, 0.005, 41)
    h = 2e-6
    near = flux(slot, coil, s + h) - flux(slot, coil, s - h)
    far = flux(slot, coil, s + 2 * h) - flux(slot, coil, s - 2 * h)
    slope = flux_slope(slot, coil, s)
    np.testing.assert_allclose(slope, (8 * near - far) / (12 * h), rtol=1e-7)


def test_shape_is_kept():
    assert flux_slope(SOURCES[0], PROBES[3], np.zeros((2, 3))).shape == (2, 3)
    assert flux_slope(SOURCES[0], PROBES[0], 0.0).shape == ()
