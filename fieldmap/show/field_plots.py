"""Figures of the field along a line: profile, uncertainty, decay, one position.

Each function draws on the axes it is given and returns what it drew. Positions are in mm,
fields in the unit that suits their size. What was drawn can be given new data, which is much
faster than drawing it anew.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.show.field_artists import (
    CursorArtists,
    DecayArtists,
    ProfileArtists,
    UncertaintyArtists,
    WindowArtists,
    field_factor,
    field_label,
    field_unit,
    outline_of,
    profile_reach,
    uncertainty_label,
)
from fieldmap.show.look import (
    BLUE,
    GREEN,
    INK,
    MM,
    PINK,
    VERMILION,
    dress,
    legend_above,
    position_words,
)

if TYPE_CHECKING:
    from collections.abc import Mapping

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.show.profile import Profile

__all__ = [
    "draw_cursor",
    "draw_decay",
    "draw_profile",
    "draw_uncertainty",
    "mark_windows",
]

GRIP_HEIGHT = 0.965  # of the frame: where what can be dragged is marked


def draw_profile(
    ax: Axes,
    profile: Profile,
    axis: MapAxis,
    results: Mapping[str, Quantity] | None = None,
    component: str = "B",
    *,
    grips: bool = False,
) -> ProfileArtists:
    """The field along the line with its ±2u band, and where results are taken from.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    profile : Profile
        From `profile_of`.
    axis : Axis
        Limits of integration (marked) and flat window (shaded).
    results : mapping, optional
        Results of the line; with a magnetic length among them, the field of central strength
        and that length is outlined.
    component : str
        Name of the field component.
    grips : bool
        Also mark that limits and window can be dragged.

    Returns
    -------
    ProfileArtists

    Examples
    --------
    >>> import numpy as np
    >>> from matplotlib.figure import Figure
    >>> from fieldmap.readings import Axis
    >>> from fieldmap.show.profile import Profile
    >>> s = np.linspace(-0.1, 0.1, 5)
    >>> drawn = draw_profile(
    ...     Figure().subplots(), Profile(s, 1 - s**2, 0 * s), Axis("z", (-0.1, 0.1), (-0.01, 0.01))
    ... )
    >>> drawn.limits[0].get_xdata()[0]
    -100.0
    """
    (line,) = ax.plot([], [], color=BLUE, linewidth=1.8)
    band = ax.fill_between([], [], color=BLUE, alpha=0.3, linewidth=0)
    windows = mark_windows(ax, axis, grips=grips)
    equivalent = _equivalent(ax, results or {}, field_factor(profile))
    drawn = ProfileArtists(line, band, windows, equivalent)
    drawn.show(profile)
    ax.set_ylim(*profile_reach(profile))
    dress(ax, position_words(axis.travel), field_label(profile, component))
    named: list[tuple[Artist, str]] = [
        (line, f"{component} ± 2u"),
        (windows.limits[0], "limits of integration"),
        (windows.flat, "flat window"),
    ]
    if equivalent is not None:
        named.append((equivalent, "magnetic length"))
    legend_above(ax, [handle for handle, _ in named], [name for _, name in named])
    return drawn


def mark_windows(ax: Axes, axis: MapAxis, *, grips: bool = False) -> WindowArtists:
    """Mark the limits of integration and shade the flat window.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Axes with positions in mm.
    axis : Axis
        The limits, m.
    grips : bool
        Also mark that all four can be dragged.

    Returns
    -------
    WindowArtists
    """
    first, last = (
        ax.axvline(limit * MM, color=VERMILION, linestyle=(0, (6, 2)), linewidth=1.4)
        for limit in axis.integrate
    )
    flat = ax.axvspan(
        axis.flat[0] * MM, axis.flat[1] * MM, color=GREEN, alpha=0.18, linewidth=0, zorder=0.5
    )
    pairs = ((axis.integrate, VERMILION, "v"), (axis.flat, GREEN, "D")) if grips else ()
    marks = tuple(_grips(ax, ends, colour, marker) for ends, colour, marker in pairs)
    return WindowArtists((first, last), flat, marks)


def _grips(ax: Axes, ends: tuple[float, float], colour: str, marker: str) -> Line2D:
    """Two marks near the upper edge of the frame."""
    (line,) = ax.plot(
        [end * MM for end in ends],
        [GRIP_HEIGHT, GRIP_HEIGHT],
        color="none",
        marker=marker,
        markersize=7,
        markerfacecolor=colour,
        markeredgecolor=INK,
        markeredgewidth=0.6,
        transform=ax.get_xaxis_transform(),
        zorder=4,
    )
    return line


def _equivalent(ax: Axes, results: Mapping[str, Quantity], factor: float) -> Line2D | None:
    outline = outline_of(results, factor)
    if outline is None:
        return None
    (line,) = ax.plot(*outline, color=INK, linestyle=(0, (2, 1.5)), linewidth=1.2)
    return line


def draw_uncertainty(
    ax: Axes,
    profile: Profile,
    axis: MapAxis | None = None,
    component: str = "B",
    *,
    grips: bool = False,
) -> UncertaintyArtists:
    """Half width of the ±2u band along the line, which is too narrow to see on the field itself.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    profile : Profile
        From `profile_of`.
    axis : Axis, optional
        Names the position axis and marks limits and window.
    component : str
        Name of the field component.
    grips : bool
        Also mark that limits and window can be dragged.

    Returns
    -------
    UncertaintyArtists
    """
    (line,) = ax.plot([], [], color=BLUE, linewidth=1.4)
    area = ax.fill_between([], [], color=BLUE, alpha=0.2, linewidth=0)
    windows = None if axis is None else mark_windows(ax, axis, grips=grips)
    drawn = UncertaintyArtists(line, area, windows)
    drawn.show(profile)
    travel = axis.travel if axis else "z"
    dress(ax, position_words(travel), uncertainty_label(profile, component))
    return drawn


def draw_decay(ax: Axes, profile: Profile, travel: str = "z", component: str = "B") -> DecayArtists:
    """The size of the field on a logarithmic scale, beside the half width of its band.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Where to draw.
    profile : Profile
        From `profile_of`.
    travel : str
        Name of the position axis.
    component : str
        Name of the field component.

    Returns
    -------
    DecayArtists
        The field, and 2u: where the field falls below it, it is not told from zero.
    """
    (line,) = ax.plot([], [], color=BLUE, linewidth=1.8)
    (floor,) = ax.plot([], [], color=PINK, linewidth=1.4, linestyle=(0, (5, 2)))
    drawn = DecayArtists(line, floor)
    drawn.show(profile)
    dress(ax, position_words(travel), f"|{component}| ({field_unit(profile)})")
    legend_above(ax, [line, floor], [f"|{component}|", "2u: below it not told from zero"])
    return drawn


def draw_cursor(ax: Axes, profile: Profile, at: float, value: float) -> CursorArtists:
    """Mark one position and the field there, on a figure of that profile.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Axes that `draw_profile` or `draw_decay` drew on.
    profile : Profile
        The same profile: it decides the unit.
    at : float
        Position, m.
    value : float
        Field there, T.

    Returns
    -------
    CursorArtists
    """
    shown = (abs(value) if ax.get_yscale() == "log" else value) * field_factor(profile)
    line = ax.axvline(at * MM, color=INK, linewidth=1.0)
    (point,) = ax.plot(
        [at * MM], [shown], marker="o", markersize=8, color="none", markeredgecolor=INK
    )
    point.set_markeredgewidth(1.6)
    return CursorArtists(line, point)
