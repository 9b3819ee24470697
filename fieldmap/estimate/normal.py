"""Symmetric positive definite systems: scaled, factored once, refined."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import linalg

if TYPE_CHECKING:
    from collections.abc import Callable

__all__ = ["NormalSystem", "Undetermined"]

Floats = npt.NDArray[np.float64]

REFINEMENTS = 3


class Undetermined(np.linalg.LinAlgError):
    """A matrix that is not positive definite: some unknowns are not determined.

    Parameters
    ----------
    direction : (n,) array
        What is determined least, each unknown in units of what the matrix alone says of it.
    """

    def __init__(self, direction: Floats) -> None:
        self.direction = direction
        self.what = ""
        super().__init__("the normal matrix is not positive definite")


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
    Undetermined
        The matrix is not positive definite: something is not determined.

    Examples
    --------
    >>> NormalSystem(np.diag([4.0, 1e12])).solve(np.array([8.0, 1e12]))
    array([2., 1.])
    """

    def __init__(self, matrix: Floats) -> None:
        diagonal = np.diagonal(matrix)
        if not np.all(diagonal > 0):
            raise Undetermined((~(diagonal > 0)).astype(float))
        self.matrix = matrix
        self.scale = 1 / np.sqrt(diagonal)
        scaled = matrix * self.scale[:, None] * self.scale
        try:
            self.factor = linalg.cholesky(scaled, lower=True, check_finite=False)
        except np.linalg.LinAlgError as error:
            raise Undetermined(_weakest(scaled)) from error

    def log_determinant(self) -> float:
        """Natural logarithm of the determinant."""
        return float(2 * (np.log(np.diagonal(self.factor)) - np.log(self.scale)).sum())

    def reciprocal_condition(self) -> float:
        """Reciprocal condition number of the scaled matrix in the 1-norm, as LAPACK estimates it.

        It bounds the digits of every unknown at once; `rounding` tells those of one result.
        """
        scaled = self.matrix * self.scale[:, None] * self.scale
        norm = float(np.abs(scaled).sum(axis=0).max())
        found, _ = linalg.lapack.dpocon(self.factor, norm, uplo="L")
        return float(found)

    def rounding(self, rows: Floats, right: Floats) -> tuple[Floats, Floats]:
        """What rounding may have done to ``rows @ x`` and to its variance.

        The factors belong to a matrix within a rounding of this one, and a change E of the
        matrix M changes the variance r'M⁻¹r by (M⁻¹r)'E(M⁻¹r); a change e of the right side
        changes the value by (M⁻¹r)'e. The condition number asks for the worst of all r; this
        asks for the results themselves.

        Parameters
        ----------
        rows : (k, n) array
            One result a row.
        right : (n,) array
            The right side that x was solved for.

        Returns
        -------
        values : (k,) array
            Standard deviation of the change of the value, in units of the result's own.
        variances : (k,) array
            Bound of the relative change of its variance.
        """
        weights = self._solve_once(rows.T)
        variance = np.abs(np.einsum("kn,nk->k", rows, weights))
        moved = ((weights * right[:, None]) ** 2).sum(axis=0)
        size = ((weights / self.scale[:, None]) ** 2).sum(axis=0)
        eps = np.finfo(float).eps
        return np.asarray(eps * np.sqrt(moved / variance)), np.asarray(eps * size / variance)

    def weakest(self) -> Floats:
        """The direction that is determined least, as in `Undetermined`: inverse iteration."""
        direction = np.ones(len(self.scale))
        for _ in range(REFINEMENTS):
            direction = linalg.cho_solve((self.factor, True), direction, check_finite=False)
            direction /= np.linalg.norm(direction)
        return np.asarray(direction)

    def solve(self, right: Floats, product: Callable[[Floats], Floats] | None = None) -> Floats:
        """Solution, refined by its own residual.

        Parameters
        ----------
        right : (n,) or (n, k) array
            Right sides.
        product : callable, optional
            Computes ``matrix @ x`` more accurately than the matrix as it was rounded: where
            the matrix is a sum of squares, through their factors.

        Returns
        -------
        array like `right`
        """
        multiply = product or self.matrix.__matmul__
        solution = self._solve_once(right)
        for _ in range(REFINEMENTS):
            solution = solution + self._solve_once(right - multiply(solution))
        return solution

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


def _weakest(scaled: Floats) -> Floats:
    """Direction of the smallest eigenvalue; of everything alike where there is none."""
    if not np.isfinite(scaled).all():
        return np.ones(len(scaled))
    _, vectors = linalg.eigh(scaled, subset_by_index=[0, 0])
    return np.asarray(vectors[:, 0])
