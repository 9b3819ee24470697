"""A result as a functional of the profile: how it moves with every coefficient."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.magnet.quantity import Quantity

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.estimate.fieldline import FieldLine

__all__ = ["Functional", "covariance", "functional"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Functional(Quantity):
    """A quantity that knows what it is taken from.

    Parameters
    ----------
    value, u, unit
        As for `Quantity`.
    gradient : (size,) array
        Derivative with respect to the coefficients of B: its unit over T.
    besides : mapping of str to float
        Standard uncertainties that do not come from the profile, by their cause, with the sign
        of the derivative: one cause in two results is one error.
    """

    gradient: Floats = field(repr=False)
    besides: Mapping[str, float] = field(default_factory=dict, repr=False)


def functional(
    line: FieldLine,
    value: float,
    gradient: Floats,
    unit: str,
    besides: Mapping[str, float] | None = None,
) -> Functional:
    """A result of a line with the standard uncertainty that follows from its covariance.

    Parameters
    ----------
    line : FieldLine
        The line.
    value : float
        SI.
    gradient : (size,) array
        As for `Functional`.
    unit : str
        SI unit as text.
    besides : mapping of str to float, optional
        As for `Functional`.

    Returns
    -------
    Functional

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> spline = UniformSpline.covering(-0.3, 0.3, 0.02)
    >>> line = FieldLine(0, 0, -0.3, 0.3, spline, np.ones(33), 9e-12 * np.ones((33, 33)))
    >>> row = spline.integral_row(-0.05, 0.05)
    >>> functional(line, 0.1, row, "T m", {"tail": 4e-7})
    Functional(value=0.1, u=5e-07, unit='T m')
    """
    besides = besides or {}
    u = math.hypot(line.u(gradient), *besides.values())
    return Functional(value, u, unit, gradient, besides)


def covariance(line: FieldLine, results: Mapping[str, Functional]) -> Floats:
    """Covariance matrix of some results of one line, in their order.

    Parameters
    ----------
    line : FieldLine
        The line.
    results : mapping of str to Functional
        n results.

    Returns
    -------
    (n, n) array
        Products of their SI units.
    """
    gradients = np.array([one.gradient for one in results.values()])
    causes = sorted({cause for one in results.values() for cause in one.besides})
    others = np.array([[one.besides.get(c, 0.0) for c in causes] for one in results.values()])
    return np.asarray(gradients @ line.covariance @ gradients.T + others @ others.T)
