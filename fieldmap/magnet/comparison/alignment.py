"""Shift and scale between two profiles, by generalised least squares, and what they leave.

With the first profile B and the second O, both splines with covariances, the model is
``B(z) = (1 + g) O(z - t)`` on points about a knot apart. The covariance V of the differences
follows from both; for the best t and g the differences are weighed by its inverse.

Source: generalised least squares after A. C. Aitken, *Proc. R. Soc. Edinb.* 55 (1935) 42;
simultaneous bands by the maximum of the studentised process, J. Sun and C. Loader, *Ann.
Statist.* 22 (1994) 1328 (memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt
from scipy import linalg

from fieldmap.errors import RefusedError

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.magnet.comparison.position_errors import PositionErrors

__all__ = ["Alignment", "CommonErrors", "Pair", "align", "band_factor", "first_shift"]

Floats = npt.NDArray[np.float64]

ROUNDS: Final = 40
SETTLED: Final = 1e-3  # of the standard uncertainty
NUGGET: Final = 0.3  # of u, see `_weights`
FARTHEST: Final = 0.25  # of the common range: how far a shift is looked for
TRIALS: Final = 401  # shifts of the first search
DRAWS: Final = 4000
COVERED: Final = 0.95
SEED: Final = 7_411  # the same profiles give the same digits


@dataclass(frozen=True, eq=False)
class CommonErrors:
    """Errors that two maps of one bench share, each of unit variance.

    Parameters
    ----------
    first, second : (size, k) arrays
        What each does to the coefficients of the two profiles, T.
    first_moves, second_moves : (m, k) arrays, optional
        What each does to the position errors in `Pair.moves`.
    """

    first: Floats
    second: Floats
    first_moves: Floats | None = None
    second_moves: Floats | None = None


@dataclass(frozen=True, eq=False)
class Pair:
    """Two profiles with the errors that they share.

    Parameters
    ----------
    first, second : FieldLine
        The profiles.
    common : CommonErrors, optional
        Errors that both have in common.
    loose : float
        How far the second may be off beyond its covariance, T: for the weights only.
    moves : tuple of PositionErrors or None
        What moves each of them as a whole; None for a profile that is no map.
    """

    first: FieldLine
    second: FieldLine
    common: CommonErrors | None = None
    loose: float = 0.0
    moves: tuple[PositionErrors | None, PositionErrors | None] = (None, None)

    def difference(self, s: Floats, shift: float = 0.0, scale: float = 0.0) -> Floats:
        """First less the second as moved and enlarged, T."""
        return self.first.field(s) - (1 + scale) * self.second.field(s - shift)

    def slopes(self, s: Floats, shift: float, scale: float) -> Floats:
        """Derivatives of the moved and enlarged second by shift and scale: (n, 2)."""
        moved = s - shift
        return np.stack(
            [-(1 + scale) * self.second.field(moved, 1), self.second.field(moved)], axis=1
        )

    def covariance(self, s: Floats, shift: float = 0.0, scale: float = 0.0) -> Floats:
        """Covariance of the differences, T^2."""
        one = self.first.spline.field_rows(s)
        other = self.second.spline.field_rows(s - shift)
        spread = one @ self.first.covariance @ one.T
        spread += (1 + scale) ** 2 * other @ self.second.covariance @ other.T
        mine, theirs = self.moves
        if mine is not None:
            spread += mine.correction(one, s)
        if theirs is not None:
            spread += (1 + scale) ** 2 * theirs.correction(other, s - shift)
        if self.common is None:
            return np.asarray(spread)
        first, second = one @ self.common.first, (1 + scale) * other @ self.common.second
        if mine is not None and self.common.first_moves is not None:
            first += mine.mismatch(one, s) @ self.common.first_moves
        if theirs is not None and self.common.second_moves is not None:
            moved = theirs.mismatch(other, s - shift) @ self.common.second_moves
            second += (1 + scale) * moved
        mixed = first @ second.T
        return np.asarray(spread - mixed - mixed.T)

    def variance(self, one: Floats, two: Floats) -> float:
        """Variance of the difference of two results, by their gradients on either profile."""
        own = one @ self.first.covariance @ one + two @ self.second.covariance @ two
        if self.common is None:
            return float(own)
        return float(own - 2 * (one @ self.common.first) @ (two @ self.common.second))


@dataclass(frozen=True, eq=False)
class Alignment:
    """The best shift and scale.

    Parameters
    ----------
    shift : float
        m.
    scale : float
        A share.
    covariance : (2, 2) array
        Of both.
    difference : (n,) array
        What they leave, T.
    spread : (n, n) array
        Its covariance, T^2: smaller than that before, as two of its directions are used up.
    """

    shift: float
    scale: float
    covariance: Floats
    difference: Floats
    spread: Floats


def align(pair: Pair, s: Floats, start: float) -> Alignment:
    """Fit shift and scale.

    Parameters
    ----------
    pair : Pair
        The profiles.
    s : (n,) array
        Points at which they are compared, m.
    start : float
        Shift to start from, m.

    Returns
    -------
    Alignment

    Raises
    ------
    RefusedError
        ``not-aligned``: the profiles do not determine shift and scale.
    """
    values = np.array([start, 0.0])
    length = float(s[-1] - s[0])
    for _ in range(ROUNDS):
        difference, slopes = pair.difference(s, *values), pair.slopes(s, *values)
        spread = pair.covariance(s, *values)
        gain = _estimator(slopes, _weights(spread, slopes, pair.loose))
        covariance = gain @ spread @ gain.T
        u = np.sqrt(np.maximum(np.diagonal(covariance), 0.0))
        if not np.isfinite(u).all() or u[0] > FARTHEST * length:
            break
        step = gain @ difference
        if (np.abs(step) <= np.maximum(SETTLED * u, [1e-12, 1e-12])).all():
            left = np.eye(len(s)) - slopes @ gain
            return Alignment(
                float(values[0]), float(values[1]), covariance, difference, left @ spread @ left.T
            )
        values = values + step
        if abs(values[0] - start) > FARTHEST * length:
            break
    raise RefusedError(
        "not-aligned",
        "comparison",
        "the profiles do not determine a shift and a scale between them; compare a part of the "
        "line where the field rises or falls, or compare without aligning.",
    )


def first_shift(pair: Pair, low: float, high: float) -> float:
    """The shift of a coarse search, by plain least squares with the best scale for each (m)."""
    farthest = FARTHEST * (high - low)
    s = np.linspace(low, high, TRIALS)
    b = pair.first.field(s)
    lattice = np.linspace(pair.second.low, pair.second.high, 4 * TRIALS)
    values = pair.second.field(lattice)
    best, place = np.inf, 0.0
    for shift in np.linspace(-farthest, farthest, TRIALS):
        moved = s - shift
        common = (moved >= pair.second.low) & (moved <= pair.second.high)
        other = np.interp(moved[common], lattice, values)
        square, power = float(other @ other), float(b[common] @ b[common])
        if common.sum() < TRIALS / 2 or square == 0 or power == 0:
            continue
        rest = 1 - float(b[common] @ other) ** 2 / (square * power)
        if rest < best:
            best, place = rest, float(shift)
    return place


def band_factor(spread: Floats, difference_scale: float = 0.0) -> tuple[Floats, float]:
    """Standard uncertainty of each point and the factor of the simultaneous 95 % band.

    Parameters
    ----------
    spread : (n, n) array
        Covariance of the differences.
    difference_scale : float
        Standard uncertainty below which a point counts as having this one.

    Returns
    -------
    u : (n,) array
        Square roots of the diagonal, none below `difference_scale`.
    k : float
        95 % quantile of the largest |d/u| over profiles drawn from the covariance, with a
        generator of its own.

    Examples
    --------
    >>> u, k = band_factor(np.eye(1))
    >>> 1.9 < k < 2.02
    True
    """
    u = np.maximum(np.sqrt(np.maximum(np.diagonal(spread), 0.0)), difference_scale)
    safe = np.where(u > 0, u, 1.0)
    values, vectors = np.linalg.eigh(spread / np.outer(safe, safe))
    kept = values > 1e-10 * max(float(values[-1]), 0.0)
    root = vectors[:, kept] * np.sqrt(values[kept])
    draws = np.random.default_rng(SEED).standard_normal((DRAWS, int(kept.sum())))
    largest = np.abs(draws @ root.T).max(axis=1)
    return u, float(np.quantile(largest, COVERED))


def _estimator(slopes: Floats, weights: Floats) -> Floats:
    """Matrix that takes differences to shift and scale: (2, n)."""
    try:
        factor = linalg.cho_factor(weights)
        weighed = linalg.cho_solve(factor, slopes)
        return np.asarray(np.linalg.solve(slopes.T @ weighed, weighed.T))
    except np.linalg.LinAlgError:
        return np.full((2, len(slopes)), np.nan)


def _weights(spread: Floats, slopes: Floats, loose: float) -> Floats:
    """The covariance that differences are weighed by: never nearly singular.

    Smooth profiles have hardly any error in many directions, and weighing by the bare inverse
    would trust the tiniest of them most. So three tenths of each point's u, independent from point
    to point, is added to the weights; the uncertainty of shift and scale is that of the true
    covariance. The u meant is what is left beside the directions of shift and scale, which
    the estimate does not depend on; a position error common to a map would swamp it.
    """
    basis, _ = np.linalg.qr(slopes)
    left = np.eye(len(spread)) - basis @ basis.T
    local = np.maximum(np.diagonal(left @ spread @ left), 0.0)
    least = max(float(local.mean()), 1e-24 * float(np.abs(slopes[:, 1]).max()) ** 2, 1e-300)
    nugget = NUGGET**2 * np.maximum(local, 0.01 * least) + loose**2
    return np.asarray(spread + np.diag(nugget))
