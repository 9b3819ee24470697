"""The project's spline and solver as a smoothing spline, against references.

Sources: H. J. Woltring, GCVSPL, Advances in Engineering Software 8, 104 (1986): results for 100
points are shipped with scipy (scipy/interpolate/tests/data/gcvspl.npz). C. H. Reinsch, Numer.
Math. 10, 177 (1967), for the smoothing spline itself. Area matching: the histospline of
I. J. Schoenberg, Splines and histograms, 1973 (memory).
"""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import scipy
from scipy.interpolate import make_smoothing_spline
from scipy.optimize import minimize_scalar

from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate import map_lines, reconstruct
from fieldmap.estimate.normal import NormalSystem
from fieldmap.estimate.spline import UniformSpline
from fieldmap.readings import Coil, Integrator, PointReference, Wire, make_pass

GCVSPL = Path(scipy.__file__).parent / "interpolate/tests/data/gcvspl.npz"


def bending(spline):
    """Matrix of ∫B''² ds: B'' is linear in each piece, so two Gauss nodes are exact."""
    pieces = spline.start + spline.spacing * np.arange(spline.size - 3)
    nodes = np.concatenate([pieces + spline.spacing * (0.5 + g) for g in (-(12**-0.5), 12**-0.5)])
    rows = spline.field_rows(nodes, 2)
    return rows.T @ rows * spline.spacing / 2


class Smoothing:
    """Natural smoothing spline on knots so fine that they no longer matter."""

    def __init__(self, x, y, pieces):
        self.spline = UniformSpline.covering(x[0], x[-1], (x[-1] - x[0]) / pieces)
        self.rows, self.y = self.spline.field_rows(x), y
        self.penalty = bending(self.spline)

    def system(self, weight):
        return NormalSystem(self.rows.T @ self.rows + weight * self.penalty)

    def fitted(self, weight):
        return self.rows @ self.system(weight).solve(self.rows.T @ self.y)

    def gcv(self, log_weight):
        """Generalised cross-validation (Craven & Wahba, Numer. Math. 31, 377, 1979)."""
        system = self.system(np.exp(log_weight))
        hat = self.rows @ system.solve(self.rows.T)
        rest = self.y - hat @ self.y
        return float(np.mean(rest**2) / np.mean(1 - np.diag(hat)) ** 2)


@pytest.fixture(scope="module")
def data():
    with np.load(GCVSPL) as content:
        return content["x"], content["y"], content["y_GCVSPL"]


@pytest.mark.parametrize("weight", [1e-3, 0.03, 1.0])
def test_smoothing_spline_of_a_given_weight(data, weight):
    x, y, _ = data
    expected = make_smoothing_spline(x, y, lam=weight)(x)
    got = Smoothing(x, y, 400).fitted(weight)
    np.testing.assert_allclose(got, expected, atol=1e-5 * np.ptp(y))


def test_weight_by_cross_validation_is_that_of_gcvspl(data):
    x, y, expected = data
    smoothing = Smoothing(x, y, 200)
    found = minimize_scalar(smoothing.gcv, bracket=(-8.0, -3.0), tol=1e-7)
    got = Smoothing(x, y, 400).fitted(np.exp(found.x))
    # the program's own search ends within 1e-4 of the minimum, as scipy's test of it grants too
    np.testing.assert_allclose(got, expected, atol=2e-4, rtol=2e-4)


MAGNET = TanhMagnet(0.5, length=0.1, lam=0.03 / np.pi)
SURE = Integrator("main", read_noise=1e-9, walk_noise=1e-9, u_drift=0.0)


def test_areas_of_cells_equal_the_increments_of_a_wire():
    z = np.linspace(-0.15, 0.15, 301)
    wire = Wire("wire", turns=20, active_length=0.05)
    flux = wire.gain * (MAGNET.integral(z) - MAGNET.integral(z[0]))
    one = make_pass(z, flux, rate=50.0, probe=wire, integrator=SURE)
    (line,) = map_lines(reconstruct(one, gap=0.03, knot_spacing=0.001))
    areas = [line.integral(a, b)[0] for a, b in pairwise(z)]
    wrong = np.array(areas) - np.diff(flux) / wire.gain
    # within the noise that was stated, a part in 1e8 of the whole
    assert np.abs(wrong).max() < 2e-9
    assert sum(areas) == pytest.approx(flux[-1] / wire.gain, rel=1e-7)


def test_differences_of_windows_equal_the_increments_of_a_coil():
    z = np.linspace(-0.15, 0.15, 301)
    coil = Coil("coil", "rectangular", effective_area=0.3, window=0.01)
    window = (MAGNET.integral(z + 0.005) - MAGNET.integral(z - 0.005)) / 0.01
    level = PointReference(0.0, float(MAGNET.field(0.0)), 1e-7)
    one = make_pass(z, 0.3 * window, rate=50.0, probe=coil, integrator=SURE)
    (line,) = map_lines(reconstruct(one, references=[level], gap=0.03, knot_spacing=0.001))
    means = np.array([line.integral(s - 0.005, s + 0.005)[0] / 0.01 for s in z])
    np.testing.assert_allclose(np.diff(means), np.diff(window), rtol=0, atol=2e-8)
    np.testing.assert_allclose(means, window, rtol=0, atol=5e-7)
