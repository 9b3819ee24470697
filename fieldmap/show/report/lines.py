"""The parts of a report that belong to one line: profile, results, budgets, fringes."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.estimate.map import map_lines
from fieldmap.show.budget_plots import budget_figure
from fieldmap.show.figures import profile_figure, residuals_figure
from fieldmap.show.picture import blank_figure
from fieldmap.show.report.fringe import fringe_figure, fringe_part
from fieldmap.show.report.parts import Section, figure
from fieldmap.show.report.results import budget_parts, charted, results_part
from fieldmap.show.vector import inline_svg

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    import xarray as xr
    from matplotlib.figure import Figure

    from fieldmap.magnet.results import Results
    from fieldmap.readings.passes import Axis

__all__ = ["line_parts", "residuals_part"]

SIZE = (7.1, 3.6)  # inches: as wide as the text on paper
LOW = 2.4


def line_parts(
    fmap: xr.Dataset, results: Results, axis: Axis, index: int, k: float, names: Iterator[str]
) -> list[Section]:
    """Profile, results, budgets and fringes of one line.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    results : Results
        From `evaluate`.
    axis : Axis
        Limits and flat window.
    index : int
        Index of the line.
    k : float
        Coverage factor.
    names : iterator of str
        A name for each figure.

    Returns
    -------
    list of Section
    """
    own = results.lines[index]
    profile = _drawn(lambda f: profile_figure(f, fmap, axis, own.results, index), next(names))
    chart = _drawn(lambda f: budget_figure(f, fmap, charted(own), axis, index), next(names), LOW)
    parts = [
        Section("Profile", profile),
        Section("Results", results_part(own, axis, k)),
        Section("Uncertainty budgets", chart + budget_parts(fmap, axis, index, k)),
    ]
    if own.fringes:
        line = map_lines(fmap)[index]
        off = _drawn(lambda f: fringe_figure(f, line, own.fringes), next(names), LOW)
        parts.append(Section("Fringe field", fringe_part(own.fringes, k) + off))
    return parts


def residuals_part(fmap: xr.Dataset, axis: Axis, name: str) -> str:
    """The residuals of all passes as a figure."""
    return _drawn(lambda f: residuals_figure(f, fmap, axis.travel), name)


def _drawn(draw: Callable[[Figure], str], name: str, height: float = SIZE[1]) -> str:
    """A figure with its words."""
    sheet = blank_figure()
    sheet.set_size_inches(SIZE[0], height)
    words = draw(sheet)
    return figure(inline_svg(sheet, words, name), words)
