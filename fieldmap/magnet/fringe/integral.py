"""Fringe integrals ∫B(B0 - B)/(g·B0²) ds of both ends: a quadratic functional of the profile.

Source: K. L. Brown, SLAC-75 (1967), the integral that corrects the vertical focusing of an edge
for the extent of its fringe field. B² of a cubic piece has degree 6, so four Gauss-Legendre
points a piece integrate it exactly.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.spline import DEGREE, piece_polynomials
from fieldmap.magnet.functional import Functional, functional

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis

__all__ = ["fringe_integral_results"]

Floats = npt.NDArray[np.float64]

NODES, WEIGHTS = np.polynomial.legendre.leggauss(4)


def fringe_integral_results(
    line: FieldLine, axis: Axis, gap: float, length: Mapping[str, Functional]
) -> dict[str, Functional]:
    """Fringe integrals from the middle of the flat window to either limit.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Limits of the integral and flat window.
    gap : float
        Full gap or bore, m.
    length : mapping of str to Functional
        From `length_results`.

    Returns
    -------
    dict of str to Functional
        ``fringe_integral_in``, ``fringe_integral_out``; nothing where there is no central field.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> from fieldmap.magnet.length import length_results
    >>> from fieldmap.readings.passes import Axis
    >>> spline = UniformSpline.covering(-0.4, 0.4, 0.004)
    >>> edges = 1 / (1 + np.exp(2 * (np.abs(spline.middles()) - 0.2) / 0.03))
    >>> line = FieldLine(0, 0, -0.4, 0.4, spline, edges, 1e-14 * np.eye(spline.size))
    >>> axis = Axis("z", (-0.4, 0.4), (-0.02, 0.02))
    >>> found = fringe_integral_results(line, axis, 0.03, length_results(line, axis))
    >>> round(found["fringe_integral_out"].value, 2)
    0.5
    """
    if "magnetic_length" not in length:
        return {}
    middle, central = 0.5 * sum(axis.flat), length["central_field"]
    return {
        "fringe_integral_in": _fringe_integral(line, axis.integrate[0], middle, gap, central),
        "fringe_integral_out": _fringe_integral(line, middle, axis.integrate[1], gap, central),
    }


def _fringe_integral(
    line: FieldLine, low: float, high: float, gap: float, central: Functional
) -> Functional:
    level = central.value
    row = line.spline.integral_row(low, high)
    field, (square, square_slope) = float(row @ line.b), _square(line, low, high)
    scale = gap * level**2
    value = (level * field - square) / scale
    gradient = (level * row + field * central.gradient - square_slope) / scale
    gradient -= 2 * value / level * central.gradient
    return functional(line, value, gradient, "1")


def _square(line: FieldLine, low: float, high: float) -> tuple[float, Floats]:
    """∫B² ds and its derivative with respect to the coefficients of B."""
    spline = line.spline
    edges = spline.start + np.arange(1, spline.size - DEGREE) * spline.spacing
    borders = np.concatenate([[low], edges[(edges > low) & (edges < high)], [high]])
    half = 0.5 * np.diff(borders)
    piece, centre = spline.locate(borders[:-1] + half)
    x = centre[:, None] + half[:, None] / spline.spacing * NODES
    basis = (x[..., None] ** np.arange(DEGREE + 1)) @ piece_polynomials(DEGREE)
    columns = piece[:, None] + np.arange(DEGREE + 1)
    b = np.einsum("pnm,pm->pn", basis, line.b[columns])
    weighted = half[:, None] * WEIGHTS * b
    slope = np.zeros(spline.size)
    np.add.at(slope, columns, 2 * np.einsum("pn,pnm->pm", weighted, basis))
    return float(np.sum(weighted * b)), slope
