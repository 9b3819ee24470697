"""Textbook formulas, evaluated here in their plainest form, against the sources.

Figures marked "design figure" come with the formula beside them and were recomputed here.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.constants import mu_0
from scipy.special import ellipe, ellipk, lambertw

from fieldmap.bench.sources import Block, Loop, Plates, Solenoid, TanhMagnet, loop_field

S = np.linspace(-0.9, 0.9, 181)
SOLENOID = Solenoid(radius=0.1, length=0.4, turns=500, current=10.0)


def test_magnetic_constant_is_the_measured_one():
    # CODATA 2018 1.25663706212e-6, CODATA 2022 1.25663706127e-6 N/A^2 (memory)
    assert Loop(1.0, 1.0).total == mu_0
    assert mu_0 == pytest.approx(1.256637062e-6, rel=1e-9)


def test_loop_on_axis():
    # Biot-Savart: mu0 I R^2 / 2 / (R^2 + z^2)^(3/2)
    expected = mu_0 * 250.0 * 0.1**2 / 2 / (0.1**2 + S**2) ** 1.5
    np.testing.assert_allclose(Loop(0.1, 250.0).field(S), expected, rtol=1e-14)
    assert Loop(0.1, 250.0).effective_length == pytest.approx(0.2, rel=1e-14)


@pytest.mark.parametrize("rho", [0.03, 0.08, 0.13, 0.6])
def test_loop_off_axis(rho):
    # Smythe, Static and Dynamic Electricity, 7.10 (memory)
    R, current = 0.1, 250.0
    near, far = (R - rho) ** 2 + S**2, (R + rho) ** 2 + S**2
    K, E = ellipk(4 * R * rho / far), ellipe(4 * R * rho / far)
    factor = mu_0 * current / (2 * math.pi * np.sqrt(far))
    axial = factor * (K + (R**2 - rho**2 - S**2) / near * E)
    radial = factor * S / rho * (-K + (R**2 + rho**2 + S**2) / near * E)
    rounding = 1e-14 * np.max(factor * K)  # of the plain form, whose terms cancel
    got_radial, got_axial = loop_field(R, current, rho, S)
    np.testing.assert_allclose(got_axial, axial, rtol=0, atol=rounding)
    np.testing.assert_allclose(got_radial, radial, rtol=0, atol=rounding)


@pytest.mark.parametrize(("rho", "share"), [(0.0, 1.0), (0.07, 1.0), (0.099, 1.0), (0.13, 0.0)])
def test_ampere_through_and_beside_a_loop(rho, share):
    # Ampere: mu0 I if the line links the loop, nothing if it does not
    loop = Loop(0.1, 250.0, offset=rho)
    assert loop.total == share * mu_0 * 250.0
    assert loop.between(-1e5, 1e5) == pytest.approx(loop.total, rel=1e-9, abs=1e-12 * mu_0 * 250.0)


def test_solenoid_on_axis():
    # mu0 N I / 2L times the difference of the cosines to its ends
    front, back = S + 0.2, S - 0.2
    ends = front / np.hypot(0.1, front) - back / np.hypot(0.1, back)
    expected = mu_0 * 500 * 10.0 / (2 * 0.4) * ends
    np.testing.assert_allclose(SOLENOID.field(S), expected, rtol=1e-12)


def test_solenoid_partial_integral():
    # integral over -Z ... Z: mu0 N I / L (sqrt(R^2 + (Z + L/2)^2) - sqrt(R^2 + (Z - L/2)^2))
    for Z in (0.05, 0.2, 0.5, 3.0):
        expected = mu_0 * 500 * 10.0 / 0.4 * (math.hypot(0.1, Z + 0.2) - math.hypot(0.1, Z - 0.2))
        assert SOLENOID.between(-Z, Z) == pytest.approx(expected, rel=1e-13)


def test_solenoid_total_and_effective_length():
    # Ampere: mu0 N I; sqrt(L^2 + 4 R^2) = 0.4472136 m (design figure)
    assert SOLENOID.total == mu_0 * 5000.0
    assert SOLENOID.between(-1e8, 1e8) == pytest.approx(SOLENOID.total, rel=1e-14)
    assert SOLENOID.effective_length == pytest.approx(0.4472136, abs=5e-8)
    assert SOLENOID.total / float(SOLENOID.field(0.0)) == pytest.approx(0.4472136, abs=5e-8)


@pytest.mark.parametrize(
    ("reach", "share"), [(0.5, 2.280e-2), (1.0, 0.5166e-2), (2.0, 0.1260e-2), (5.0, 0.02003e-2)]
)
def test_share_of_the_solenoid_beyond_the_scan(reach, share):
    # design figures, four digits each
    beyond = 1.0 - SOLENOID.between(-reach, reach) / SOLENOID.total
    assert beyond == pytest.approx(share, rel=3e-4)


def test_block_total():
    # (J c / pi) [atan(a / 2(y0 - b/2)) - atan(a / 2(y0 + b/2))]
    J, a, b, c, y0 = 1.2, 0.04, 0.02, 0.1, 0.018
    expected = J * c / math.pi * (math.atan(a / 2 / (y0 - b / 2)) - math.atan(a / 2 / (y0 + b / 2)))
    block = Block(J, a, b, c, y=y0)
    assert block.total == pytest.approx(expected, rel=1e-14)
    assert block.between(-1e6, 1e6) == pytest.approx(expected, rel=1e-12)


def test_block_field_is_the_coulomb_field_of_its_charged_faces():
    # sigma = J.n on two faces: By = J/4pi times the integral of (y - y')/r^3, by brute quadrature
    J, a, b, c, y0, x0 = 1.2, 0.04, 0.02, 0.1, 0.025, 0.01
    nodes, weights = np.polynomial.legendre.leggauss(120)
    X, Z = np.meshgrid(x0 - a / 2 * nodes, c / 2 * nodes, indexing="ij")
    area = np.outer(weights, weights) * a * c / 4
    block = Block(J, a, b, c, y=y0, x=x0)
    for z in (0.0, 0.03, 0.055, 0.3):
        field = 0.0
        for sign in (1, -1):
            Y = y0 - sign * b / 2
            field += (
                sign * J / (4 * math.pi) * np.sum(area * Y / (X**2 + Y**2 + (z - Z) ** 2) ** 1.5)
            )
        assert float(block.field(z)) == pytest.approx(field, rel=1e-11)


def test_tanh_magnet():
    # B0/2 [tanh((z + L/2)/lam) - tanh((z - L/2)/lam)]; total B0 L; length L / tanh(L / 2 lam)
    B0, L, lam = 0.5, 0.4, 0.07
    magnet = TanhMagnet(B0, L, lam)
    expected = B0 / 2 * (np.tanh((S + L / 2) / lam) - np.tanh((S - L / 2) / lam))
    np.testing.assert_allclose(magnet.field(S), expected, rtol=0, atol=1e-15)
    assert magnet.between(-50.0, 50.0) == pytest.approx(B0 * L, rel=1e-14)
    assert magnet.effective_length == pytest.approx(L / math.tanh(L / 2 / lam), rel=1e-14)


def test_semi_infinite_plates():
    # conformal map: w = a - W(e^a), a = 2 pi s/g - 1, B/B0 = 1/(1 + e^w), F = B0 g w / 2 pi
    g, B0 = 0.03, 0.7
    s = np.linspace(-0.09, 0.09, 101)
    a = 2 * math.pi * s / g - 1
    w = a - lambertw(np.exp(a)).real
    plates = Plates(B0, g)
    np.testing.assert_allclose(plates.field(s), B0 / (1 + np.exp(w)), rtol=1e-13)
    np.testing.assert_allclose(plates.integral(s), B0 * g * w / (2 * math.pi), atol=1e-16)


def test_plates_at_the_edge_and_far_out():
    # 0.78219 (design figure); Omega = W(1/e) = 0.2784645 solves W e^W = 1/e
    assert float(Plates(1.0, 0.03).field(0.0)) == pytest.approx(0.78219, abs=5e-6)
    assert float(Plates(1.0, 0.03).field(0.0)) == pytest.approx(1 / 1.2784645427610738, rel=1e-14)
    # the field falls as g / 2 pi s only, so each decade adds the same: the total diverges
    plates = Plates(1.0, 0.03)
    decades = [plates.between(10.0**k, 10.0 ** (k + 1)) for k in (4, 5, 6)]
    np.testing.assert_allclose(decades, 0.03 / (2 * math.pi) * math.log(10), rtol=1e-5)
    assert plates.total == math.inf
