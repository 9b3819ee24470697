"""The field of a map as a source: what a simulated bench can measure again."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from fieldmap.bench.sources import Source
from fieldmap.estimate.spline import DEGREE

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Floats

__all__ = ["MappedField"]


@dataclass(frozen=True, eq=False)
class MappedField(Source):
    """The field of one line of a map; beyond its knots the last value stays.

    The knots reach as far as any probe saw when it stood at the ends of the mapped range.

    Parameters
    ----------
    line : FieldLine
        From `map_lines`.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> spline = UniformSpline.covering(-0.3, 0.3, 0.02)
    >>> line = FieldLine(0, 0, -0.3, 0.3, spline, np.ones(33), np.zeros((33, 33)))
    >>> field = MappedField(line)
    >>> round(field.between(-0.5, 0.1), 9), float(field.field(0.7).round(9))
    (0.6, 1.0)
    """

    line: FieldLine

    @property
    def total(self) -> float:
        """Infinite, unless the field ends at zero, T m."""
        spline = self.line.spline
        ends = float(self._field(np.array([spline.start, spline.stop])).sum())
        if ends:
            return math.copysign(math.inf, ends)
        return self.between(spline.start, spline.stop)

    @property
    def centre(self) -> float:
        """Middle of the mapped range, m."""
        return 0.5 * (self.line.low + self.line.high)

    @cached_property
    def _spline(self) -> Any:
        from scipy.interpolate import BSpline

        own = self.line.spline
        knots = own.start + own.spacing * (np.arange(own.size + DEGREE + 1) - DEGREE)
        return BSpline(knots, self.line.b, DEGREE)

    @cached_property
    def _running(self) -> Any:
        return self._spline.antiderivative()

    def _within(self, s: Floats) -> Floats:
        return np.clip(s, self.line.spline.start, self.line.spline.stop)

    def _field(self, s: Floats) -> Floats:
        return np.asarray(self._spline(self._within(s)))

    def _integral(self, s: Floats) -> Floats:
        inside = self._within(s)
        start = self._running(self.line.spline.start)
        beyond = (s - inside) * self._spline(inside)
        return np.asarray(self._running(inside) - start + beyond)
