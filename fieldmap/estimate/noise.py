"""Noise of an integrator: the tridiagonal covariance of bin-mean increments, and its estimate.

Integrator noise is a random walk (white input voltage) plus independent read noise plus the
position jitter seen through the slope. Increments of successive bin means know nothing of the
unknown constant, and only neighbours are correlated.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy.linalg import lapack

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.estimate.bins import Bins

__all__ = ["Tridiagonal", "allan_deviation", "read_part", "stacked", "total", "walk_part"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Tridiagonal:
    """A symmetric tridiagonal matrix.

    Parameters
    ----------
    diagonal : (n,) array
        Main diagonal.
    off : (n - 1,) array
        First off-diagonal.
    """

    diagonal: Floats
    off: Floats

    def __add__(self, other: Tridiagonal) -> Tridiagonal:
        return Tridiagonal(self.diagonal + other.diagonal, self.off + other.off)

    def __mul__(self, factor: float) -> Tridiagonal:
        return Tridiagonal(self.diagonal * factor, self.off * factor)

    __rmul__ = __mul__

    def __matmul__(self, right: Floats) -> Floats:
        """Product with a vector or the columns of a matrix."""
        diagonal, off = self.diagonal, self.off
        if right.ndim > 1:
            diagonal, off = diagonal[:, None], off[:, None]
        product = diagonal * right
        product[:-1] += off * right[1:]
        product[1:] += off * right[:-1]
        return np.asarray(product)

    def factor(self) -> tuple[Floats, Floats]:
        """Pivots and multipliers of the LDLᵀ factorisation."""
        if len(self.off) == 0:  # the library takes no empty off-diagonal
            return self.diagonal, self.off
        pivots, multipliers, info = lapack.dpttrf(self.diagonal, self.off)
        if info:
            raise np.linalg.LinAlgError("the covariance of the readings is not positive definite")
        return pivots, multipliers

    def solve(self, right: Floats) -> Floats:
        """Solution of ``self @ x = right`` in O(n) a column."""
        pivots, multipliers = self.factor()
        if len(self.off) == 0:
            return np.asarray(right / (pivots[:, None] if right.ndim > 1 else pivots))
        solution, _ = lapack.dpttrs(pivots, multipliers, right)
        return np.asarray(solution)

    def whiten(self, right: Floats) -> Floats:
        """Turn a vector, or columns, with this covariance into independent unit normals."""
        pivots, multipliers = self.factor()
        white = np.array(right, dtype=float)
        for i, multiplier in enumerate(multipliers.tolist()):
            white[i + 1] -= multiplier * white[i]
        return np.asarray((white.T / np.sqrt(pivots)).T)

    def log_determinant(self) -> float:
        """Natural logarithm of the determinant."""
        return float(np.log(self.factor()[0]).sum())

    def inverse_bands(self) -> tuple[Floats, Floats]:
        """Main and first off-diagonal of the inverse, in O(n).

        Source: G. Meurant, SIAM J. Matrix Anal. Appl. 13, 707 (1992).
        """
        forward, multipliers = self.factor()
        backward = Tridiagonal(self.diagonal[::-1].copy(), self.off[::-1].copy()).factor()[0][::-1]
        main = 1 / (forward + backward - self.diagonal)
        return main, -multipliers * main[1:]


def total(parts: Mapping[str, Tridiagonal]) -> Tridiagonal:
    """Sum of covariances that stand by their causes."""
    first, *others = parts.values()
    for other in others:
        first = first + other
    return first


def stacked(blocks: Sequence[Tridiagonal]) -> Tridiagonal:
    """Covariance of several passes end to end, with nothing correlated between them."""
    diagonal = np.concatenate([block.diagonal for block in blocks])
    off = np.concatenate([np.append(block.off, 0.0) for block in blocks])
    return Tridiagonal(diagonal, off[:-1])


def walk_part(bins: Bins) -> Tridiagonal:
    """Covariance of the increments for a random walk of 1 V s per root second.

    Parameters
    ----------
    bins : Bins
        n bins.

    Returns
    -------
    Tridiagonal
        (n - 1, n - 1), V² s²; the design's C for σ_w = 1 and σ_r = 0.
    """
    bridge = bins.bridge
    diagonal = np.diff(bins.time) - bridge[:-1] - bridge[1:]
    return Tridiagonal(diagonal, bridge[1:-1].copy())


def read_part(bins: Bins, variance: Floats) -> Tridiagonal:
    """Covariance of the increments for independent noise of the single readings.

    Parameters
    ----------
    bins : Bins
        n bins.
    variance : (n,) array
        Variance of one reading in each bin, V² s².

    Returns
    -------
    Tridiagonal
        (n - 1, n - 1), V² s²; the design's C for σ_w = 0.
    """
    mean_variance = variance / bins.count
    return Tridiagonal(mean_variance[:-1] + mean_variance[1:], -mean_variance[1:-1])


def allan_deviation(values: Floats, size: int, *, overlapping: bool = True) -> float:
    """Allan deviation of evenly spaced readings averaged over `size` of them.

    For a still probe, applied to the flux increments divided by the sampling time (a voltage),
    it tells the walk noise: σ_w = adev * √(averaging time).

    Parameters
    ----------
    values : (n,) array
        Readings, any unit.
    size : int
        Readings in one average.
    overlapping : bool
        Use every start, not only every `size`-th.

    Returns
    -------
    float
        In the unit of the readings; nan where fewer than two averages fit.

    Examples
    --------
    >>> round(allan_deviation(np.array([1.0, 2.0, 1.0, 2.0]), 1), 6)
    0.707107

    Notes
    -----
    Source: W. J. Riley, *Handbook of Frequency Stability Analysis*, NIST SP 1065 (2008), 5.2.
    """
    total = np.concatenate([[0.0], np.cumsum(np.asarray(values, dtype=float))])
    means = (total[size:] - total[:-size]) / size
    if not overlapping:
        means = means[::size]
        steps = np.diff(means)
    else:
        steps = means[size:] - means[:-size]
    return float(np.sqrt(0.5 * np.mean(steps**2))) if len(steps) else float("nan")
