"""What a fit of one line gives: the field, its covariance, and how each pass agrees with it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.fieldline import FieldLine

if TYPE_CHECKING:
    from fieldmap.estimate.evidence import Evidence
    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.estimate.solved import Solved
    from fieldmap.estimate.spline import UniformSpline
    from fieldmap.estimate.variance import NoiseLevel
    from fieldmap.readings.passes import Pass

__all__ = ["LineFit", "PassFit"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class PassFit:
    """How one pass agrees with the joint solution.

    Parameters
    ----------
    one : Pass
        The pass.
    position : (n,) array
        Middle of each pair of neighbouring bins, m.
    residual : (n,) array
        Whitened residuals of the bin increments: independent unit normals if all is well.
    freedom : float
        Expected sum of their squares: n less what the pass gave to the solution.
    level : NoiseLevel
        Noise used.
    """

    one: Pass
    position: Floats
    residual: Floats
    freedom: float
    level: NoiseLevel

    @property
    def square(self) -> float:
        """Sum of the squared residuals."""
        return float(self.residual @ self.residual)


@dataclass(frozen=True, eq=False)
class LineFit:
    """The field along one line and all it was estimated with.

    Parameters
    ----------
    spline : UniformSpline
        The knots.
    unknowns : list of Nuisance
        What follows the coefficients in `values`.
    values : (p,) array
        Coefficients of B (T), then the nuisances (SI).
    covariance : (p, p) array
        Covariance of `values`.
    roughness : (size - 3,) array
        Variance of the third differences of B's coefficients that the prior ended with, T^2.
    passes : list of PassFit
        Residuals of each pass.
    evidence : Evidence
        Readings, references and priors as the last solve used them.
    solved : Solved, optional
        The same with the factored system, for tests of the readings; none where it was not kept.
    """

    spline: UniformSpline
    unknowns: list[Nuisance]
    values: Floats
    covariance: Floats
    roughness: Floats
    passes: list[PassFit]
    evidence: Evidence
    solved: Solved | None = None

    def line(self, x: float, y: float, low: float, high: float) -> FieldLine:
        """The field alone, as a line at (x, y) mapped from low to high (m)."""
        n = self.spline.size
        b, covariance = self.values[:n], self.covariance[:n, :n]
        return FieldLine(x, y, low, high, self.spline, b, covariance)

    def coefficients_for(self, spline: UniformSpline) -> Floats:
        """Coefficients on other knots with nearly the same field: B at each one's middle."""
        inside = np.clip(spline.middles(), self.spline.start, self.spline.stop)
        return np.asarray(self.spline.field_rows(inside) @ self.values[: self.spline.size])

    def roughness_for(self, spline: UniformSpline) -> Floats:
        """Variance of the differences on other knots; it grows as the fifth power of a spacing."""
        own, other = (
            s.start + (np.arange(s.size - 3) + 0.5) * s.spacing for s in (self.spline, spline)
        )
        ratio = spline.spacing / self.spline.spacing
        return np.asarray(np.exp(np.interp(other, own, np.log(self.roughness))) * ratio**5)
