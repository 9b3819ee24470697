"""What happens from each reading to the next, against the steps around it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.resolution import common_step

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass

__all__ = ["EDGE", "Steps", "around", "steps_of"]

Floats = npt.NDArray[np.float64]
Bools = npt.NDArray[np.bool_]

EDGE: Final = 3  # steps at either end that have too few others around them
MOVES: Final = 0.3  # of the usual way: below it the probe starts, stops or stands
CLEAR: Final = 10.0  # jitters that a way must be long to be told from them
COUNTS: Final = 4.0  # counts of the encoder that a way must be long
TO_SIGMA: Final = 1.4826 / 6**0.5  # median size of second differences of white noise


@dataclass(frozen=True, eq=False)
class Steps:
    """Steps between successive readings of a pass; step i leads from reading i to i + 1.

    Parameters
    ----------
    time, way, flux : (n - 1,) arrays
        Differences, in s, m and V s.
    usual_time, usual_way, usual_flux : (n - 1,) arrays
        The middle of the two steps before and the two after.
    moving : (n - 1,) array of bool
        Whether the probe travels there, at a pace that its jitter does not hide.
    count : float
        Step of the recorded positions, m.
    jitter : float
        Noise of a recorded position, m.
    """

    time: Floats
    way: Floats
    flux: Floats
    usual_time: Floats
    usual_way: Floats
    usual_flux: Floats
    moving: Bools
    count: float
    jitter: float

    @property
    def regular(self) -> float:
        """Share of the time steps that are within a tenth of those around them."""
        near = np.abs(self.time - self.usual_time) <= 0.1 * self.usual_time
        return float(np.mean(near & (self.usual_time > 0)))


def steps_of(one: Pass) -> Steps:
    """Differences of successive readings of a pass and their surroundings.

    Parameters
    ----------
    one : Pass
        The pass.

    Returns
    -------
    Steps
        With nothing moving in a pass of fewer than eight readings.
    """
    time, way, flux = np.diff(one.time), np.diff(one.position), np.diff(one.flux)
    count = common_step(one.position)
    usual_way = around(way)
    jitter = TO_SIGMA * float(np.median(np.abs(np.diff(way)))) if len(way) > 1 else 0.0
    travel = np.abs(usual_way)
    typical = float(np.median(travel[travel > 0])) if np.any(travel > 0) else np.inf
    least = max(MOVES * typical, CLEAR * jitter, COUNTS * count)
    moving = (travel >= least) & np.isfinite(typical)
    moving[:EDGE] = moving[-EDGE:] = False
    return Steps(time, way, flux, around(time), usual_way, around(flux), moving, count, jitter)


def around(values: Floats) -> Floats:
    """Median of the two values before and the two after each, itself left out."""
    if len(values) < 2 * EDGE:
        return np.zeros(len(values))
    usual = np.empty(len(values))
    a, b, c, d = values[:-4], values[1:-3], values[3:-1], values[4:]
    low, high = np.minimum(a, b), np.maximum(a, b)
    left, right = np.minimum(c, d), np.maximum(c, d)
    usual[2:-2] = (np.maximum(low, left) + np.minimum(high, right)) / 2
    usual[:2], usual[-2:] = usual[2], usual[-3]
    return usual
