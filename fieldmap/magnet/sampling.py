"""Any number of points of a line with their standard uncertainties, in little memory."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.errors import InputError
from fieldmap.estimate.map import map_lines
from fieldmap.estimate.spline import DEGREE, piece_polynomials

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.estimate.spline import UniformSpline

__all__ = ["Term", "chosen_line", "sample"]

Floats = npt.NDArray[np.float64]

CHUNK = 10_000  # points at a time


@dataclass(frozen=True)
class Term:
    """One term of a sum over the field and its derivatives.

    Parameters
    ----------
    derivative : int
        Order of the derivative along the line.
    factor : float
        What it is multiplied by, m**derivative.
    offset : float
        Where it is taken, counted from the point itself, m.
    """

    derivative: int = 0
    factor: float = 1.0
    offset: float = 0.0


FIELD = (Term(),)


def chosen_line(fmap: xr.Dataset, line: int) -> FieldLine:
    """One line of a map, by its index in the order of (y, x).

    Raises
    ------
    InputError
        No line of that index.
    """
    lines = map_lines(fmap)
    if not 0 <= line < len(lines):
        last = len(lines) - 1
        raise InputError("line", str(line), f"an index from 0 to {last}" if last else "0")
    return lines[line]


def sample(line: FieldLine, s: Floats, terms: Sequence[Term] = FIELD) -> tuple[Floats, Floats]:
    """Values of a sum of derivatives of the field at many points.

    Parameters
    ----------
    line : FieldLine
        The line.
    s : (n,) array
        Positions, m.
    terms : sequence of Term
        The sum; the field itself if left out.

    Returns
    -------
    value, u : (n,) arrays
        T; u follows from the covariance of the whole line.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> spline = UniformSpline.covering(-0.1, 0.1, 0.02)
    >>> line = FieldLine(0, 0, -0.1, 0.1, spline, spline.middles(), 1e-6 * np.ones((13, 13)))
    >>> value, u = sample(line, np.array([0.03]), [Term(), Term(1, 0.5)])
    >>> round(float(value[0]), 9), round(float(u[0]), 9)
    (0.53, 0.001)
    """
    values, spreads = np.empty(len(s)), np.empty(len(s))
    for first in range(0, len(s), CHUNK):
        part = slice(first, first + CHUNK)
        rows = _rows(line.spline, s[part], terms)
        values[part] = rows @ line.b
        spread = rows.multiply(rows @ line.covariance).sum(axis=1)
        spreads[part] = np.sqrt(np.maximum(np.asarray(spread).ravel(), 0.0))
    return values, spreads


def _rows(spline: UniformSpline, s: Floats, terms: Sequence[Term]) -> sparse.csr_array:
    """Rows of the sum on the coefficients of B; only a few entries of each are not zero."""
    total = sparse.csr_array((len(s), spline.size))
    for term in terms:
        piece, x = spline.locate(s + term.offset)
        table = piece_polynomials(DEGREE)
        for _ in range(term.derivative):
            table = table[1:] * np.arange(1, len(table))[:, None]
        factor = term.factor / spline.spacing**term.derivative
        values = factor * np.vander(x, len(table), increasing=True) @ table
        columns = piece[:, None] + np.arange(DEGREE + 1)
        starts = np.arange(0, columns.size + 1, DEGREE + 1)
        shape = (len(s), spline.size)
        total = total + sparse.csr_array((values.ravel(), columns.ravel(), starts), shape=shape)
    return total
