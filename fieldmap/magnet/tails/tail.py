"""Tails: the integral that lies beyond the limits, and the total with both of them.

Where the map reaches beyond a limit, that part is measured; what lies beyond the map follows
from the law by which the field dies away before its end (`fieldmap.magnet.tails.decay`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.magnet.functional import Functional, functional
from fieldmap.magnet.tails.decay import Decay, Stretches, decay_of

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis

__all__ = ["SIDES", "MapEnd", "map_end", "tail_results"]

Floats = npt.NDArray[np.float64]
Side = Literal["in", "out"]

SIDES: Final[tuple[Side, Side]] = ("in", "out")
# Both ends belong to one magnet, so one wrong law is one error.
LAW: Final = "law of the tails"
HIDDEN: Final = "far field below the noise"
WIDTH_OF_WAY: Final = 8  # stretches from the centre to the end …
WIDTH_OUTSIDE: Final = 4  # … and at least so many outside the field boundary


@dataclass(frozen=True, eq=False)
class MapEnd:
    """One end of a map and what lies beyond it.

    Parameters
    ----------
    side : {"in", "out"}
        Which end.
    position : float
        Where the map ends, m.
    direction : float
        Outwards along the travel: -1 or 1.
    middle : float
        The magnet's centre, m.
    decay : Decay
        Beyond the map.
    row : (size,) array
        Gradient of the whole tail, from the limit on; nan where there is none.
    value : float
        The whole tail, T m.
    """

    side: Side
    position: float
    direction: float
    middle: float
    decay: Decay
    row: Floats
    value: float


def tail_results(
    line: FieldLine, axis: Axis, gap: float, length: Mapping[str, Functional]
) -> dict[str, Functional]:
    """Integrals estimated beyond the limits, and the total.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Limits of the integral, flat window, and tails that are known otherwise.
    gap : float
        Full gap or bore, m.
    length : mapping of str to Functional
        From `length_results`.

    Returns
    -------
    dict of str to Functional
        ``tail_in`` and ``tail_out`` where the field dies away, ``integrated_field_total`` where
        both are known; nothing where there is no central field.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> from fieldmap.magnet.length import length_results
    >>> from fieldmap.readings.passes import Axis
    >>> spline = UniformSpline.covering(-1.0, 1.0, 0.02)
    >>> loop = 0.1**3 / (0.1**2 + spline.middles() ** 2) ** 1.5
    >>> line = FieldLine(0, 0, -1.0, 1.0, spline, loop, 1e-14 * np.eye(spline.size))
    >>> axis = Axis("z", (-0.9, 0.9), (-0.01, 0.01))
    >>> found = tail_results(line, axis, 0.2, length_results(line, axis))
    >>> round(found["tail_out"].value, 5), round(0.1 - 0.1 * 0.9 / 0.82**0.5, 5)
    (0.00061, 0.00061)
    """
    if "magnetic_length" not in length:
        return {}
    found = {}
    for side in SIDES:
        tail = _given(line, axis, side) or _estimated(line, map_end(line, axis, gap, side))
        if tail is not None:
            found[f"tail_{side}"] = tail
    if len(found) == len(SIDES):
        parts = (length["integrated_field"], *found.values())
        found["integrated_field_total"] = _sum(line, parts)
    return found


def map_end(line: FieldLine, axis: Axis, gap: float, side: Side) -> MapEnd:
    """What lies beyond one limit.

    Parameters
    ----------
    line : FieldLine
        The line; its central field is distinct from zero.
    axis : Axis
        Limits of the integral and flat window.
    gap : float
        Full gap or bore, m.
    side : {"in", "out"}
        Which end.

    Returns
    -------
    MapEnd
    """
    direction = -1.0 if side == "in" else 1.0
    limit = axis.integrate[SIDES.index(side)]
    mapped = line.low if side == "in" else line.high
    # Limits may exceed the map by half a knot; the integrated field goes that far, too.
    position = max(limit * direction, mapped * direction) * direction
    middle = 0.5 * sum(axis.flat)
    low, high = axis.flat
    level = float(line.spline.integral_row(low, high) @ line.b) / (high - low)
    distance = (position - middle) * direction
    whole = float(_rows(line, np.array([middle, position]))[0] @ line.b) * direction
    boundary = min(max(whole / level, 0.0), distance)
    width = _width(distance, boundary, gap)
    edges = position - direction * width * np.array([3.0, 2.0, 1.0, 0.0])
    rows = direction * _rows(line, edges)
    end = Stretches(
        distance, width, boundary, level, rows @ line.b, rows @ line.covariance @ rows.T
    )
    decay = decay_of(end)
    measured = direction * _rows(line, np.array([limit, position]))[0]
    row = measured + decay.slopes @ rows
    value = float(measured @ line.b) + decay.tail
    return MapEnd(side, position, direction, middle, decay, row, value)


def _width(distance: float, boundary: float, gap: float) -> float:
    """Width of the stretches: wide against noise, narrow against the bend of the law."""
    outside = max(distance - boundary, distance * 1e-3)
    return min(max(gap, distance / WIDTH_OF_WAY), outside / WIDTH_OUTSIDE)


def _rows(line: FieldLine, edges: Floats) -> Floats:
    """Rows of the integrals between successive positions."""
    return np.diff(line.spline.running_rows(edges), axis=0)


def _estimated(line: FieldLine, end: MapEnd) -> Functional | None:
    if end.decay.kind == "slow":
        return None
    sign = math.copysign(1.0, end.decay.tail)
    besides = {LAW: sign * end.decay.u_law, HIDDEN: end.decay.u_hidden}
    return functional(line, end.value, end.row, "T m", besides)


def _given(line: FieldLine, axis: Axis, side: Side) -> Functional | None:
    value, u = (axis.tail_in, axis.u_tail_in) if side == "in" else (axis.tail_out, axis.u_tail_out)
    if value is None or u is None:
        return None
    return functional(line, value, np.zeros(line.spline.size), "T m", {f"tail {side} as given": u})


def _sum(line: FieldLine, parts: tuple[Functional, ...]) -> Functional:
    causes = {cause for one in parts for cause in one.besides}
    return functional(
        line,
        sum(one.value for one in parts),
        np.sum([one.gradient for one in parts], axis=0),
        "T m",
        {cause: sum(one.besides.get(cause, 0.0) for one in parts) for cause in sorted(causes)},
    )
