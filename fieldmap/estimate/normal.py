"""Symmetric positive definite systems: scaled, factored once, refined."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import linalg

__all__ = ["NormalSystem"]

Floats = npt.NDArray[np.float64]


class NormalSystem:
    """Cholesky factorisation of a normal matrix, scaled to a unit diagonal.

    Scaling makes unknowns of any unit and size equal before the factorisation, so that a
    1 mm gap is solved as well as a 3 m magnet.

    Parameters
    ----------
    matrix : (n, n) array
        Symmetric, positive definite.

    Raises
    ------
    numpy.linalg.LinAlgError
        The matrix is not positive definite: something is not determined.

    Examples
    --------
    >>> NormalSystem(np.diag([4.0, 1e12])).solve(np.array([8.0, 1e12]))
    array([2., 1.])
    """

    def __init__(self, matrix: Floats) -> None:
        diagonal = np.diagonal(matrix)
        if not np.all(diagonal > 0):
            raise np.linalg.LinAlgError("an unknown is not determined at all")
        self.matrix = matrix
        self.scale = 1 / np.sqrt(diagonal)
        scaled = matrix * self.scale[:, None] * self.scale
        self.factor = linalg.cholesky(scaled, lower=True, overwrite_a=True, check_finite=False)

    def log_determinant(self) -> float:
        """Natural logarithm of the determinant."""
        return float(2 * (np.log(np.diagonal(self.factor)) - np.log(self.scale)).sum())

    def solve(self, right: Floats) -> Floats:
        """Solution for one or several right sides, with one step of refinement."""
        first = self._solve_once(right)
        return first + self._solve_once(right - self.matrix @ first)

    def _solve_once(self, right: Floats) -> Floats:
        scale = self.scale if right.ndim == 1 else self.scale[:, None]
        solved = linalg.cho_solve((self.factor, True), scale * right, check_finite=False)
        return np.asarray(scale * solved)

    def inverse(self) -> Floats:
        """The covariance matrix."""
        lower, info = linalg.lapack.dpotri(self.factor, lower=1)
        if info:
            raise np.linalg.LinAlgError("the normal matrix cannot be inverted")
        full = np.tril(lower) + np.tril(lower, -1).T
        return np.asarray(full * self.scale[:, None] * self.scale)
