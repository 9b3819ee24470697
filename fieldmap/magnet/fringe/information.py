"""What the readings of a line say of the field in its fringes, with all the rest eliminated.

The readings, references and priors of a line are a quadratic form of its unknowns. Over the
stretches where a curve of few parameters shall stand for the profile no smoothness is assumed;
elsewhere the profile keeps the smoothness that the map was made with. All unknowns but the
coefficients on the stretches and what displaces all passes alike enter linearly: they are
eliminated once, exactly.

The profile is the recorded one. A shift of the true profile is no spline on the same knots, nor
the slope of an estimate that of a curve: in the recorded frame offset and scale touch the
references only, and the curve is moved to true positions when it is found.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt
from scipy import linalg, sparse

from fieldmap.estimate.normal import NormalSystem
from fieldmap.estimate.spline import DEGREE

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.evidence import Evidence

__all__ = ["Whitened", "displacing", "information_on"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

BLIND: Final = 1e-10  # information, relative to the largest, below which nothing is known

ROUNDING: Final = 1e-13  # relative; rows that are zero but for it


@dataclass(frozen=True, eq=False)
class Whitened:
    """Information on some unknowns: ``rows @ v - target`` is unit normal at the truth.

    Parameters
    ----------
    rows : (r, n) array
        Per unit of the unknown; r is the number of directions that the readings resolve.
    target : (r,) array
        What the readings give.
    """

    rows: Floats
    target: Floats

    def misfit(self, v: Floats) -> float:
        """Chi-square of some values in excess of the best ones'."""
        residual = self.target - self.rows @ v
        return float(residual @ residual)

    def widened(self, excess: Floats) -> Whitened:
        """The same with the unknowns allowed to depart by a covariance of their own."""
        spread = np.eye(len(self.target)) + self.rows @ excess @ self.rows.T
        root = linalg.cholesky(spread, lower=True)
        both = np.column_stack([self.rows, self.target])
        solved = linalg.solve_triangular(root, both, lower=True)
        return Whitened(solved[:, :-1], solved[:, -1])

    def on(self, chosen: slice) -> Whitened:
        """Information on some of the unknowns, the others being anything at all."""
        others = np.delete(self.rows, chosen, axis=1)
        size = np.linalg.norm(others, axis=0)
        basis, scale, _ = np.linalg.svd(others / np.where(size > 0, size, 1.0))
        told = int((scale > ROUNDING * scale.max(initial=0.0)).sum())
        free = basis[:, told:].T
        rows = free @ self.rows[:, chosen]
        return _factored(rows.T @ rows, rows.T @ (free @ self.target))


def displacing(evidence: Evidence) -> Ints:
    """Indices of the nuisances that shift or stretch all passes alike."""
    return np.flatnonzero(evidence.shift.any(axis=0))


def information_on(evidence: Evidence, stretches: Sequence[Ints], about: Floats) -> Whitened:
    """What the readings say of the recorded profile on some stretches.

    Parameters
    ----------
    evidence : Evidence
        Of the line.
    stretches : sequence of int arrays
        Indices of coefficients of B, each array without a gap, no two overlapping.
    about : (size + m,) array
        Unknowns in the recorded frame near the best ones: what is eliminated are small
        deviations from them, which keeps digits.

    Returns
    -------
    Whitened
        On these coefficients in the recorded frame (T), one stretch after the other, then on
        the nuisances of `displacing`, in units of their uncertainty before the scan.

    Raises
    ------
    numpy.linalg.LinAlgError
        The rest is not determined.
    """
    on = np.concatenate(list(stretches))
    chosen = np.concatenate([on, evidence.size + displacing(evidence)])
    squares = evidence.squares(recorded=True, about=about)
    rows, target = _smoothness_beside(evidence, on)
    target = target - rows @ about
    basis = _followed(squares.matrix, rows, chosen)
    # through the factors: weights of differences are huge, and the differences left are tiny
    differences = rows @ basis
    matrix = basis.T @ squares.matrix @ basis + differences.T @ differences
    found = _factored(matrix, basis.T @ squares.right + differences.T @ target)
    return Whitened(found.rows, found.target + found.rows @ about[chosen])


def _smoothness_beside(evidence: Evidence, on: Ints) -> tuple[sparse.csr_array, Floats]:
    """The smoothness prior of all differences that do not lie on the stretches as a whole."""
    smoothness = evidence.smoothness(recorded=True)
    bound = np.zeros(evidence.size, dtype=bool)
    bound[on] = True
    first = np.arange(len(smoothness.rows))
    touched = np.stack([bound[first + offset] for offset in range(DEGREE + 1)])
    kept = ~touched.all(axis=0)
    return sparse.csr_array(smoothness.rows[kept]), smoothness.target[kept]


def _followed(matrix: Floats, rows: sparse.csr_array, chosen: Ints) -> Floats:
    """How all unknowns follow the chosen ones, one column each."""
    rest = np.delete(np.arange(len(matrix)), chosen)
    inner, outer = rows[:, rest], rows[:, chosen]
    core = matrix[np.ix_(rest, rest)]
    system = NormalSystem(core + (inner.T @ inner).toarray())
    border = matrix[np.ix_(rest, chosen)] + (inner.T @ outer).toarray()
    basis = np.zeros((len(matrix), len(chosen)))
    basis[chosen, np.arange(len(chosen))] = 1.0
    basis[rest] = -system.solve(border, lambda x: core @ x + inner.T @ (inner @ x))
    return basis


def _factored(matrix: Floats, right: Floats) -> Whitened:
    """Square root of an information matrix; directions it does not resolve are left out."""
    unit = np.sqrt(np.maximum(np.diagonal(matrix), np.finfo(float).tiny))
    values, vectors = np.linalg.eigh(matrix / np.outer(unit, unit))
    told = values > BLIND * values.max()
    root = np.sqrt(values[told])
    along = vectors[:, told].T
    return Whitened(along * unit * root[:, None], (along @ (right / unit)) / root)
