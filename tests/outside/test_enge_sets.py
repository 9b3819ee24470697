"""Published Enge coefficients: field boundary and fringe integral.

Quadrupole set: Berz, Erdelyi, Makino, Phys. Rev. ST Accel. Beams 3, 124001 (2000).
Dipole set: in common use, no source at hand.
Boundary and integral values: design figures, recomputed here from the running integrals.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from fieldmap.bench.sources import EngeMagnet, TanhMagnet, TwoTermEnge
from fieldmap.bench.sources.quadrature import RunningQuadrature

QUADRUPOLE_SET = (0.296471, 4.533219, -2.270982, 1.068627, -0.036391, 0.022261)
DIPOLE_SET = (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111)
LENGTH, D, B0 = 1.0, 0.04, 0.8


def boundary_out(source):
    """Where a sharp edge of height B0 with the same integral would stand, m from the end."""
    return source.between(0.0, 3.0) / B0 - LENGTH / 2


def fringe_integral_out(source):
    """Integral of B (B0 - B) ds / (D B0^2) over the far half of a magnet."""
    running = RunningQuadrature(
        lambda s: source.field(s) * (B0 - source.field(s)), np.linspace(0.0, 3.0, 1001)
    )
    return running.total / (D * B0**2)


def test_quadrupole_set():
    magnet = EngeMagnet(B0, LENGTH, D, QUADRUPOLE_SET)
    assert abs(boundary_out(magnet)) < 1e-5 * D
    assert fringe_integral_out(magnet) == pytest.approx(0.21641, abs=5e-6)


def test_dipole_set():
    magnet = EngeMagnet(B0, LENGTH, D, DIPOLE_SET)
    assert boundary_out(magnet) == pytest.approx(7.3e-6 * D, abs=0.05e-6 * D)
    assert fringe_integral_out(magnet) == pytest.approx(0.36946, abs=5e-6)


@pytest.mark.parametrize("coefficients", [QUADRUPOLE_SET, DIPOLE_SET])
def test_total_is_field_times_distance_of_the_boundaries(coefficients):
    magnet = EngeMagnet(B0, LENGTH, D, coefficients)
    assert magnet.total / B0 == pytest.approx(LENGTH + 2 * boundary_out(magnet), rel=1e-12)
    assert magnet.effective_length == pytest.approx(LENGTH, abs=2e-5 * D)


@pytest.mark.parametrize(("c0", "c1"), [(0.0, 2.0), (0.4, 2.2), (-0.7, 5.0)])
def test_two_terms_are_exact(c0, c1):
    # elementary integrals: boundary -c0 D/c1, fringe integral 1/c1
    edge, magnet = TwoTermEnge(B0, D, c0, c1), EngeMagnet(B0, LENGTH, D, (c0, c1))
    assert edge.boundary == pytest.approx(-c0 * D / c1, rel=1e-15)
    assert edge.fringe_integral == pytest.approx(1 / c1, rel=1e-15)
    assert boundary_out(magnet) == pytest.approx(-c0 * D / c1, abs=1e-14)
    assert edge.between(-LENGTH / 2, 2.5) / B0 - LENGTH / 2 == pytest.approx(
        -c0 * D / c1, abs=1e-10
    )
    assert fringe_integral_out(magnet) == pytest.approx(1 / c1, rel=1e-9)


def test_tanh_fringe_is_the_two_term_one():
    # tanh with lam = 2 D/c1 is the two-term Enge function: fringe integral lam / 2D
    magnet = TanhMagnet(B0, LENGTH, 0.03)
    assert boundary_out(magnet) == pytest.approx(0.0, abs=1e-14)
    assert fringe_integral_out(magnet) == pytest.approx(0.03 / (2 * D), rel=1e-12)


def test_linear_ramp():
    # Brown, SLAC-75: 1/6 for a ramp over one gap; it proves the measure used on the others
    class Ramp:
        def field(self, s):
            return B0 * np.clip(0.5 + (1.5 - s) / D, 0.0, 1.0)

    assert fringe_integral_out(Ramp()) == pytest.approx(1 / 6, rel=1e-12)


def test_fringe_integral_against_adaptive_quadrature():
    # the same integral straight from the formula, in units of D
    for coefficients, expected in ((QUADRUPOLE_SET, 0.21641), (DIPOLE_SET, 0.36946)):

        def integrand(x, c=coefficients):
            enge = 1.0 / (1.0 + np.exp(np.clip(np.polyval(c[::-1], x), -700, 700)))
            return enge * (1.0 - enge)

        assert quad(integrand, -6.0, 6.0, limit=400)[0] == pytest.approx(expected, abs=5e-6)
