"""Where the fringe of each end lies on a mapped line, and whether the end is one at all."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.errors import RefusedError
from fieldmap.magnet.fringe.fit import Stretch
from fieldmap.magnet.length import SMALLEST_LEVEL, length_results

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis

__all__ = ["OUTWARD", "End", "locate"]

Floats = npt.NDArray[np.float64]
End = Literal["in", "out"]

OUTWARD: Final[dict[End, int]] = {"in": -1, "out": 1}
LARGEST_LEFT: Final = 1 / 3  # of the central field, at the end of the map
LEAST_REACH: Final = 0.5  # gaps to either side of the edge
LEAST_KNOTS: Final = 8
PER_KNOT: Final = 4


def locate(
    line: FieldLine, axis: Axis, gap: float, end: End, reach: tuple[float, float]
) -> Stretch:
    """The stretch of one end over which a curve shall stand for the profile.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Its flat window gives the central field and the middle.
    gap : float
        Full gap or bore, m.
    end : {"in", "out"}
        Which end.
    reach : tuple of float
        How far the stretch goes inside and outside the edge, in gaps; cut off at the middle of
        the flat window and at the end of the map.

    Returns
    -------
    Stretch
        Its origin is where the field has fallen to half.

    Raises
    ------
    RefusedError
        ``no-central-field``, ``no-fringe-end``, ``fringe-cut-off``.
    """
    where, outward = f"fringe_{end}", OUTWARD[end]
    level = _central(line, axis, where)
    middle, last = 0.5 * sum(axis.flat), line.high if outward > 0 else line.low
    count = max(round(abs(last - middle) / line.spline.spacing * PER_KNOT), 2)
    s = np.linspace(middle, last, count + 1)
    edge = _edge(s, line.field(s) / level, where)
    inside, outside = (outward * (edge - middle) / gap, outward * (last - edge) / gap)
    if min(inside, outside) < LEAST_REACH:
        raise RefusedError(
            "fringe-cut-off",
            where,
            f"the map reaches {outside:.2g} gaps outside the edge, and the middle of the flat "
            f"window lies {inside:.2g} gaps inside it, where {LEAST_REACH} are needed of either; "
            "scan further out.",
        )
    ends = (
        edge - outward * gap * min(reach[0], inside),
        edge + outward * gap * min(reach[1], outside),
    )
    places = line.spline.middles()
    on = (places >= min(ends)) & (places <= max(ends)) & (outward * (places - middle) > 0)
    indices = np.flatnonzero(on)
    if len(indices) < LEAST_KNOTS:
        raise RefusedError(
            "fringe-cut-off",
            where,
            f"only {len(indices)} knots lie on the stretch of the fringe, where {LEAST_KNOTS} are "
            "needed; scan further, or slower so that the map has closer knots.",
        )
    profile = line.field(places[indices])
    return Stretch(outward, edge, gap, level, line.spline, indices, profile)


def _central(line: FieldLine, axis: Axis, where: str) -> float:
    central = length_results(line, axis)["central_field"]
    if abs(central.value) < SMALLEST_LEVEL * central.u:
        raise RefusedError(
            "no-central-field",
            where,
            "the mean field in the flat window is not distinct from zero, so there is nothing that "
            "a fringe could fall from; move the window to where the field is flat.",
        )
    return central.value


def _edge(s: Floats, ratio: Floats, where: str) -> float:
    """Where the field has fallen to half the central field, m."""
    if abs(ratio[-1]) > LARGEST_LEFT:
        raise RefusedError(
            "no-fringe-end",
            where,
            f"the field at the end of the map, {s[-1] * 1e3:.6g} mm, is still {ratio[-1]:.0%} of "
            "the central field, so the fringe is not mapped; scan on until it has died away.",
        )
    below = ratio < 0.5
    first = int(np.argmax(below))
    if first == 0 or not below[first:].all():
        raise RefusedError(
            "no-fringe-end",
            where,
            "the field does not fall once and for all from the middle of the flat window to the "
            "end of the map, so this is not the end of a magnet; move the flat window, or map "
            "one magnet at a time.",
        )
    share = (ratio[first - 1] - 0.5) / (ratio[first - 1] - ratio[first])
    return float(s[first - 1] + share * (s[first] - s[first - 1]))
