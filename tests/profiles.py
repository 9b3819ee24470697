"""Field lines fitted to known fields: exact profiles for tests of what is made from them."""

from __future__ import annotations

import numpy as np
from scipy import sparse
from scipy.sparse.linalg import spsolve

from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import UniformSpline


def line_through(field, low, high, spacing, covariance=None):
    """A line whose spline passes through a function of position; exactly known by default."""
    spline = UniformSpline.covering(low, high, spacing)
    s = np.linspace(spline.start, spline.stop, 3 * spline.size)
    rows = sparse.csc_array(spline.field_rows(s))
    b = spsolve(rows.T @ rows, rows.T @ field(s))  # least squares; the matrix is banded
    if covariance is None:
        covariance = np.zeros((spline.size, spline.size))
    return FieldLine(0.0, 0.0, low, high, spline, b, covariance)


def smooth_noise(size, sd, seed=0):
    """A root of a covariance, (size, size): noise of so much in every coefficient, a bit shared."""
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(size, size)) * sd / np.sqrt(size)
    return root + sd / 3 / np.sqrt(size) * np.ones((size, size))
