"""The recorded frame: positions as the stage gave them, with all passes shifted alike.

What shifts or stretches all passes alike (offset, scale, the mean speed's share of the lag, the
mean direction's share of the backlash, the share of a lag or a shift that one pass has for itself)
no pass can tell. So the profile is estimated in the
recorded frame, where those errors touch the references only, and is moved to true positions at
the end: ``true = recorded + shift``. Were they columns of the passes, a shifted spline, which is
no spline on the same knots, would seem to determine them.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

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
    shares : mapping of str to tuple of float
        By the name of a pass: its share of all distance, and of the mean speed, m/s.
    """

    speed: float
    sense: float
    shares: Mapping[str, tuple[float, float]] = field(default_factory=dict)

    def effects(self, s: Floats) -> dict[Kind, Floats]:
        """Shift from recorded to true position at s (m) for one unit of each nuisance."""
        one = np.ones_like(s)
        return {
            "offset": one,
            "scale": s,
            "lag": self.speed * one,
            "backlash": self.sense / 2 * one,
        }

    def effect(self, unknown: Nuisance, s: Floats) -> Floats:
        """The same of one nuisance, those of single passes included; zero where it shifts none."""
        share, speed = self.shares.get(unknown.where, (0.0, 0.0))
        of_pass = {"pass shift": share, "pass lag": speed}
        if unknown.kind in of_pass:
            return of_pass[unknown.kind] * np.ones_like(s)
        return self.effects(s).get(unknown.kind, np.zeros_like(s))

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
        effects = [self.effect(unknown, middles) for unknown in unknowns]
        return -slope[:, None] * np.array(effects).reshape(-1, len(b)).T


def common_frame(bins: Sequence[Bins], names: Sequence[str] = ()) -> Frame:
    """The frame of some passes.

    Parameters
    ----------
    bins : sequence of Bins
        One a pass.
    names : sequence of str, optional
        Of the passes: those that may have a lag or a shift of their own.

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
    ends = np.cumsum([len(one.speed) for one in bins])[:-1]
    own = zip(np.split(distance, ends), np.split(speed, ends), strict=True)
    shares = [(float(d.sum()) / total, float(d @ v) / total) for d, v in own]
    named = dict(zip(names, shares, strict=False))
    return Frame(float(distance @ speed) / total, float(distance @ sense) / total, named)


def _durations(time: Floats) -> Floats:
    return np.gradient(time) if len(time) > 1 else np.zeros(len(time))
