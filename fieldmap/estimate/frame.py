"""The recorded frame: positions as the stage gave them, with all passes shifted alike.

What shifts or stretches all passes alike (offset, scale, the mean speed's share of the lag, the
mean direction's share of the backlash) no pass can tell. So the profile is estimated in the
recorded frame, where those errors touch the references only, and is moved to true positions at
the end: ``true = recorded + shift``. Were they columns of the passes, a shifted spline, which is
no spline on the same knots, would seem to determine them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.bins import Bins
    from fieldmap.estimate.parameters import Kind, Nuisance
    from fieldmap.estimate.spline import UniformSpline

__all__ = ["Frame", "common_frame"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Frame:
    """What all passes of a line share in their motion.

    Parameters
    ----------
    speed : float
        Mean speed, each bin weighed by the distance it covers, m/s.
    sense : float
        Mean direction, weighed likewise, -1 to 1.
    """

    speed: float
    sense: float

    def effects(self, s: Floats) -> dict[Kind, Floats]:
        """Shift from recorded to true position at s (m) for one unit of each nuisance."""
        one = np.ones_like(s)
        return {
            "offset": one,
            "scale": s,
            "lag": self.speed * one,
            "backlash": self.sense / 2 * one,
        }

    def to_true(self, spline: UniformSpline, b: Floats, unknowns: Sequence[Nuisance]) -> Floats:
        """Change of the coefficients at true positions with each nuisance.

        Parameters
        ----------
        spline : UniformSpline
            The knots.
        b : (size,) array
            Coefficients of B in the recorded frame, T.
        unknowns : sequence of Nuisance
            m of them.

        Returns
        -------
        (size, m) array
            T per unit of the nuisance.
        """
        middles = spline.middles()
        slope = np.gradient(b, spline.spacing)
        effects = self.effects(middles)
        columns = np.zeros((len(b), len(unknowns)))
        for i, unknown in enumerate(unknowns):
            if unknown.kind in effects:
                columns[:, i] = -slope * effects[unknown.kind]
        return columns


def common_frame(bins: Sequence[Bins]) -> Frame:
    """The frame of some passes.

    Parameters
    ----------
    bins : sequence of Bins
        One a pass.

    Returns
    -------
    Frame
    """
    speed = np.concatenate([one.speed for one in bins])
    sense = np.concatenate([one.sense for one in bins])
    lasting = np.concatenate([_durations(one.time) for one in bins])
    distance = np.abs(speed) * lasting
    total = float(distance.sum())
    if total == 0:
        return Frame(0.0, 0.0)
    return Frame(float(distance @ speed) / total, float(distance @ sense) / total)


def _durations(time: Floats) -> Floats:
    return np.gradient(time) if len(time) > 1 else np.zeros(len(time))
