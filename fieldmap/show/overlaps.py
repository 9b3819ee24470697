"""Each pass against the map of all: which pass disagrees, and where."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.map import map_lines, map_passes
from fieldmap.estimate.noise import total
from fieldmap.estimate.provenance import map_evidence, map_joint

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.evidence import Evidence
    from fieldmap.estimate.noise import Tridiagonal

__all__ = ["Overlap", "overlaps_of"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Overlap:
    """What one pass recorded less what the map of all passes predicts for it.

    Parameters
    ----------
    name : str
        The pass.
    position : (n,) array
        Positions in the order of time, m.
    difference : (n,) array
        Recorded less predicted flux, V s; its mean is zero, since the flux of a pass has no
        zero of its own.
    sd : (n,) array
        Standard deviation that the noise of the pass alone gives it, V s. The fit follows the
        noise a little, so that a sound pass differs by less.
    """

    name: str
    position: Floats
    difference: Floats
    sd: Floats

    @property
    def ratio(self) -> float:
        """Size of the difference over what the noise gives, rms: about 1 or less if all is well."""
        return float(np.sqrt(np.mean((self.difference / self.sd) ** 2)))


def overlaps_of(fmap: xr.Dataset) -> list[Overlap]:
    """Compare each pass with the map.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    list of Overlap
        In the order of the passes of the map. Where passes overlap, those that agree with each
        other lie together; a pass that disagrees departs from them.

    Raises
    ------
    InputError
        The map keeps no readings.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> all(one.ratio < 1.3 for one in overlaps_of(fmap))
    True

    Notes
    -----
    The increments that the solve left over, in V s, are summed up along the pass. Gains,
    drifts, lags and positions are taken as the map found them.
    """
    names = [facts["name"] for facts in map_passes(fmap)]
    owner, position = fmap["residual_pass"].values, fmap["residual_position"].values
    found: list[Overlap] = []
    for line in range(len(map_lines(fmap))):
        evidence = map_evidence(fmap, line)
        unknowns = evidence.recorded(map_joint(fmap, line).values)
        left = evidence.target - evidence.design @ unknowns
        for one in range(int(evidence.owner.max(initial=-1)) + 1):
            own, index = evidence.owner == one, len(found)
            summed = _levelled(_summed(left[own]))
            sd = _spread(_block(evidence, own))
            found.append(Overlap(names[index], position[owner == index], summed, sd))
    return found


def _summed(increments: Floats) -> Floats:
    """Running sum at the middles of the increments."""
    return np.asarray(np.cumsum(increments, axis=0) - 0.5 * increments)


def _levelled(values: Floats) -> Floats:
    return np.asarray(values - values.mean(axis=0))


def _spread(noise: Tridiagonal) -> Floats:
    """Standard deviation of the levelled running sum of increments with that covariance."""
    root = _levelled(_summed(noise @ np.eye(len(noise.diagonal))))
    return np.asarray(np.sqrt(np.diagonal(_levelled(_summed(root.T)))))


def _block(evidence: Evidence, own: npt.NDArray[np.bool_]) -> Tridiagonal:
    """Covariance of the increments of one pass."""
    whole, inside = total(evidence.noise), np.flatnonzero(own)
    first, last = int(inside[0]), int(inside[-1]) + 1
    return type(whole)(whole.diagonal[first:last], whole.off[first : last - 1])
