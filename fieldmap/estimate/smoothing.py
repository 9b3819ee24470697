"""Smoothness of the profile: one weight by restricted likelihood, then locally adapted.

The third differences d of B's coefficients are taken as independent normals of variance
``1/(weight * w_j)``. A fringe is sharp and the rest flat, and a rectangular coil is blind to
any ripple whose period divides its window: with one weight for all, an invisible ripple as
strong as the fringe allows would run through the whole map. So w_j follows the data.

Sources: P. H. C. Eilers & B. D. Marx, Stat. Sci. 11, 89 (1996); D. Ruppert & R. J. Carroll,
Aust. N. Z. J. Stat. 42, 205 (2000); S. N. Wood, J. R. Stat. Soc. B 73, 3 (2011).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.normal import NormalSystem

if TYPE_CHECKING:
    from collections.abc import Callable

    from scipy import sparse

    from fieldmap.estimate.model import Information

__all__ = ["Smoother"]

Floats = npt.NDArray[np.float64]

REACH = 4  # knots to each side over which the local variance is averaged
PSEUDO = 1.0
BOOST = 2.0
FLOOR = 1e-10


class Smoother:
    """The smoothness prior of one line and its weights.

    Parameters
    ----------
    roughness : (k, size) sparse array
        Rows that give the differences d.
    unknowns : int
        Number of all unknowns, the coefficients of B first.
    """

    def __init__(self, roughness: sparse.csr_array, unknowns: int, reach: int = 4) -> None:
        self.roughness = roughness
        self.unknowns = unknowns
        self.reach = reach
        self.local = np.ones(roughness.shape[0])
        self.weight = 0.0

    def penalty(self) -> Floats:
        """Precision of the prior at weight one, over all unknowns."""
        size = self.roughness.shape[1]
        full = np.zeros((self.unknowns, self.unknowns))
        scaled = self.roughness.multiply(self.local[:, None])
        full[:size, :size] = (self.roughness.T @ scaled).toarray()
        return full

    def choose_weight(self, data: Information) -> None:
        """Set the weight to the maximum of the restricted likelihood."""
        penalty = self.penalty()
        size = self.roughness.shape[1]
        share = np.trace(data.matrix[:size, :size]) / np.trace(penalty)

        def cost(log_weight: float) -> float:
            weight = float(np.exp(log_weight))
            try:
                system = NormalSystem(data.matrix + weight * penalty)
            except np.linalg.LinAlgError:
                return np.inf
            fitted = float(data.right @ system.solve(data.right))
            return system.log_determinant() - len(self.local) * log_weight - fitted

        if self.weight:
            centre, span = np.log(self.weight), 4.0
        else:
            centre, span = np.log(share), 28.0
        self.weight = float(np.exp(_minimise(cost, centre, span)))

    def adapt(self, b: Floats, covariance: Floats) -> None:
        """Set the local weights from the differences found and their variances."""
        d = self.roughness @ b
        size = self.roughness.shape[1]
        spread = self.roughness @ covariance[:size, :size]
        variance = np.asarray(self.roughness.multiply(spread).sum(axis=1)).ravel()
        prior = 1 / (self.weight * self.local)
        found = self._gather(d**2 / prior)
        resolved = self._gather(np.clip(1 - variance / prior, 0, 1))
        power = 1 + BOOST * (1 - resolved / self._gather(np.ones(len(d))))
        ratio = (found + PSEUDO) / (resolved + PSEUDO)
        prior = prior * ratio**power
        self.local = 1 / np.maximum(prior, FLOOR * prior.max())
        self.weight = 1.0

    def _gather(self, values: Floats) -> Floats:
        reach = min(self.reach, len(values) - 1)
        kernel = 1 - np.abs(np.arange(-reach, reach + 1)) / (reach + 1)
        return np.convolve(values, kernel, mode="full")[reach : reach + len(values)]


def _minimise(cost: Callable[[float], float], centre: float, span: float) -> float:
    """Golden-section search for the minimum of a smooth, one-humped cost."""
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
