"""Figures of the field along a line: profile, uncertainty, decay, one position.

Each function draws on the axes it is given and returns what it drew. Positions are in mm,
fields in the unit that suits their size.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

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
from fieldmap.show.numbers import scale_for

if TYPE_CHECKING:
    from collections.abc import Mapping

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.collections import PolyCollection
    from matplotlib.lines import Line2D
    from matplotlib.patches import Rectangle

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.show.profile import Profile

__all__ = [
    "CursorArtists",
    "ProfileArtists",
    "draw_cursor",
    "draw_decay",
    "draw_profile",
    "draw_uncertainty",
    "mark_windows",
]

K = 2.0  # bands are at ±k·u


@dataclass(frozen=True, eq=False)
class ProfileArtists:
    """What `draw_profile` drew; `equivalent` is None where there is no magnetic length."""

    line: Line2D
    band: PolyCollection
    limits: tuple[Line2D, Line2D]
    flat: Rectangle
    equivalent: Line2D | None


@dataclass(frozen=True, eq=False)
class CursorArtists:
    """What `draw_cursor` drew."""

    line: Line2D
    point: Line2D


def draw_profile(
    ax: Axes,
    profile: Profile,
    axis: MapAxis,
    results: Mapping[str, Quantity] | None = None,
    component: str = "B",
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
    scale = scale_for("T", [float(np.abs(profile.b).max())])
    b, half = profile.b * scale.factor, K * profile.u * scale.factor
    band = ax.fill_between(profile.s * MM, b - half, b + half, color=BLUE, alpha=0.3, linewidth=0)
    (line,) = ax.plot(profile.s * MM, b, color=BLUE, linewidth=1.8)
    limits, flat = mark_windows(ax, axis)
    equivalent = _equivalent(ax, results or {}, scale.factor)
    dress(ax, position_words(axis.travel), f"{component} ({scale.unit})")
    named: list[tuple[Artist, str]] = [
        (line, f"{component} ± 2u"),
        (limits[0], "limits of integration"),
        (flat, "flat window"),
    ]
    if equivalent is not None:
        named.append((equivalent, "magnetic length"))
    legend_above(ax, [handle for handle, _ in named], [name for _, name in named])
    return ProfileArtists(line, band, limits, flat, equivalent)


def mark_windows(ax: Axes, axis: MapAxis) -> tuple[tuple[Line2D, Line2D], Rectangle]:
    """Mark the limits of integration and shade the flat window.

    Parameters
    ----------
    ax : matplotlib.axes.Axes
        Axes with positions in mm.
    axis : Axis
        The limits, m.

    Returns
    -------
    tuple
        The two limits, and the window.
    """
    first, last = (
        ax.axvline(limit * MM, color=VERMILION, linestyle=(0, (6, 2)), linewidth=1.4)
        for limit in axis.integrate
    )
    flat = ax.axvspan(
        axis.flat[0] * MM, axis.flat[1] * MM, color=GREEN, alpha=0.18, linewidth=0, zorder=0.5
    )
    return (first, last), flat


def _equivalent(ax: Axes, results: Mapping[str, Quantity], factor: float) -> Line2D | None:
    """Outline of the uniform field that has the same integral: central field times length."""
    if "boundary_in" not in results or "boundary_out" not in results:
        return None
    low, high = results["boundary_in"].value * MM, results["boundary_out"].value * MM
    level = results["central_field"].value * factor
    (line,) = ax.plot(
        [low, low, high, high],
        [0, level, level, 0],
        color=INK,
        linestyle=(0, (2, 1.5)),
        linewidth=1.2,
    )
    return line


def draw_uncertainty(
    ax: Axes, profile: Profile, axis: MapAxis | None = None, component: str = "B"
) -> Line2D:
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

    Returns
    -------
    matplotlib.lines.Line2D
    """
    half = K * profile.u
    scale = scale_for("T", [float(half.max())])
    shown = half * scale.factor
    (line,) = ax.plot(profile.s * MM, shown, color=BLUE, linewidth=1.4)
    low, scale_of_axis = 0.0, "linear"
    if half.min() > 0:  # in a fringe it rises by decades
        low, scale_of_axis = 0.6 * float(shown.min()), "log"
    if ax.get_yscale() != scale_of_axis:
        ax.set_yscale(scale_of_axis)
    ax.fill_between(profile.s * MM, low, shown, color=BLUE, alpha=0.2, linewidth=0)
    if axis is not None:
        mark_windows(ax, axis)
    ax.set_ylim(low, 1.6 * float(shown.max()) or 1.0)
    dress(ax, position_words(axis.travel if axis else "z"), f"2u({component}) ({scale.unit})")
    return line


def draw_decay(
    ax: Axes, profile: Profile, travel: str = "z", component: str = "B"
) -> tuple[Line2D, Line2D]:
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
    tuple of matplotlib.lines.Line2D
        The field, and 2u: where the field falls below it, it is not told from zero.
    """
    scale = scale_for("T", [float(np.abs(profile.b).max())])
    size, half = np.abs(profile.b) * scale.factor, K * profile.u * scale.factor
    if ax.get_yscale() != "log":
        ax.set_yscale("log")
    (line,) = ax.plot(profile.s * MM, size, color=BLUE, linewidth=1.8)
    (floor,) = ax.plot(profile.s * MM, half, color=PINK, linewidth=1.4, linestyle=(0, (5, 2)))
    seen = half[half > 0]
    if len(seen) and size.max() > 0:
        ax.set_ylim(0.3 * min(float(seen.min()), float(size.max())), 3 * float(size.max()))
    dress(ax, position_words(travel), f"|{component}| ({scale.unit})")
    legend_above(ax, [line, floor], [f"|{component}|", "2u: below it not told from zero"])
    return line, floor


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
    scale = scale_for("T", [float(np.abs(profile.b).max())])
    shown = (abs(value) if ax.get_yscale() == "log" else value) * scale.factor
    line = ax.axvline(at * MM, color=INK, linewidth=1.0)
    (point,) = ax.plot(
        [at * MM], [shown], marker="o", markersize=8, color="none", markeredgecolor=INK
    )
    point.set_markeredgewidth(1.6)
    return CursorArtists(line, point)
