"""Errors of position that a whole map shares, where two maps are laid over each other.

An offset of the stage moves a whole profile. The covariance of a map holds that as one
direction in its coefficients, made from their differences, and a moved spline is no spline on
the same knots: that direction differs from the slope of the field by a few per cent in a sharp
fringe. For the uncertainty of a result it does not matter. Where a shift between two maps is
fitted it would: the mismatch alone would seem to tell offset from shift, and give the shift far
too small an uncertainty. Here the direction is replaced by the slope itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.provenance import map_joint, map_unknowns
from fieldmap.magnet.sampling import chosen_line

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine

__all__ = ["POSITIONS", "PositionErrors", "position_errors"]

Floats = npt.NDArray[np.float64]

ALIKE: Final = ("offset", "lag", "backlash")  # move all points of a map alike
STRETCH: Final = "scale"  # moves each by a share of its position
POSITIONS: Final = (*ALIKE, STRETCH)


@dataclass(frozen=True, eq=False)
class PositionErrors:
    """The nuisances of one line that move its profile as a whole.

    Parameters
    ----------
    line : FieldLine
        The line.
    shared : (size, m) array
        Covariance of its coefficients with each nuisance, T; nuisances in units of their
        uncertainty before the scan.
    spread : (m, m) array
        Covariance of the nuisances.
    stretches : (m,) bool array
        Which of them stretch the profile; the others shift it.
    """

    line: FieldLine
    shared: Floats
    spread: Floats
    stretches: npt.NDArray[np.bool_]

    def correction(self, rows: Floats, s: Floats) -> Floats:
        """What to add to the covariance of the field at some points.

        Parameters
        ----------
        rows : (n, size) array
            Rows of the field at `s`.
        s : (n,) array
            Positions, m.

        Returns
        -------
        (n, n) array
            T^2.
        """
        off = self.mismatch(rows, s)
        mixed = rows @ self.shared @ off.T
        return np.asarray(mixed + mixed.T + off @ self.spread @ off.T)

    def mismatch(self, rows: Floats, s: Floats) -> Floats:
        """Movement by the slope less movement by the differences of coefficients: (n, m)."""
        spline = self.line.spline
        steps = np.gradient(self.line.b, spline.spacing)
        held = -steps[:, None] * self._effects(spline.middles())
        slope = self.line.field(s, 1)
        meant = -slope[:, None] * self._effects(s)
        return np.asarray((meant - rows @ held) * self._reach(held))

    def _effects(self, s: Floats) -> Floats:
        return np.where(self.stretches, s[:, None], 1.0)

    def _reach(self, held: Floats) -> Floats:
        """How far one unit of each nuisance moves the profile, from its share in the map: (m,)."""
        power = np.einsum("ij,ij->j", held, held) * np.diagonal(self.spread)
        along = np.einsum("ij,ij->j", held, self.shared)
        return np.asarray(np.divide(along, power, out=np.zeros_like(along), where=power > 0))


def position_errors(fmap: xr.Dataset, line: int) -> PositionErrors:
    """Gather the position errors of one line of a map.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    line : int
        Index of the line.

    Returns
    -------
    PositionErrors
    """
    mapped, joint, unknowns = (
        chosen_line(fmap, line),
        map_joint(fmap, line),
        map_unknowns(fmap, line),
    )
    size = len(mapped.b)
    kinds = [one.kind for one in unknowns if one.kind in POSITIONS]
    kept = [size + i for i, one in enumerate(unknowns) if one.kind in POSITIONS]
    return PositionErrors(
        mapped,
        joint.covariance[:size, kept],
        joint.covariance[np.ix_(kept, kept)],
        np.array([kind == STRETCH for kind in kinds], dtype=bool),
    )
