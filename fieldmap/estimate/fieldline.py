"""The field along one line as a spline with its covariance: what every result is taken from."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from fieldmap.estimate.spline import UniformSpline

__all__ = ["FieldLine"]

Floats = npt.NDArray[np.float64]

DRAWS = 400
SEED = 20_061  # the same map gives the same digits


@dataclass(frozen=True, eq=False)
class FieldLine:
    """Flux density along one line.

    Parameters
    ----------
    x, y : float
        Transverse position of the line, m.
    low, high : float
        Ends of the mapped range, m.
    spline : UniformSpline
        The knots.
    b : (size,) array
        Coefficients of B, T.
    covariance : (size, size) array
        Their covariance, T^2, everything that is uncertain included.

    Examples
    --------
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> spline = UniformSpline.covering(-0.1, 0.1, 0.02)
    >>> n = spline.size
    >>> line = FieldLine(0, 0, -0.1, 0.1, spline, np.ones(n), 1e-6 * np.ones((n, n)))
    >>> value, u = line.integral(-0.05, 0.05)
    >>> round(value, 9), round(u, 9)
    (0.1, 0.0001)
    """

    x: float
    y: float
    low: float
    high: float
    spline: UniformSpline
    b: Floats
    covariance: Floats

    def field(self, s: Floats, derivative: int = 0) -> Floats:
        """Flux density at s (m), T; or its derivative, T/m**derivative."""
        return np.asarray(self.spline.field_rows(s, derivative) @ self.b)

    def u_field(self, s: Floats) -> Floats:
        """Standard uncertainty of the flux density at s (m), T."""
        columns, values = self.spline.field_parts(s)
        blocks = self.covariance[columns[:, :, None], columns[:, None, :]]
        return np.asarray(np.sqrt(np.einsum("ni,nij,nj->n", values, blocks, values)))

    @cached_property
    def draws(self) -> Floats:
        """Deviations of the coefficients drawn from their covariance, T, one row a draw.

        Drawn once a line, with a generator of its own: results of two windows are taken from
        the same draws, so that a moved limit changes nothing that it does not bear on.
        """
        values, vectors = np.linalg.eigh(self.covariance)
        root = vectors * np.sqrt(np.maximum(values, 0))
        normal = np.random.default_rng(SEED).standard_normal((DRAWS, len(values)))
        return np.asarray(normal @ root.T)

    def integral(self, low: float, high: float) -> tuple[float, float]:
        """∫B ds over [low, high] and its standard uncertainty, T m."""
        row = self.spline.integral_row(low, high)
        return float(row @ self.b), self.u(row)

    def u(self, row: Floats) -> float:
        """Standard uncertainty of ``row @ b``."""
        return float(np.sqrt(max(float(row @ self.covariance @ row), 0.0)))

    def covers(self, low: float, high: float) -> bool:
        """Whether [low, high] lies within the mapped range, up to half a knot at each end."""
        slack = self.spline.spacing / 2
        return low >= self.low - slack and high <= self.high + slack
