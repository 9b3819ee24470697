"""The Enge curve: the shape of a fringe as a polynomial in an exponent.

``F(ξ) = 1/(1 + exp Σ c_i ξ^i)``, ξ being the distance outwards in units of the full gap or bore.
Where the origin of ξ lies is a matter of convention: here, as in published sets, it is the field
boundary, where a sharp edge with the same integral would stand. Moving the origin is exact: the
polynomial is expanded about another point.

Source: H. A. Enge, *Deflecting magnets*, in Focusing of Charged Particles, ed. A. Septier,
Academic Press 1967.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import comb
from typing import Final

import numpy as np
import numpy.typing as npt

__all__ = ["Canonical", "EngeCurve"]

Floats = npt.NDArray[np.float64]

SURE: Final = 14.0  # exponent beyond which the curve is 0 or 1 to 1e-6
SATURATED: Final = 36.0  # exponent beyond which it is so to the last digit
OVERFLOW: Final = 700.0
REAL: Final = 1e-8  # imaginary part, relative, below which a root counts as real
NODES, WEIGHTS = np.polynomial.legendre.leggauss(10)
CELLS: Final = 96


@dataclass(frozen=True, eq=False)
class Canonical:
    """A curve with its origin at the field boundary.

    Parameters
    ----------
    coefficients : (k,) array
        c_0, c_1, …, about the boundary.
    boundary : float
        Where the boundary was, in gaps from the curve's former origin outwards.
    integral : float
        ``∫ F(1 - F) dξ``.
    jacobian : (k + 2, k) array
        Derivatives of the coefficients, the boundary and the integral with respect to the former
        coefficients.
    """

    coefficients: Floats
    boundary: float
    integral: float
    jacobian: Floats


@dataclass(frozen=True, eq=False)
class EngeCurve:
    """One Enge curve.

    Parameters
    ----------
    coefficients : (k,) array
        c_0, c_1, …; at least two.

    Examples
    --------
    >>> curve = EngeCurve(np.array([0.4, 2.0]))
    >>> found = curve.canonical()
    >>> round(found.boundary, 9), round(found.integral, 9)
    (-0.2, 0.5)
    >>> round(float(curve.value(np.array([-0.2]))[0]), 9)
    0.5
    """

    coefficients: Floats

    @property
    def order(self) -> int:
        """Highest power of ξ."""
        return len(self.coefficients) - 1

    def exponent(self, xi: Floats) -> Floats:
        """The polynomial at ξ."""
        return np.asarray(np.polynomial.polynomial.polyval(xi, self.coefficients))

    def value(self, xi: Floats) -> Floats:
        """F at ξ: 1 inside, 0 outside."""
        return _falling(self.exponent(xi))

    def on(self, powers: Floats) -> tuple[Floats, Floats]:
        """F and its derivatives with respect to the coefficients.

        Parameters
        ----------
        powers : (n, k) array
            Powers of ξ from 0 on, column by column.

        Returns
        -------
        value : (n,) array
        gradient : (n, k) array
        """
        value = _falling(powers @ self.coefficients)
        return value, (value * (value - 1))[:, None] * powers

    def shifted(self, step: float) -> Floats:
        """Coefficients about the point ξ = step: the same curve."""
        return np.asarray(_taylor(self.order, step) @ self.coefficients)

    def falling_range(self) -> tuple[float, float]:
        """Between which ξ the curve falls without a rise, about its middle nearest to ξ = 0.

        Infinite where it falls for ever; nan where it falls through no middle at all.
        """
        slope = self.coefficients[1:] * np.arange(1, len(self.coefficients))
        middles = _real_roots(self.coefficients)
        middles = middles[np.polynomial.polynomial.polyval(middles, slope) > 0]
        if len(middles) == 0:
            return np.nan, np.nan
        middle = middles[np.abs(middles).argmin()]
        turns = _real_roots(slope)
        return (
            float(turns[turns < middle].max(initial=-np.inf)),
            float(turns[turns > middle].min(initial=np.inf)),
        )

    def is_fringe(self, inner: float, outer: float) -> bool:
        """Whether the curve leads from full field to none, and falls over a whole stretch.

        Parameters
        ----------
        inner, outer : float
            Ends of the stretch, in gaps outwards.

        Returns
        -------
        bool
            False if the curve turns round before it is 0 or 1 to 1e-6, or rises by more than
            that within the stretch.
        """
        low, high = self.falling_range()
        if np.isnan(low):
            return False
        full = low == -np.inf or self.exponent(np.array(low)) <= -SURE
        none = high == np.inf or self.exponent(np.array(high)) >= SURE
        rise = np.diff(self.value(np.linspace(inner, outer, 301))).max()
        return bool(full and none and rise < np.exp(-SURE))

    def canonical(self) -> Canonical:
        """The curve about its field boundary, with the derivatives of all that is found.

        Returns
        -------
        Canonical

        Raises
        ------
        ValueError
            The curve does not fall.
        """
        xi, weight = self._nodes()
        value, powers = self.value(xi), self._powers(xi)
        bell = weight * value * (1 - value)
        # ∫ F dξ from the first node's cell on, where F is 1
        boundary = float(self._inside + weight @ value)
        about = self.shifted(boundary)
        to_boundary = -(bell @ powers)
        drift = np.append(about[1:], 0.0) * np.arange(1, len(about) + 1)
        return Canonical(
            coefficients=about,
            boundary=boundary,
            integral=float(bell.sum()),
            jacobian=np.vstack(
                [
                    _taylor(self.order, boundary) + np.outer(drift, to_boundary),
                    to_boundary,
                    -((bell * (1 - 2 * value)) @ powers),
                ]
            ),
        )

    @property
    def _inside(self) -> float:
        """Where the curve is 1 to the last digit, or turns round."""
        return self._limits()[0]

    def _limits(self) -> tuple[float, float]:
        low, high = self.falling_range()
        if np.isnan(low):
            raise ValueError("the curve falls nowhere")
        full = _real_roots(self.coefficients, -SATURATED)
        none = _real_roots(self.coefficients, SATURATED)
        middles = _real_roots(self.coefficients)
        centre = float(middles[(middles > low) & (middles < high)][0])
        return (
            float(full[(full < centre) & (full > low)].max(initial=low)),
            float(none[(none > centre) & (none < high)].min(initial=high)),
        )

    def _nodes(self) -> tuple[Floats, Floats]:
        """Nodes and weights of a composite Gauss-Legendre rule over the fringe."""
        edges = np.linspace(*self._limits(), CELLS + 1)
        half = 0.5 * np.diff(edges)
        xi = 0.5 * (edges[1:] + edges[:-1])[:, None] + half[:, None] * NODES
        return xi.ravel(), (half[:, None] * WEIGHTS).ravel()

    def _powers(self, xi: Floats) -> Floats:
        return np.vander(xi, len(self.coefficients), increasing=True)


def _falling(exponent: Floats) -> Floats:
    return np.asarray(1 / (1 + np.exp(np.minimum(exponent, OVERFLOW))))


def _taylor(order: int, step: float) -> Floats:
    """Matrix that expands a polynomial about another point."""
    matrix = np.zeros((order + 1, order + 1))
    for power in range(order + 1):
        for lower in range(power + 1):
            matrix[lower, power] = comb(power, lower) * step ** (power - lower)
    return matrix


def _real_roots(coefficients: Floats, level: float = 0.0) -> Floats:
    """Where a polynomial takes a value, in rising order."""
    roots = np.polynomial.polynomial.polyroots([coefficients[0] - level, *coefficients[1:]])
    real = np.abs(np.imag(roots)) < REAL * (1 + np.abs(roots))
    return np.sort(np.real(roots[real]))
