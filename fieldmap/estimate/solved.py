"""A solved line as its tests need it: every pass linearised, and the factored system."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import linalg

from fieldmap.estimate.noise import total

if TYPE_CHECKING:
    from collections.abc import Sequence

    from scipy import sparse

    from fieldmap.estimate.frame import Frame
    from fieldmap.estimate.linearised import Linearised
    from fieldmap.estimate.model import PassModel, State
    from fieldmap.estimate.noise import Tridiagonal
    from fieldmap.estimate.normal import NormalSystem
    from fieldmap.readings.passes import Reference

__all__ = ["Solved"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Solved:
    """All readings of a line and the last solve of them, in the recorded frame.

    Parameters
    ----------
    models : sequence of PassModel
        The passes.
    references : sequence
        Absolute references of the line.
    linearised : Linearised
        Rows and noise at the last solve.
    system : NormalSystem
        The normal equations, priors and smoothness included.
    right : (p,) array
        Their right side.
    state : State
        The solution.
    frame : Frame
        The recorded frame.
    jitter : float
        Jitter of a position that was taken, m.
    """

    models: Sequence[PassModel]
    references: Sequence[Reference]
    linearised: Linearised
    system: NormalSystem
    right: Floats
    state: State
    frame: Frame
    jitter: float

    @property
    def values(self) -> Floats:
        """Coefficients of B, then the nuisances."""
        return np.concatenate([self.state.b, self.state.eta])

    def design(self, number: int) -> sparse.csr_array:
        """Rows of one pass."""
        return self.linearised.passes[number].design

    def covariance(self, number: int) -> Tridiagonal:
        """Covariance of the increments of one pass."""
        return total(self.linearised.noise[number])

    def residual(self, number: int) -> Floats:
        """Increments of one pass less what the solution makes of them, V s."""
        rows = self.linearised.passes[number]
        return np.asarray(rows.target - rows.design @ self.values)

    def half_spread(self, gradient: Floats) -> Floats:
        """Columns whose squares sum to the variance of ``gradient.T @ unknowns``.

        Parameters
        ----------
        gradient : (p, k) array
            One direction a column.

        Returns
        -------
        (p, k) array
        """
        scaled = self.system.scale[:, None] * gradient
        return np.asarray(
            linalg.solve_triangular(self.system.factor, scaled, lower=True, check_finite=False)
        )
