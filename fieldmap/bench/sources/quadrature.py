"""Running integral of a smooth function, by Gauss-Legendre quadrature to rounding."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from fieldmap.readings.passes import Floats

__all__ = ["RunningQuadrature"]

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)
_TOLERANCE = 1e-15  # of the whole, for what halving a cell may change
_MAX_HALVINGS = 40


class RunningQuadrature:
    """Running integral of a function that vanishes outside some range.

    Cells are halved until that no longer changes their integral; within a cell the same rule
    integrates from its lower border to the position asked for.

    Parameters
    ----------
    function : callable
        Array of positions to array of values; smooth, no sharper than a cell can halve to.
    borders : (n,) array
        First borders of the cells, in any order.

    Examples
    --------
    >>> running = RunningQuadrature(lambda s: np.exp(-s**2), np.linspace(-9.0, 9.0, 10))
    >>> round(running.total**2, 13)
    3.1415926535898
    """

    def __init__(self, function: Callable[[Floats], Floats], borders: Floats) -> None:
        self._function = function
        self._borders = self._refined(np.unique(borders))
        cells = self._cells(self._borders[:-1], self._borders[1:])
        self._sums = np.concatenate([[0.0], np.cumsum(cells)])

    @property
    def total(self) -> float:
        """Integral over all cells."""
        return float(self._sums[-1])

    def __call__(self, s: Floats) -> Floats:
        """Integral from the lowest border up to s; constant beyond the borders."""
        s = np.clip(s, self._borders[0], self._borders[-1])
        cell = np.clip(np.searchsorted(self._borders, s) - 1, 0, len(self._borders) - 2)
        return np.asarray(self._sums[cell] + self._cells(self._borders[cell], s))

    def _cells(self, start: Floats, stop: Floats) -> Floats:
        """Integrals from start to stop, elementwise."""
        half, middle = (stop - start) / 2, (stop + start) / 2
        values = self._function(middle[..., None] + half[..., None] * _NODES)
        return np.asarray(half * (values @ _WEIGHTS))

    def _refined(self, borders: Floats) -> Floats:
        """Borders with every cell halved that the rule does not yet resolve."""
        start, stop = borders[:-1], borders[1:]
        scale = np.abs(self._cells(start, stop)).sum()
        for _ in range(_MAX_HALVINGS):
            middle = (start + stop) / 2
            change = self._cells(start, middle) + self._cells(middle, stop)
            coarse = np.abs(change - self._cells(start, stop)) > _TOLERANCE * scale
            if not coarse.any():
                break
            borders = np.concatenate([borders, middle[coarse]])
            start, stop = (
                np.concatenate([start[coarse], middle[coarse]]),
                np.concatenate([middle[coarse], stop[coarse]]),
            )
        return np.sort(borders)
