"""Peak field and homogeneity: extremes of the profile, by draws from its covariance.

An extreme is no linear functional: on a flat top the place of the peak is decided by noise.
So the spread is taken over profiles drawn from the covariance of the line.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.magnet.functional import Functional, functional

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis

__all__ = ["shape_results"]

Floats = npt.NDArray[np.float64]

PER_KNOT = 4  # points at which the extremes are looked for
IN_REACH = 8.0  # points that far (in u) below the peak cannot become it


def shape_results(line: FieldLine, axis: Axis) -> dict[str, Functional]:
    """Peak within the limits of the integral, homogeneity within the flat window.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Limits and flat window, within the mapped range.

    Returns
    -------
    dict of str to Functional
        ``peak_field``, ``peak_position``, and ``homogeneity`` where the central field is not
        zero.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> from fieldmap.readings.passes import Axis
    >>> spline = UniformSpline.covering(-0.3, 0.3, 0.02)
    >>> line = FieldLine(0, 0, -0.3, 0.3, spline, np.ones(33), 1e-12 * np.ones((33, 33)))
    >>> found = shape_results(line, Axis("z", (-0.2, 0.2), (-0.05, 0.05)))
    >>> round(found["peak_field"].value, 6), round(found["homogeneity"].value, 6)
    (1.0, 0.0)
    """
    s = _points(line, *axis.integrate)
    b = line.field(s)
    found = _peak(line, s[_candidates(b, line.u_field(s))])
    flat = _points(line, *axis.flat)
    if line.field(flat).mean() != 0:
        found["homogeneity"] = _flatness(line, flat)
    return found


def _candidates(b: Floats, u: Floats) -> npt.NDArray[np.intp]:
    """Indices of points that could be the highest, with two neighbours to each side."""
    high = np.flatnonzero(np.abs(b) >= np.abs(b).max() - IN_REACH * u.max())
    around = (high[:, None] + np.arange(-2, 3)).ravel()
    return np.unique(np.clip(around, 0, len(b) - 1))


def _points(line: FieldLine, low: float, high: float) -> Floats:
    count = max(int(np.ceil((high - low) / line.spline.spacing * PER_KNOT)), 2) + 1
    return np.linspace(low, high, count)


@dataclass(frozen=True, eq=False)
class _Sample:
    """Profiles drawn from the covariance of a line, at some points.

    Parameters
    ----------
    line : FieldLine
        The line.
    rows : (n, size) array
        Rows of the field at the points.
    used : int array
        Coefficients that bear on the points.
    """

    line: FieldLine
    rows: Floats
    used: npt.NDArray[np.intp]

    @property
    def deviations(self) -> Floats:
        """Drawn deviations of the field, one row a draw."""
        return np.asarray(self.line.draws[:, self.used] @ self.rows[:, self.used].T)

    def result(
        self, value: float, drawn: Floats, tangent: Floats, unit: str, what: str
    ) -> Functional:
        """A result from its drawn values: as much of it linear in the profile as they bear out.

        The part of the spread along the tangent is regressed out and keeps its gradient; what
        is left comes from the search for the extreme.
        """
        moved = drawn - value
        along = self.line.draws @ tangent
        square = float(along @ along)
        share = float(along @ moved) / square if square > 0 else 0.0
        rest = _rms(moved - share * along)
        return functional(self.line, value, share * tangent, unit, {f"search for the {what}": rest})


def _sample(line: FieldLine, s: Floats) -> _Sample:
    rows = line.spline.field_rows(s)
    return _Sample(line, rows, np.flatnonzero(rows.any(axis=0)))


def _peak(line: FieldLine, s: Floats) -> dict[str, Functional]:
    """Largest |B| and its place, a parabola through the three highest points."""
    b, sample = line.field(s), _sample(line, s)
    places, heights = _summits(s, np.vstack([b, b + sample.deviations]))
    place, height = float(places[0]), float(heights[0])
    at = np.array([place])
    slope, bend = line.spline.field_rows(at, 1)[0], float(line.field(at, 2)[0])
    sideways = -slope / bend if bend != 0 else np.zeros_like(slope)
    return {
        "peak_field": sample.result(
            height, heights[1:], line.spline.field_rows(at)[0], "T", "peak field"
        ),
        "peak_position": sample.result(place, places[1:], sideways, "m", "peak position"),
    }


def _flatness(line: FieldLine, s: Floats) -> Functional:
    b, sample = line.field(s), _sample(line, s)
    level = float(b.mean())
    value = float(_homogeneity(b))
    drawn = _homogeneity(b + sample.deviations)
    spread = sample.rows[b.argmax()] - sample.rows[b.argmin()]
    tangent = spread / (2 * abs(level)) - value / level * sample.rows.mean(axis=0)
    return sample.result(value, drawn, tangent, "1", "extremes")


def _summits(s: Floats, profiles: Floats) -> tuple[Floats, Floats]:
    """Place and height of the largest |B| of each profile, one profile a row.

    By a parabola through three points, where the highest has an even neighbour to each side.
    """
    each = np.arange(len(profiles))
    top = np.argmax(np.abs(profiles), axis=1)
    if len(s) < 3:
        return s[top], profiles[each, top]
    mid = np.clip(top, 1, len(s) - 2)
    left, centre, right = (profiles[each, mid + step] for step in (-1, 0, 1))
    bend = left - 2 * centre + right
    even = np.isclose(s[mid + 1] - s[mid], s[mid] - s[mid - 1])
    smooth = (top == mid) & even & (bend != 0)
    shift = np.zeros(len(profiles))
    np.divide(0.5 * (left - right), bend, out=shift, where=smooth)
    shift = np.clip(shift, -0.5, 0.5)
    place = np.where(smooth, s[mid] + shift * (s[mid + 1] - s[mid]), s[top])
    height = np.where(smooth, centre - 0.25 * (left - right) * shift, profiles[each, top])
    return place, height


def _homogeneity(b: Floats) -> Floats:
    spread = b.max(axis=-1) - b.min(axis=-1)
    return np.asarray(spread / (2 * np.abs(b.mean(axis=-1))))


def _rms(values: Floats) -> float:
    return float(np.sqrt(np.mean(values**2)))
