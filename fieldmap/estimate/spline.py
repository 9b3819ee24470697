"""Uniform splines of the flux density B and of its running integral F = ∫B ds.

B is a cubic B-spline, F therefore a quartic one whose coefficients are the running sums of
B's. Within one piece (between two knots) every basis function is a polynomial in position,
so averages over many readings need the readings' moments only.

Source: C. de Boor, *A Practical Guide to Splines*, Springer 1978, chapters IX and X.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import numpy.typing as npt
from scipy import sparse

__all__ = ["DEGREE", "UniformSpline", "piece_polynomials"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

DEGREE = 3  # of B; its running integral F has one more


@cache
def piece_polynomials(degree: int) -> Floats:
    """Polynomials of the B-splines that live on one piece of a uniform knot sequence.

    Parameters
    ----------
    degree : int
        Degree of the spline.

    Returns
    -------
    (degree + 1, degree + 1) array
        ``[k, m]``: coefficient of ``x**k``, x in [0, 1], of the m-th function from the left.

    Examples
    --------
    >>> piece_polynomials(1)
    array([[ 1.,  0.],
           [-1.,  1.]])
    """
    table = np.array([[1.0]])  # [power, piece of the function counted from its own left end]
    for p in range(1, degree + 1):
        longer = np.zeros((p + 1, p + 1))
        for k in range(p + 1):
            if k < p:  # (x + k) * piece k of degree p - 1
                longer[1:, k] += table[:, k]
                longer[:-1, k] += k * table[:, k]
            if k > 0:  # (p + 1 - k - x) * piece k - 1
                longer[1:, k] -= table[:, k - 1]
                longer[:-1, k] += (p + 1 - k) * table[:, k - 1]
        table = longer / p
    return table[:, ::-1].copy()  # the leftmost function is in its last piece


@dataclass(frozen=True)
class UniformSpline:
    """Knots of the map: B is a cubic spline with `size` coefficients from `start` on.

    Parameters
    ----------
    start : float
        Left end of the domain, m.
    spacing : float
        Knot spacing, m.
    size : int
        Number of coefficients of B.

    Examples
    --------
    >>> spline = UniformSpline.covering(-0.1, 0.1, 0.02)
    >>> ones = np.ones(spline.size)
    >>> round(float(spline.field_rows(np.array([0.03]))[0] @ ones), 12)
    1.0
    >>> round(float(spline.integral_row(-0.05, 0.05) @ ones), 12)
    0.1
    """

    start: float
    spacing: float
    size: int

    @classmethod
    def covering(cls, low: float, high: float, spacing: float) -> UniformSpline:
        """Knots that cover [low, high] (m) with the given spacing, centred on it."""
        pieces = max(int(np.ceil((high - low) / spacing * (1 - 1e-12))), 1)
        start = 0.5 * (low + high) - 0.5 * pieces * spacing
        return cls(start, spacing, pieces + DEGREE)

    @property
    def stop(self) -> float:
        """Right end of the domain, m."""
        return self.start + (self.size - DEGREE) * self.spacing

    def middles(self) -> Floats:
        """Where each basis function of B is centred, m."""
        return np.asarray(self.start + (np.arange(self.size) - 1) * self.spacing)

    def locate(self, s: Floats) -> tuple[Ints, Floats]:
        """Piece index and position within the piece (0 to 1) of each s (m)."""
        u = (np.asarray(s, dtype=float) - self.start) / self.spacing
        piece = np.clip(np.floor(u), 0, self.size - DEGREE - 1).astype(np.intp)
        return piece, u - piece

    def field_rows(self, s: Floats, derivative: int = 0) -> Floats:
        """Rows r with B(s) = r @ b, or its derivative along s.

        Parameters
        ----------
        s : (n,) array
            Positions, m.
        derivative : int
            Order of the derivative.

        Returns
        -------
        (n, size) array
            Unit m**-derivative.
        """
        columns, values = self.field_parts(s, derivative)
        rows = np.zeros((len(columns), self.size))
        np.put_along_axis(rows, columns, values, axis=1)
        return rows

    def field_parts(self, s: Floats, derivative: int = 0) -> tuple[Ints, Floats]:
        """What is not zero in `field_rows`: columns and values, (n, DEGREE + 1) each."""
        piece, x = self.locate(np.atleast_1d(np.asarray(s, dtype=float)))
        table = piece_polynomials(DEGREE)
        for _ in range(derivative):
            table = table[1:] * np.arange(1, len(table))[:, None]
        values = np.vander(x, len(table), increasing=True) @ table / self.spacing**derivative
        return piece[:, None] + np.arange(DEGREE + 1), values

    def running_rows(self, s: Floats) -> Floats:
        """Rows r with F(s) = r @ b, F being zero left of the domain's functions.

        Parameters
        ----------
        s : (n,) array
            Positions, m.

        Returns
        -------
        (n, size) array
            m.
        """
        s = np.atleast_1d(np.asarray(s, dtype=float))
        piece, x = self.locate(s)
        values = np.vander(x, DEGREE + 2, increasing=True) @ piece_polynomials(DEGREE + 1)
        rows = np.zeros((len(s), self.size + 1))
        columns = piece[:, None] + np.arange(DEGREE + 2)
        np.put_along_axis(rows, columns, values, axis=1)
        return self.from_running(rows)

    def from_running(self, rows: Floats) -> Floats:
        """Turn rows on F's coefficients (size + 1 of them) into rows on B's: a running sum."""
        return self.spacing * np.cumsum(rows[:, ::-1], axis=1)[:, ::-1][:, 1:]

    def integral_row(self, low: float, high: float) -> Floats:
        """Row r with ∫B ds over [low, high] = r @ b (m): exact, no quadrature."""
        ends = self.running_rows(np.array([low, high]))
        return np.asarray(ends[1] - ends[0])

    def roughness(self) -> sparse.csr_array:
        """Third differences of B's coefficients, that is fourth differences of F's.

        Returns
        -------
        (size - 3, size) sparse array
            The rows whose squares the smoothness prior weighs.
        """
        n = self.size - DEGREE
        return sparse.diags_array(
            [-1.0, 3.0, -3.0, 1.0], offsets=[0, 1, 2, 3], shape=(n, self.size), format="csr"
        )
