"""Peak field and homogeneity: extremes of the profile, by draws from its covariance.

An extreme is no linear functional: on a flat top the place of the peak is decided by noise.
So the spread is taken over profiles drawn from the covariance, with a generator of its own.
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

DRAWS = 400
PER_KNOT = 4  # points at which the extremes are looked for
SEED = 20_061  # the same map gives the same digits
SEARCH = "search for the extreme,"
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
    coefficients : (DRAWS, used) array
        Drawn deviations of those.
    """

    line: FieldLine
    rows: Floats
    used: npt.NDArray[np.intp]
    coefficients: Floats

    @property
    def deviations(self) -> Floats:
        """Drawn deviations of the field, one row a draw."""
        return np.asarray(self.coefficients @ self.rows[:, self.used].T)

    def result(self, value: float, drawn: Floats, tangent: Floats, unit: str) -> Functional:
        """A result from its drawn values: as much of it linear in the profile as they bear out.

        The part of the spread along the tangent is regressed out and keeps its gradient; what
        is left comes from the search for the extreme.
        """
        moved = drawn - value
        along = self.coefficients @ tangent[self.used]
        square = float(along @ along)
        share = float(along @ moved) / square if square > 0 else 0.0
        rest = _rms(moved - share * along)
        return functional(self.line, value, share * tangent, unit, {f"{SEARCH} {unit}": rest})


def _sample(line: FieldLine, s: Floats) -> _Sample:
    rows = line.spline.field_rows(s)
    used = np.flatnonzero(rows.any(axis=0))
    values, vectors = np.linalg.eigh(line.covariance[np.ix_(used, used)])
    root = vectors * np.sqrt(np.maximum(values, 0))
    normal = np.random.default_rng(SEED).standard_normal((DRAWS, len(used)))
    return _Sample(line, rows, used, normal @ root.T)


def _peak(line: FieldLine, s: Floats) -> dict[str, Functional]:
    """Largest |B| and its place, a parabola through the three highest points."""
    b, sample = line.field(s), _sample(line, s)
    place, height = _summit(s, b)
    drawn = np.array([_summit(s, b + deviation) for deviation in sample.deviations])
    at = np.array([place])
    slope, bend = line.spline.field_rows(at, 1)[0], float(line.field(at, 2)[0])
    sideways = -slope / bend if bend != 0 else np.zeros_like(slope)
    return {
        "peak_field": sample.result(height, drawn[:, 1], line.spline.field_rows(at)[0], "T"),
        "peak_position": sample.result(place, drawn[:, 0], sideways, "m"),
    }


def _flatness(line: FieldLine, s: Floats) -> Functional:
    b, sample = line.field(s), _sample(line, s)
    level = float(b.mean())
    value = float(_homogeneity(b))
    drawn = _homogeneity(b + sample.deviations)
    spread = sample.rows[b.argmax()] - sample.rows[b.argmin()]
    tangent = spread / (2 * abs(level)) - value / level * sample.rows.mean(axis=0)
    return sample.result(value, drawn, tangent, "1")


def _summit(s: Floats, b: Floats) -> tuple[float, float]:
    i = int(np.argmax(np.abs(b)))
    if not 0 < i < len(s) - 1 or not np.isclose(s[i + 1] - s[i], s[i] - s[i - 1]):
        return float(s[i]), float(b[i])
    left, mid, right = b[i - 1 : i + 2]
    bend = left - 2 * mid + right
    if bend == 0:
        return float(s[i]), float(mid)
    shift = float(np.clip(0.5 * (left - right) / bend, -0.5, 0.5))
    return float(s[i] + shift * (s[i + 1] - s[i])), float(mid - 0.25 * (left - right) * shift)


def _homogeneity(b: Floats) -> Floats:
    spread = b.max(axis=-1) - b.min(axis=-1)
    return np.asarray(spread / (2 * np.abs(b.mean(axis=-1))))


def _rms(values: Floats) -> float:
    return float(np.sqrt(np.mean(values**2)))
