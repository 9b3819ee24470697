"""Which knots the map gets: fine enough for gap, window and sampling, and no finer."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fieldmap.errors import InputError
from fieldmap.estimate.spline import UniformSpline

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.coverage import AnyPass

__all__ = ["MOST_KNOTS", "first_spacing", "grain", "knots_for", "sampling"]

MOST_PER_GAP = 10  # a fringe bends within about a third of the gap
LEAST_PER_GAP = 5  # also where readings are sparser: what lies between them is uncertain
LEAST_KNOTS = 60  # even where the whole line is shorter than a gap
MOST_KNOTS = 3000


def grain(gap: float, low: float, high: float) -> float:
    """Length over which the field's roughness changes, m: the gap, on a line longer than that."""
    return min(gap, high - low)


def sampling(passes: Sequence[AnyPass]) -> float:
    """Distance between readings of the finest pass, m."""
    finest = np.inf
    for one in passes:
        position = getattr(one, "position", None)
        if position is None:
            finest = min(finest, one.speed / one.rate)  # type: ignore[union-attr]
        else:
            finest = min(finest, float(np.ptp(position)) / (len(position) - 1))
    return float(finest)


def first_spacing(gap: float, low: float, high: float, readings_apart: float) -> float:
    """First choice of the knot spacing, m; `stitch` then checks it by halving.

    Parameters
    ----------
    gap : float
        Full gap or bore diameter, m.
    low, high : float
        Ends of the line, m.
    readings_apart : float
        Distance between readings, m; knots much closer than that learn nothing.

    Returns
    -------
    float

    Examples
    --------
    >>> round(first_spacing(0.03, -0.6, 0.6, 0.0005), 6)
    0.003
    """
    travel, bend = high - low, grain(gap, low, high)
    spacing = float(np.clip(readings_apart, bend / MOST_PER_GAP, bend / LEAST_PER_GAP))
    return float(np.clip(spacing, travel / MOST_KNOTS, travel / LEAST_KNOTS))


def knots_for(passes: Sequence[AnyPass], low: float, high: float, spacing: float) -> UniformSpline:
    """Knots that cover all that any probe saw.

    Parameters
    ----------
    passes : sequence of Pass or PlannedPass
        Passes of the line.
    low, high : float
        Ends of the recorded positions, m.
    spacing : float
        Knot spacing, m.

    Returns
    -------
    UniformSpline

    Raises
    ------
    InputError
        A probe so long, or knots so close, that there would be too many.
    """
    widest = max((one.probe for one in passes), key=lambda probe: probe.extent)
    margin = widest.extent / 2 + spacing
    if (high - low + 2 * margin) / spacing > 2 * MOST_KNOTS:
        raise InputError(
            f"probe '{widest.name}'",
            f"an extent of {widest.extent:g} m and knots {spacing:g} m apart on a line of "
            f"{high - low:g} m",
            f"at most {2 * MOST_KNOTS} knots over all that the probe reaches",
            "mend the window or the width of the probe, or choose wider knots",
        )
    return UniformSpline.covering(low - margin, high + margin, spacing)
