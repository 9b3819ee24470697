"""Integrated field, central field, magnetic length, boundaries: weights on the spline.

Each result is a linear functional of the coefficients of B, or a ratio of two; its
uncertainty follows from the full covariance, so a gain that is common to numerator and
denominator cancels by itself and a position scale does not.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError
from fieldmap.magnet.functional import Functional, functional

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis

__all__ = ["length_results"]

Floats = npt.NDArray[np.float64]

SMALLEST_LEVEL = 3.0  # a central field below this many u has no length


def length_results(line: FieldLine, axis: Axis) -> dict[str, Functional]:
    """Results that are ratios of integrals.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Limits of the integral and flat window, within the mapped range.

    Returns
    -------
    dict of str to Functional
        ``integrated_field``, ``central_field``, ``magnetic_length``, ``boundary_in``,
        ``boundary_out``, ``magnetic_centre``; only the first two where the central field is
        not distinct from zero.

    Raises
    ------
    RefusedError
        ``limits-outside-map``.
    InputError
        Limits that are no numbers, or the upper one first.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> from fieldmap.readings.passes import Axis
    >>> spline = UniformSpline.covering(-0.3, 0.3, 0.02)
    >>> line = FieldLine(0, 0, -0.3, 0.3, spline, np.ones(33), 1e-6 * np.eye(33))
    >>> found = length_results(line, Axis("z", (-0.2, 0.2), (-0.05, 0.05)))
    >>> round(found["magnetic_length"].value, 9)
    0.4
    """
    start, stop = axis.integrate
    flat_start, flat_stop = axis.flat
    _check_window(line, start, stop, "integrate")
    _check_window(line, flat_start, flat_stop, "flat")
    middle = 0.5 * (flat_start + flat_stop)
    whole = line.spline.integral_row(start, stop)
    level = line.spline.integral_row(flat_start, flat_stop) / (flat_stop - flat_start)
    central = functional(line, float(level @ line.b), level, "T")
    results = {
        "integrated_field": functional(line, float(whole @ line.b), whole, "T m"),
        "central_field": central,
    }
    if abs(central.value) < SMALLEST_LEVEL * central.u:
        return results
    upstream = line.spline.integral_row(start, middle)
    downstream = line.spline.integral_row(middle, stop)
    results["magnetic_length"] = _ratio(line, whole, level)
    results["boundary_in"] = _ratio(line, -upstream, level, middle)
    results["boundary_out"] = _ratio(line, downstream, level, middle)
    results["magnetic_centre"] = _ratio(line, 0.5 * (downstream - upstream), level, middle)
    return results


def _ratio(line: FieldLine, above: Floats, below: Floats, offset: float = 0.0) -> Functional:
    """Offset + (above @ b)/(below @ b) in m, to first order in the covariance."""
    level = float(below @ line.b)
    value = float(above @ line.b) / level
    return functional(line, offset + value, (above - value * below) / level, "m")


def _check_window(line: FieldLine, low: float, high: float, key: str) -> None:
    if not low < high:
        found = f"{low * 1e3:.6g} to {high * 1e3:.6g} mm"
        raise InputError(f"[axis] {key}", found, "the lower end first", "turn the two round")
    if line.covers(low, high):
        return
    raise RefusedError(
        "limits-outside-map",
        f"[axis] {key}",
        f"found {low * 1e3:.6g} to {high * 1e3:.6g} mm, expected limits within the mapped range "
        f"{line.low * 1e3:.6g} to {line.high * 1e3:.6g} mm; move the limits or scan further.",
    )
