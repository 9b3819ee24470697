"""Whole figures: axes laid out, drawn on, and put into words.

Each ``…_figure`` function draws on a figure that it empties first and returns the text
alternative; each ``…_picture`` function makes the figure too and returns the picture.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from fieldmap.estimate.map import map_axis, map_magnet, map_passes
from fieldmap.magnet.evaluate import evaluate
from fieldmap.show.captions import (
    cursor_words,
    decay_words,
    passes_words,
    profile_words,
    residuals_words,
    uncertainty_words,
)
from fieldmap.show.field_plots import (
    draw_cursor,
    draw_decay,
    draw_profile,
    draw_uncertainty,
    mark_windows,
)
from fieldmap.show.picture import Picture, blank_figure, paint
from fieldmap.show.plots import draw_passes, draw_residuals
from fieldmap.show.profile import field_at, profile_of

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.readings.passes import Campaign, Pass

__all__ = [
    "decay_figure",
    "decay_picture",
    "passes_figure",
    "passes_picture",
    "profile_figure",
    "profile_picture",
    "residuals_figure",
    "residuals_picture",
    "uncertainty_figure",
    "uncertainty_picture",
]

# inches around the axes: tick labels, axis labels, legend
LEFT: Final = 0.85
RIGHT: Final = 0.12
BOTTOM: Final = 0.48
LEGEND_ROW: Final = 0.2
COLUMNS: Final = 4
MOST_ROWS: Final = 3


def passes_figure(
    figure: Figure, passes: Sequence[Pass], travel: str = "z", marks: Sequence[int] | None = None
) -> str:
    """Draw the passes as recorded; parameters as for `draw_passes`."""
    ax = _single(figure, "passes", len(passes))
    draw_passes(ax, passes, travel, marks)
    return passes_words(passes, travel)


def residuals_figure(
    figure: Figure, fmap: xr.Dataset, travel: str = "z", marks: Sequence[int] | None = None
) -> str:
    """Draw the normalised residuals; parameters as for `draw_residuals`."""
    ax = _single(figure, "residuals", len(map_passes(fmap)))
    draw_residuals(ax, fmap, travel, marks)
    return residuals_words(fmap)


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
    profile = profile_of(fmap, line, span)
    component = map_magnet(fmap).component
    upper, lower = _stacked(figure, "profile")
    draw_profile(upper, profile, axis, results, component)
    draw_uncertainty(lower, profile, axis, component)
    upper.set_xlabel("")
    upper.tick_params(labelbottom=False)
    _narrow((upper, lower), profile.s[0], profile.s[-1])
    words = profile_words(profile, axis, results, component)
    if cursor is None:
        return words
    value, u = field_at(fmap, cursor, line)
    draw_cursor(upper, profile, cursor, value)
    return f"{words} {cursor_words(cursor, value, u, component)}"


def uncertainty_figure(
    figure: Figure,
    fmap: xr.Dataset,
    axis: MapAxis,
    line: int = 0,
    span: tuple[float, float] | None = None,
) -> str:
    """Draw the half width of the band alone; parameters as for `profile_figure`."""
    profile = profile_of(fmap, line, span)
    component = map_magnet(fmap).component
    ax = _single(figure, "uncertainty", 0)
    draw_uncertainty(ax, profile, axis, component)
    _narrow((ax,), profile.s[0], profile.s[-1])
    return uncertainty_words(profile, component)


def decay_figure(
    figure: Figure,
    fmap: xr.Dataset,
    axis: MapAxis,
    line: int = 0,
    span: tuple[float, float] | None = None,
    cursor: float | None = None,
) -> str:
    """Draw the size of the field on a logarithmic scale; parameters as for `profile_figure`."""
    profile = profile_of(fmap, line, span)
    component = map_magnet(fmap).component
    ax = _single(figure, "decay", 2)
    draw_decay(ax, profile, axis.travel, component)
    mark_windows(ax, axis)
    _narrow((ax,), profile.s[0], profile.s[-1])
    words = decay_words(profile, component)
    if cursor is None:
        return words
    value, u = field_at(fmap, cursor, line)
    draw_cursor(ax, profile, cursor, value)
    return f"{words} {cursor_words(cursor, value, u, component)}"


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


def decay_picture(
    fmap: xr.Dataset, line: int = 0, span: tuple[float, float] | None = None
) -> Picture:
    """The size of the field of a map on a logarithmic scale."""
    figure = blank_figure()
    return paint(figure, decay_figure(figure, fmap, map_axis(fmap), line, span))


def _single(figure: Figure, kind: str, entries: int) -> Axes:
    """One axes with room for a legend of so many entries above it."""
    rows = min(-(-entries // COLUMNS), MOST_ROWS)
    if not _wiped(figure, kind):
        figure.subplots(subplot_kw={"label": kind})
    _margins(figure, rows)
    return figure.axes[0]


def _stacked(figure: Figure, kind: str) -> tuple[Axes, Axes]:
    """A tall axes above a low one, with common positions."""
    if not _wiped(figure, kind):
        figure.subplots(2, 1, sharex=True, height_ratios=(2.6, 1), subplot_kw={"label": kind})
    _margins(figure, 1)
    return figure.axes[0], figure.axes[1]


def _wiped(figure: Figure, kind: str) -> bool:
    """Empty the figure; keep its axes if they are of the same kind: they are slow to make."""
    if not figure.axes or figure.axes[0].get_label() != kind:
        figure.clear()
        return False
    for ax in figure.axes:
        legend = ax.get_legend()
        for artist in (*ax.lines, *ax.collections, *ax.patches, *([legend] if legend else [])):
            artist.remove()
        ax.relim()
        ax.autoscale(enable=True)
    return True


def _margins(figure: Figure, legend_rows: int) -> None:
    width, height = figure.get_size_inches()
    figure.subplots_adjust(
        left=LEFT / width,
        right=1 - RIGHT / width,
        bottom=BOTTOM / height,
        top=1 - (0.12 + LEGEND_ROW * legend_rows) / height,
        hspace=0.08,
    )


def _narrow(axes: Sequence[Axes], low: float, high: float) -> None:
    """Show exactly the stretch that was sampled, with a little air."""
    air = 0.015 * (high - low)
    for ax in axes:
        ax.set_xlim((low - air) * 1e3, (high + air) * 1e3)
