"""What a line was estimated from: its readings, references and prior knowledge, linearised.

The readings of every pass are kept as the increments of their bin means with the design rows
that the last solve used, so that later questions need no raw pass: which cause contributes how
much to the uncertainty of a result, and how well a curve of few parameters explains the same
readings.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.noise import total

if TYPE_CHECKING:
    from collections.abc import Mapping

    from scipy import sparse

    from fieldmap.estimate.noise import Tridiagonal

__all__ = ["NOISES", "Evidence", "Smoothness", "Squares"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

NOISES = ("walk", "read", "jitter")


class Squares(NamedTuple):
    """A sum of squares as a polynomial of the unknowns v: ``vᵀ·matrix·v - 2·right·v + constant``.

    Parameters
    ----------
    matrix : (p, p) array
        Information on the unknowns.
    right : (p,) array
        Right side of the normal equations.
    constant : float
        The sum at v = 0.
    """

    matrix: Floats
    right: Floats
    constant: float


class Smoothness(NamedTuple):
    """The smoothness prior as rows on the unknowns: ``rows @ v - target`` is unit normal.

    Parameters
    ----------
    rows : (k, p) array
        Whitened third differences; the i-th takes in coefficients i to i + 3.
    target : (k,) array
        Their expected values.
    """

    rows: Floats
    target: Floats


@dataclass(frozen=True, eq=False)
class Evidence:
    """Readings, references and prior knowledge of one line.

    The unknowns are the coefficients of B in the recorded frame (T), then m nuisances, each in
    units of its standard uncertainty before the scan.

    Parameters
    ----------
    design : (n, size + m) sparse array
        Increments of the bin means of all passes, one pass after the other, V s per unknown.
    target : (n,) array
        Recorded increments, V s.
    owner : (n,) int array
        Pass that each increment belongs to, as an index into the passes of the line.
    noise : mapping of str to Tridiagonal
        Covariance of the increments by its cause, V² s²: "walk", "read", "jitter". Their sum is
        what the solve used; between passes nothing is correlated.
    references : (k, size + m) array
        Rows of the absolute references, divided by their standard uncertainties.
    reference_target : (k,) array
        Their values, divided likewise.
    prior : (m,) array
        Expected values of the nuisances.
    frame : (size, m) array
        Coefficients at true positions less those in the recorded frame, T per nuisance.
    shift : (2, m) array
        True less recorded position at s is ``shift[0] + s·shift[1]``, m per nuisance.
    roughness : (size - 3,) array
        Variance of the third differences of the coefficients that the prior ended with, T².
    smooth_effect : (size - 3, m) array
        Change of the differences that the prior judges with each nuisance, at fixed
        coefficients at true positions, T per nuisance.
    smooth_origin : (size - 3,) array
        Expected values of those differences, T.
    """

    design: sparse.csr_array
    target: Floats
    owner: Ints
    noise: Mapping[str, Tridiagonal]
    references: Floats
    reference_target: Floats
    prior: Floats
    frame: Floats
    shift: Floats
    roughness: Floats
    smooth_effect: Floats
    smooth_origin: Floats

    @property
    def size(self) -> int:
        """Number of coefficients of B."""
        return len(self.frame)

    def recorded(self, direction: Floats) -> Floats:
        """Turn a direction of the unknowns at true positions into the recorded frame."""
        moved = direction.copy()
        moved[: self.size] -= self.frame @ direction[self.size :]
        return moved

    def noise_variances(self, direction: Floats) -> dict[str, Floats]:
        """Variance that the noise of each pass gives to a linear result, by the cause.

        Parameters
        ----------
        direction : (size + m,) array
            Covariance matrix of the unknowns at true positions times the gradient of the result.

        Returns
        -------
        dict of str to (passes,) array
            By the causes in `NOISES`; the result's unit squared.
        """
        sensitivity = total(self.noise).solve(self.design @ self.recorded(direction))
        return {
            cause: self._by_pass(sensitivity * (part @ sensitivity))
            for cause, part in self.noise.items()
        }

    def _by_pass(self, values: Floats) -> Floats:
        """Sums over the increments of each pass."""
        return np.bincount(self.owner, values).astype(np.float64)

    def reference_variances(self, direction: Floats) -> Floats:
        """Variance that each reference gives to a linear result; as for `noise_variances`."""
        return np.asarray((self.references @ self.recorded(direction)) ** 2)

    def prior_variances(self, direction: Floats) -> Floats:
        """Variance that each nuisance's prior gives to a linear result; as above."""
        return np.asarray(direction[self.size :] ** 2)

    def squares(self, *, recorded: bool = False, about: Floats | None = None) -> Squares:
        """Misfit of readings, references and priors.

        Parameters
        ----------
        recorded : bool
            With the coefficients in the recorded frame; at true positions if not.
        about : (size + m,) array, optional
            Recorded unknowns that v is counted from; zero if not given.

        Returns
        -------
        Squares
            Whitened: independent unit normals at the truth. No smoothness is in it.
        """
        rows = np.asarray(self.design.todense())
        about = np.zeros(rows.shape[1]) if about is None else about
        target, prior = self.target - self.design @ about, self.prior - about[self.size :]
        reference_target = self.reference_target - self.references @ about
        solved = total(self.noise).solve(np.column_stack([rows, target]))
        matrix = self.design.T @ solved[:, :-1] + self.references.T @ self.references
        right = self.design.T @ solved[:, -1] + self.references.T @ reference_target
        constant = float(target @ solved[:, -1] + reference_target @ reference_target)
        nuisances = np.arange(self.size, len(right))
        matrix[nuisances, nuisances] += 1.0
        right[self.size :] += prior
        constant += float(prior @ prior)
        if recorded:
            return Squares(0.5 * (matrix + matrix.T), right, constant)
        # the recorded frame is the true one less the frame's share of the nuisances
        matrix[:, self.size :] -= matrix[:, : self.size] @ self.frame
        matrix[self.size :] -= self.frame.T @ matrix[: self.size]
        right[self.size :] -= self.frame.T @ right[: self.size]
        return Squares(0.5 * (matrix + matrix.T), right, constant)

    def smoothness(self, *, recorded: bool = False) -> Smoothness:
        """The smoothness prior that the map was made with, as rows of its own.

        Parameters
        ----------
        recorded : bool
            As for `squares`.

        Returns
        -------
        Smoothness
            Together with `squares` it gives the covariance of the map.
        """
        scale = 1 / np.sqrt(self.roughness)
        count = len(scale)
        rows = np.zeros((count, self.size + len(self.prior)))
        each = np.arange(count)
        for offset, factor in enumerate((-1.0, 3.0, -3.0, 1.0)):
            rows[each, each + offset] = factor * scale
        rows[:, self.size :] = self.smooth_effect * scale[:, None]
        if recorded:
            rows[:, self.size :] += rows[:, : self.size] @ self.frame
        return Smoothness(rows, self.smooth_origin * scale)
