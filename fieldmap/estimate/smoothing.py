"""Smoothness of the profile: one weight by restricted likelihood, then locally adapted.

The third differences d of B's coefficients are taken as independent normals of a variance
that changes slowly along the line. A fringe is sharp and the rest flat, and a rectangular
coil is blind to any ripple whose period divides its window: with one variance for all, an
invisible ripple as strong as the fringe allows would run through the whole map.

Sources: P. H. C. Eilers & B. D. Marx, Stat. Sci. 11, 89 (1996); D. Ruppert & R. J. Carroll,
Aust. N. Z. J. Stat. 42, 205 (2000); S. N. Wood, J. R. Stat. Soc. B 73, 3 (2011); the update
of a variance by its effective degrees of freedom: D. J. C. MacKay, Neural Comput. 4, 415 (1992).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.estimate.normal import NormalSystem

if TYPE_CHECKING:
    from collections.abc import Callable

    from fieldmap.estimate.model import Information

__all__ = ["Smoother"]

Floats = npt.NDArray[np.float64]

PSEUDO = 1.0  # degrees of freedom within reach below which the data no longer move a variance
HASTE = 1.0  # unresolved differences answer slowly: there a step is taken up to 1 + HASTE times
STIFFEST = 1e9  # of the readings' weights: a stiffer prior changes nothing and costs digits
FLOOR = 1e-10  # least variance, relative to the largest: keeps the system well conditioned


class Smoother:
    """The smoothness prior of one line.

    It judges the profile as the bench recorded it: with the gains and the zero of the stage as
    they were, not as they should be. A larger, shifted or stretched profile has other
    differences; judging the true one would pull gains and offsets that no reading can see away
    from what the campaign states.

    Parameters
    ----------
    roughness : (k, size) sparse array
        Rows that give the differences d of the coefficients.
    unknowns : int
        Number of all unknowns, the coefficients of B first.
    reach : int
        Knots to each side over which a local variance is estimated.
    """

    def __init__(self, roughness: sparse.csr_array, unknowns: int, reach: int) -> None:
        self.roughness = roughness
        reach = min(reach, roughness.shape[0] - 1)
        self.kernel = 1 - np.abs(np.arange(-reach, reach + 1)) / (reach + 1)
        self.variance = np.ones(roughness.shape[0])
        self.least = 0.0
        self.see(np.zeros((roughness.shape[1], unknowns - roughness.shape[1])))

    def see(self, frame: Floats, eta: Floats | None = None) -> None:
        """Set how the recorded profile follows the nuisances.

        Parameters
        ----------
        frame : (size, m) array
            Change of the recorded coefficients of B with each nuisance.
        eta : (m,) array, optional
            Nuisances at which the recorded profile is b itself; zero if not given.
        """
        moved = self.roughness @ frame
        self.rows = sparse.hstack([self.roughness, sparse.csr_array(moved)], format="csr")
        self.origin = np.zeros(len(moved)) if eta is None else moved @ eta

    def heed(self, data: Information) -> None:
        """Keep the prior no stiffer than the readings can feel: a field without any texture."""
        size = self.roughness.shape[1]
        unit = float(self.roughness.multiply(self.roughness).sum())
        self.least = unit / (STIFFEST * float(np.trace(data.matrix[:size, :size])))
        self._soften()

    def _soften(self) -> None:
        largest = float(self.variance.max())
        if largest < self.least:
            self.variance = self.variance * (self.least / largest)

    def precision(self) -> Floats:
        """Precision of the prior over all unknowns."""
        scaled = self.rows.multiply(1 / self.variance[:, None])
        return np.asarray((self.rows.T @ scaled).toarray())

    def right(self) -> Floats:
        """Right side that the prior adds to the normal equations."""
        return np.asarray(self.rows.T @ (self.origin / self.variance))

    def times(self, values: Floats) -> Floats:
        """``precision() @ values`` through the differences themselves.

        The differences of a smooth profile are tiny and their weights huge: the product keeps
        digits that the rounded matrix has lost.
        """
        return np.asarray(self.rows.T @ ((self.rows @ values) / self.variance))

    def start(self, data: Information) -> None:
        """Set one variance for all to the maximum of the restricted likelihood."""
        self.variance = np.ones_like(self.variance)
        unit = self.precision()
        size = self.roughness.shape[1]

        def cost(log_weight: float) -> float:
            try:
                system = NormalSystem(data.matrix + np.exp(log_weight) * unit)
            except np.linalg.LinAlgError:
                return np.inf
            fitted = float(data.right @ system.solve(data.right))
            return system.log_determinant() - len(self.variance) * log_weight - fitted

        share = np.trace(data.matrix[:size, :size]) / np.trace(unit)
        self.variance /= np.exp(_minimise(cost, np.log(share), span=28.0))

    def adapt(self, values: Floats, covariance: Floats) -> None:
        """One step of the local variances towards their restricted likelihood's maximum.

        Within reach of each knot the squares found are compared with the degrees of freedom
        that the data resolve there; where they resolve next to none, the variance stays.

        Parameters
        ----------
        values : (p,) array
            All unknowns.
        covariance : (p, p) array
            Their covariance.
        """
        d = self.rows @ values - self.origin
        spread = self.rows @ covariance
        left = np.asarray(self.rows.multiply(spread).sum(axis=1)).ravel()
        resolved = np.clip(1 - left / self.variance, 0, 1)
        freedom = self._gather(resolved)
        share = freedom / self._gather(np.ones_like(resolved))
        ratio = (self._gather(d**2 / self.variance) + PSEUDO) / (freedom + PSEUDO)
        stepped = self.variance * ratio ** (1 + HASTE * (1 - share))
        self.variance = np.maximum(stepped, FLOOR * stepped.max())
        self._soften()

    def _gather(self, values: Floats) -> Floats:
        """Sum over the neighbours within reach, with triangular weights."""
        reach = len(self.kernel) // 2
        return np.convolve(values, self.kernel)[reach : reach + len(values)]


def _minimise(cost: Callable[[float], float], centre: float, span: float) -> float:
    """Golden-section search for the minimum of a one-humped cost, to 0.1."""
    golden = 0.5 * (np.sqrt(5) - 1)
    low, high = centre - span / 2, centre + span / 2
    inner, outer = high - golden * (high - low), low + golden * (high - low)
    at_inner, at_outer = cost(inner), cost(outer)
    while high - low > 0.1:
        if at_inner <= at_outer:
            high, outer, at_outer = outer, inner, at_inner
            inner = high - golden * (high - low)
            at_inner = cost(inner)
        else:
            low, inner, at_inner = inner, outer, at_outer
            outer = low + golden * (high - low)
            at_outer = cost(outer)
    return float(0.5 * (low + high))
