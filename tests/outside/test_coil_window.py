"""What a coil of finite size reads, against the series of Herzog and Tischler.

Herzog & Tischler, Rev. Sci. Instrum. 24, 1000 (1953), memory: a cylindrical coil of length
l and radius r along the field reads b + b''(l^2/24 - r^2/8), with b'' along the axis; the
second-order term vanishes at l = sqrt(3) r.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldmap.bench.response import flux
from fieldmap.bench.sources import Loop, TanhMagnet
from fieldmap.readings.probe import Coil

R, CURRENT = 1.0, 1e6
CENTRAL = float(Loop(R, CURRENT).field(0.0))
CURVATURE = -3.0 / R**2  # b''/b at the centre of a loop


def axial_cylinder(length, radius):
    """Reading of an axial cylindrical coil at the loop's centre, relative to b, less one.

    Filaments of length `length` at every distance from the axis, averaged over the disc.
    """
    nodes, weights = np.polynomial.legendre.leggauss(12)
    area_fraction, weights = (nodes + 1) / 2, weights / 2
    filament = Coil("filament", "rectangular", effective_area=1.0, window=length)
    readings = [
        float(flux(Loop(R, CURRENT, offset=radius * math.sqrt(t)), filament, 0.0))
        for t in area_fraction
    ]
    return float(np.dot(weights, readings)) / CENTRAL - 1.0


@pytest.mark.parametrize(
    ("ratio", "expected", "digits"),
    [(1.0, 6.25e-4, 5e-6), (math.sqrt(3), -1.6e-6, 5e-8), (3.0, -1.87e-3, 5e-6)],
)
def test_cylinder_at_the_centre_of_a_loop(ratio, expected, digits):
    assert axial_cylinder(0.05 * ratio, 0.05) == pytest.approx(expected, abs=digits)


@pytest.mark.parametrize("ratio", [0.5, 1.0, 2.5, 3.0])
def test_cylinder_follows_the_series(ratio):
    r = 0.005
    series = CURVATURE * ((ratio * r) ** 2 / 24 - r**2 / 8)
    # the next order is smaller by (r/R)^2, up to a factor of the shape
    assert axial_cylinder(ratio * r, r) == pytest.approx(series, rel=2e-3)


def test_curvature_vanishes_at_root_three():
    small, large = (
        axial_cylinder(math.sqrt(3) * 0.02, 0.02),
        axial_cylinder(math.sqrt(3) * 0.04, 0.04),
    )
    assert large / small == pytest.approx(16.0, rel=0.02)  # fourth order is what is left


@pytest.mark.parametrize("window", [1e-3, 2e-3, 4e-3])
def test_flat_windows_follow_their_second_moments(window):
    # a window reads b + b'' <u^2>/2: <u^2> is w^2/12 for a rectangle, r^2/4 for a disc
    # (elementary moments; b'' of the tanh magnet differentiated by hand)
    lam, s = 0.05, 0.17
    magnet = TanhMagnet(0.5, 0.4, lam)

    def bent(u):
        t = np.tanh(u / lam)
        return -2 * t * (1 - t**2) / lam**2

    second = 0.25 * (bent(s + 0.2) - bent(s - 0.2))
    for shape, moment in (("rectangular", window**2 / 12), ("round", window**2 / 16)):
        coil = Coil("coil", shape, effective_area=0.3, window=window)
        excess = float(flux(magnet, coil, s)) / 0.3 - float(magnet.field(s))
        assert excess == pytest.approx(second * moment / 2, rel=2e-3)
