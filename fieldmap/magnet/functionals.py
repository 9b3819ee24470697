"""All results of a line that are functionals of its profile."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.magnet.fringe.integral import fringe_integral_results
from fieldmap.magnet.length import length_results
from fieldmap.magnet.shape import shape_results
from fieldmap.magnet.tails.tail import tail_results

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.magnet.functional import Functional
    from fieldmap.readings.passes import Axis

__all__ = ["line_functionals"]


def line_functionals(line: FieldLine, axis: Axis, gap: float) -> dict[str, Functional]:
    """Gather the results of one line.

    Parameters
    ----------
    line : FieldLine
        The line.
    axis : Axis
        Limits of the integral, flat window, and tails that are known otherwise.
    gap : float
        Full gap or bore, m.

    Returns
    -------
    dict of str to Functional
        By the keys of results.json, in the order in which they are shown.

    Raises
    ------
    RefusedError
        ``limits-outside-map``.

    Examples
    --------
    >>> from fieldmap.estimate import map_axis, map_lines, stitch
    >>> from fieldmap.estimate.map import map_magnet
    >>> from fieldmap.readings import load
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = stitch(load(demo_folder() / "foreign_tables"))
    >>> (line,) = map_lines(fmap)
    >>> found = line_functionals(line, map_axis(fmap), map_magnet(fmap).gap)
    >>> list(found)[-3:]
    ['integrated_field_total', 'fringe_integral_in', 'fringe_integral_out']
    """
    length = length_results(line, axis)
    return {
        **length,
        **shape_results(line, axis),
        **tail_results(line, axis, gap, length),
        **fringe_integral_results(line, axis, gap, length),
    }
