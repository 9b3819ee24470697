"""Whole figures: axes laid out, drawn on, and put into words.

Each ``…_figure`` function draws on a figure that it empties first and returns the text
alternative; each ``…_picture`` function makes the figure too and returns the picture.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.estimate.map import map_axis, map_magnet
from fieldmap.magnet.evaluate import evaluate
from fieldmap.show.captions import overlaps_words, passes_words, residuals_words
from fieldmap.show.overlaps import overlaps_of
from fieldmap.show.picture import Picture, blank_figure, paint
from fieldmap.show.plots import draw_overlaps, draw_passes, draw_residuals
from fieldmap.show.profile import field_at, profile_of
from fieldmap.show.scenes import (
    BOTTOM,
    LEFT,
    LEGEND_ROW,
    RIGHT,
    DecayScene,
    ProfileScene,
    ReadingsScene,
    UncertaintyScene,
)

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr
    from matplotlib.figure import Figure

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.readings.passes import Campaign, Pass
    from fieldmap.show.scenes import Cursor

__all__ = [
    "BOTTOM",
    "LEFT",
    "LEGEND_ROW",
    "RIGHT",
    "decay_figure",
    "decay_picture",
    "overlaps_figure",
    "overlaps_picture",
    "passes_figure",
    "passes_picture",
    "profile_figure",
    "profile_picture",
    "residuals_figure",
    "residuals_picture",
    "uncertainty_figure",
    "uncertainty_picture",
]


def passes_figure(
    figure: Figure, passes: Sequence[Pass], travel: str = "z", marks: Sequence[int] | None = None
) -> str:
    """Draw the passes as recorded; parameters as for `draw_passes`."""
    ReadingsScene(figure).show(lambda ax: draw_passes(ax, passes, travel, marks))
    return passes_words(passes, travel)


def residuals_figure(
    figure: Figure, fmap: xr.Dataset, travel: str = "z", marks: Sequence[int] | None = None
) -> str:
    """Draw the normalised residuals; parameters as for `draw_residuals`."""
    ReadingsScene(figure).show(lambda ax: draw_residuals(ax, fmap, travel, marks))
    return residuals_words(fmap)


def overlaps_figure(
    figure: Figure, fmap: xr.Dataset, travel: str = "z", marks: Sequence[int] | None = None
) -> str:
    """Draw each pass against the map of all; parameters as for `draw_residuals`."""
    found = overlaps_of(fmap)
    ReadingsScene(figure).show(lambda ax: draw_overlaps(ax, found, travel, marks))
    return overlaps_words(found)


def profile_figure(
    figure: Figure,
    fmap: xr.Dataset,
    axis: MapAxis,
    results: Mapping[str, Quantity] | None = None,
    line: int = 0,
    span: tuple[float, float] | None = None,
    cursor: float | None = None,
) -> str:
    """Draw the profile, and below it the half width of its band.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Emptied first.
    fmap : xarray.Dataset
        From `stitch`.
    axis : Axis
        Limits and flat window.
    results : mapping, optional
        Results of the line.
    line : int
        Index of the line.
    span : tuple of float, optional
        Part of the line, m; all of it if not given.
    cursor : float, optional
        Position to mark, m.

    Returns
    -------
    str
        The text alternative.
    """
    profile, component = profile_of(fmap, line, span), map_magnet(fmap).component
    marked = _cursor(fmap, cursor, line)
    return ProfileScene(figure).show(profile, axis, results, component, marked)


def uncertainty_figure(
    figure: Figure,
    fmap: xr.Dataset,
    axis: MapAxis,
    line: int = 0,
    span: tuple[float, float] | None = None,
) -> str:
    """Draw the half width of the band alone; parameters as for `profile_figure`."""
    profile, component = profile_of(fmap, line, span), map_magnet(fmap).component
    return UncertaintyScene(figure).show(profile, axis, component)


def decay_figure(
    figure: Figure,
    fmap: xr.Dataset,
    axis: MapAxis,
    line: int = 0,
    span: tuple[float, float] | None = None,
    cursor: float | None = None,
) -> str:
    """Draw the size of the field on a logarithmic scale; parameters as for `profile_figure`."""
    profile, component = profile_of(fmap, line, span), map_magnet(fmap).component
    return DecayScene(figure).show(profile, axis, component, _cursor(fmap, cursor, line))


def passes_picture(campaign: Campaign) -> Picture:
    """The passes of a campaign as recorded."""
    figure = blank_figure()
    return paint(figure, passes_figure(figure, campaign.passes, campaign.axis.travel))


def profile_picture(
    fmap: xr.Dataset,
    axis: MapAxis | None = None,
    line: int = 0,
    span: tuple[float, float] | None = None,
) -> Picture:
    """The profile of a map with its magnetic length.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    line : int
        Index of the line.
    span : tuple of float, optional
        Part of the line, m.

    Returns
    -------
    Picture
        Shown by a notebook cell that ends with it.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> profile_picture(fmap).words.split(":")[1][:8]
    ' largest'
    """
    figure, axis = blank_figure(), axis or map_axis(fmap)
    results = evaluate(fmap, axis=axis).lines[line].results
    return paint(figure, profile_figure(figure, fmap, axis, results, line, span))


def uncertainty_picture(fmap: xr.Dataset, axis: MapAxis | None = None, line: int = 0) -> Picture:
    """The half width of the band along a line."""
    figure = blank_figure()
    return paint(figure, uncertainty_figure(figure, fmap, axis or map_axis(fmap), line))


def residuals_picture(fmap: xr.Dataset) -> Picture:
    """The normalised residuals of a map."""
    figure = blank_figure()
    return paint(figure, residuals_figure(figure, fmap, map_axis(fmap).travel))


def overlaps_picture(fmap: xr.Dataset) -> Picture:
    """Each pass of a map against the map of all: which one disagrees, and where."""
    figure = blank_figure()
    return paint(figure, overlaps_figure(figure, fmap, map_axis(fmap).travel))


def decay_picture(
    fmap: xr.Dataset, line: int = 0, span: tuple[float, float] | None = None
) -> Picture:
    """The size of the field of a map on a logarithmic scale."""
    figure = blank_figure()
    return paint(figure, decay_figure(figure, fmap, map_axis(fmap), line, span))


def _cursor(fmap: xr.Dataset, at: float | None, line: int) -> Cursor | None:
    """The field at a position to mark."""
    return None if at is None else (at, *field_at(fmap, at, line))
