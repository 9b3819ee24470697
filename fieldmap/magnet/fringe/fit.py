"""Enge curves fitted to the information on the fringes: at one end, or at both at once.

The field of a magnet with two ends is ``B0 F_in F_out``: on the stretch of one end the other
curve counts as a factor, which matters for short magnets. Each end has a B0 of its own, for an
iron magnet's plateau need not be the same at both. The coefficients of the spline follow from
the curves so that integrals are kept (weights 1/sinc⁴ to the sixth order in the knot spacing).

Source of the damped steps: D. W. Marquardt, J. Soc. Indust. Appl. Math. 11, 431 (1963).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt
from scipy import linalg

from fieldmap.magnet.fringe.enge import EngeCurve

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from fieldmap.estimate.spline import UniformSpline
    from fieldmap.magnet.fringe.information import Whitened

__all__ = ["Solution", "Stretch", "first_curve", "fit_curves", "own_factor"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

# 1/sinc(w/2)⁴ as 1 + y/6 + 7 y²/240 + 41 y³/7560, y being minus the second difference
_SECOND: Final = np.array([-1.0, 2.0, -1.0])
_FOURTH: Final = np.convolve(_SECOND, _SECOND)
TAPS: Final = (
    np.pad([1.0], 3)
    + np.pad(_SECOND, 2) / 6
    + np.pad(_FOURTH, 1) * 7 / 240
    + np.convolve(_FOURTH, _SECOND) * 41 / 7560
)
MARGIN: Final = len(TAPS) // 2
FARTHEST: Final = 8.0  # gaps inside one end beyond which its curve is held
FAINTEST: Final = 1e-3  # share of B0 below which the profile tells no exponent
ROUNDS: Final = 40
CONVERGED: Final = 1e-7  # decrease of chi-square still expected, relative
FIRST_DAMPING: Final = 1e-3
STILLEST: Final = 1e-30  # of the largest slope: a parameter that moves nothing stays where it is


@dataclass(frozen=True, eq=False)
class Stretch:
    """Where a curve stands for the profile at one end.

    Parameters
    ----------
    outward : int
        1 at the end in the direction of travel, -1 at the other.
    origin : float
        Where ξ counts from while fitting, m.
    gap : float
        Unit of ξ, m.
    level : float
        About the field inside, T: unit of B0 while fitting.
    spline : UniformSpline
        The knots.
    indices : int array
        Coefficients of B on the stretch, without a gap.
    profile : (n,) array
        Field of the map where these are centred, T.
    """

    outward: int
    origin: float
    gap: float
    level: float
    spline: UniformSpline
    indices: Ints
    profile: Floats

    def xi(self, s: Floats) -> Floats:
        """Distance outwards in gaps of positions s (m)."""
        return np.asarray(self.outward * (s - self.origin) / self.gap)

    def points(self) -> Floats:
        """Where the curve is needed for the coefficients of the stretch, m."""
        first, last = int(self.indices[0]) - MARGIN, int(self.indices[-1]) + MARGIN
        return np.asarray(
            self.spline.start + (np.arange(first, last + 1) - 1) * self.spline.spacing
        )

    def reach(self) -> tuple[float, float]:
        """First and last ξ of the stretch."""
        low, high = sorted(self.xi(self.spline.middles()[self.indices[[0, -1]]]).tolist())
        return low, high

    def ends(self) -> tuple[float, float]:
        """First and last position of the stretch, m."""
        low, high = self.spline.middles()[self.indices[[0, -1]]].tolist()
        return low, high


@dataclass(frozen=True, eq=False)
class Solution:
    """Curves that agree best with the information.

    Parameters
    ----------
    parameters : tuple of (k,) arrays
        For each stretch B0 in units of its level, then the coefficients about its origin.
    covariance : (sum of k + m, sum of k + m) array
        Of all parameters, one stretch after the other, then of the other unknowns.
    linear : (m,) array
        The other unknowns.
    values : (n,) array
        Coefficients of B on the stretches that follow, T, then the other unknowns.
    chi_square : float
        Misfit in excess of the free profile's.
    converged : bool
        Whether the fit came to rest.
    """

    parameters: tuple[Floats, ...]
    covariance: Floats
    linear: Floats
    values: Floats
    chi_square: float
    converged: bool

    def curve(self, index: int) -> EngeCurve:
        """The curve of one stretch, about its origin."""
        return EngeCurve(self.parameters[index][1:])


def fit_curves(
    information: Whitened,
    stretches: Sequence[Stretch],
    start: Sequence[Floats],
    factors: Sequence[Floats] | None = None,
) -> Solution:
    """Fit one curve to each stretch.

    Parameters
    ----------
    information : Whitened
        On the coefficients of the stretches, one after the other, then on m other unknowns.
    stretches : sequence of Stretch
        One or two.
    start : sequence of (k,) arrays
        As for `Solution`; their lengths set the orders.
    factors : sequence of arrays, optional
        Of each stretch, what its field is multiplied by besides, at its points; 1 if not given.

    Returns
    -------
    Solution
    """
    model = _Model(stretches, [len(one) for one in start], factors)
    others = information.rows.shape[1] - sum(len(stretch.indices) for stretch in stretches)

    def misfit(theta: Floats) -> tuple[Floats, Floats]:
        values, slopes = model(theta)
        return information.target - information.rows @ values, information.rows @ slopes

    theta, converged = _damped(misfit, np.concatenate([*start, np.zeros(others)]))
    residual, slopes = misfit(theta)
    *parameters, linear = model.split(theta)
    return Solution(
        parameters=tuple(parameters),
        covariance=_inverse_square(slopes),
        linear=linear,
        values=model(theta)[0],
        chi_square=float(residual @ residual),
        converged=converged and bool(slopes.any(axis=0).all()),
    )


def first_curve(stretch: Stretch, order: int, factor: Floats | None = None) -> Floats:
    """Parameters of a curve through the profile of the map, to begin with.

    The exponent of an Enge curve is linear in the coefficients: they are regressed on the
    logarithm of ``B0/B - 1``, each point counting as much as the curve moves there.

    Parameters
    ----------
    stretch : Stretch
        The end.
    order : int
        Highest power.
    factor : array, optional
        What the other end multiplies the field by, at the stretch's points.

    Returns
    -------
    (order + 2,) array
        B0 in units of the level, then the coefficients about the origin.
    """
    xi = stretch.xi(stretch.points()[MARGIN:-MARGIN])
    value = stretch.profile / stretch.level
    if factor is not None:
        value = value / factor[MARGIN:-MARGIN]
    inside = (value > FAINTEST) & (value < 1 - FAINTEST)
    xi, value = xi[inside], value[inside]
    weight = value * (1 - value)
    order_told = min(order, max(len(xi) - 1, 1))
    rows = weight[:, None] * np.vander(xi, order_told + 1, increasing=True)
    found = np.linalg.lstsq(rows, weight * np.log(1 / value - 1), rcond=1e-12)[0]
    return np.concatenate([[1.0], found, np.zeros(order - order_told)])


def own_factor(stretch: Stretch, coefficients: Floats, s: Floats) -> tuple[Floats, Floats]:
    """What the curve of one end multiplies the field by elsewhere; and its derivatives.

    Parameters
    ----------
    stretch : Stretch
        Of the curve.
    coefficients : (k,) array
        Of the curve.
    s : (n,) array
        Positions far inside that end, m.

    Returns
    -------
    value : (n,) array
        About 1; where the polynomial turns round, or farther inside than it can be known, it
        stays as it is there.
    gradient : (n, k) array
        Derivatives with respect to the coefficients.
    """
    curve = EngeCurve(coefficients)
    turn = np.nan_to_num(curve.falling_range()[0], nan=0.0, neginf=-FARTHEST)
    xi = np.maximum(stretch.xi(s), max(turn, -FARTHEST))
    return curve.on(np.vander(xi, len(coefficients), increasing=True))


class _Model:
    """Coefficients of B on some stretches that follow from the parameters of their curves."""

    def __init__(
        self,
        stretches: Sequence[Stretch],
        counts: Sequence[int],
        factors: Sequence[Floats] | None = None,
    ) -> None:
        self.stretches = stretches
        self.cuts = np.cumsum(counts)
        self.points = [stretch.points() for stretch in stretches]
        self.factors = factors or [np.ones(len(points)) for points in self.points]
        self.powers = [
            np.vander(stretch.xi(points), count - 1, increasing=True)
            for stretch, points, count in zip(stretches, self.points, counts, strict=True)
        ]

    def split(self, theta: Floats) -> list[Floats]:
        """The parameters of each stretch, then the other unknowns."""
        return np.split(theta, self.cuts)

    def __call__(self, theta: Floats) -> tuple[Floats, Floats]:
        """Coefficients of B and the other unknowns; their derivatives with all in `theta`."""
        *parameters, linear = self.split(theta)
        parts = [self._stretch(index, parameters) for index in range(len(parameters))]
        slopes = np.vstack([slopes for _, slopes in parts])
        return (
            np.concatenate([*(b for b, _ in parts), linear]),
            linalg.block_diag(slopes, np.eye(len(linear))) if len(linear) else slopes,
        )

    def _stretch(self, index: int, parameters: Sequence[Floats]) -> tuple[Floats, Floats]:
        """The same on one stretch."""
        shapes = [
            EngeCurve(values[1:]).on(self.powers[index])
            if number == index
            else own_factor(stretch, values[1:], self.points[index])
            for number, (stretch, values) in enumerate(zip(self.stretches, parameters, strict=True))
        ]
        height = self.stretches[index].level * self.factors[index]
        columns = []
        for number, (_, gradient) in enumerate(shapes):
            beside = height * _product(shapes, but=number)
            level = _product(shapes) * height if number == index else np.zeros(len(height))
            columns += [level[:, None], (parameters[index][0] * beside)[:, None] * gradient]
        field = parameters[index][0] * height * _product(shapes)
        found = _filtered(np.column_stack([field, *columns]))
        return found[:, 0], found[:, 1:]


def _product(shapes: Sequence[tuple[Floats, Floats]], but: int | None = None) -> Floats | float:
    """All curves multiplied, or all but one."""
    product: Floats | float = 1.0
    for number, (value, _) in enumerate(shapes):
        if number != but:
            product = product * value
    return product


def _filtered(values: Floats) -> Floats:
    """Spline coefficients from values at their middles and MARGIN more to each side."""
    count = len(values) - 2 * MARGIN
    middle = TAPS[MARGIN] * values[MARGIN : MARGIN + count]
    for step in range(1, MARGIN + 1):
        low, high = values[MARGIN - step :], values[MARGIN + step :]
        middle += TAPS[MARGIN + step] * (low[:count] + high[:count])
    return np.asarray(middle)


def _damped(
    misfit: Callable[[Floats], tuple[Floats, Floats]], theta: Floats
) -> tuple[Floats, bool]:
    """Least squares by damped Gauss-Newton steps in parameters of unit slope."""
    damping, (residual, slopes) = FIRST_DAMPING, misfit(theta)
    for _ in range(ROUNDS):
        size = np.linalg.norm(slopes, axis=0)
        moving = size > STILLEST * size.max(initial=0.0)
        scale = np.divide(1.0, size, out=np.zeros_like(size), where=moving)
        basis, stretch, along = np.linalg.svd(slopes * scale, full_matrices=False)
        seen = basis.T @ residual
        if seen @ seen < CONVERGED * (1 + residual @ residual):
            return theta, True
        square = float(residual @ residual)
        while damping < 1e12:
            step = scale * (along.T @ (seen * stretch / (stretch**2 + damping)))
            moved = misfit(theta + step)
            if float(moved[0] @ moved[0]) < square:
                break
            damping *= 8
        else:
            return theta, False
        theta, (residual, slopes), damping = theta + step, moved, damping / 12
    return theta, False


def _inverse_square(slopes: Floats) -> Floats:
    """Covariance of the parameters; infinite if one of them moves nothing."""
    size = np.linalg.norm(slopes, axis=0)
    if not size.all():
        return np.full((len(size), len(size)), np.inf)
    _, stretch, along = np.linalg.svd(slopes / size, full_matrices=False)
    root = along.T / np.maximum(stretch, np.finfo(float).eps) / size[:, None]
    return np.asarray(root @ root.T)
