"""What is drawn of a field along a line, and how it is given new data.

New data for what was drawn is much faster than drawing it anew: limits that follow the mouse
need that.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.show.look import MM
from fieldmap.show.numbers import scale_for

if TYPE_CHECKING:
    from collections.abc import Mapping

    from matplotlib.collections import PolyCollection
    from matplotlib.lines import Line2D
    from matplotlib.patches import Rectangle

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.show.profile import Profile

__all__ = [
    "CursorArtists",
    "DecayArtists",
    "K",
    "ProfileArtists",
    "UncertaintyArtists",
    "WindowArtists",
    "field_factor",
    "field_label",
    "field_unit",
    "outline_of",
    "profile_reach",
    "uncertainty_factor",
    "uncertainty_label",
]

Floats = npt.NDArray[np.float64]

K = 2.0  # bands are at ±k·u
AIR = 0.05  # above and below a curve, of its height


@dataclass(frozen=True, eq=False)
class WindowArtists:
    """Limits of integration and flat window, as `mark_windows` drew them."""

    limits: tuple[Line2D, Line2D]
    flat: Rectangle
    grips: tuple[Line2D, ...] = ()

    def move(self, axis: MapAxis) -> None:
        """Put them where the limits are now."""
        for line, limit in zip(self.limits, axis.integrate, strict=True):
            line.set_xdata([limit * MM, limit * MM])
        low, high = axis.flat
        self.flat.set_x(low * MM)
        self.flat.set_width((high - low) * MM)
        for grips, ends in zip(self.grips, (axis.integrate, axis.flat), strict=False):
            grips.set_xdata([end * MM for end in ends])


@dataclass(frozen=True, eq=False)
class ProfileArtists:
    """What `draw_profile` drew; `equivalent` is None where there is no magnetic length."""

    line: Line2D
    band: PolyCollection
    windows: WindowArtists
    equivalent: Line2D | None

    @property
    def limits(self) -> tuple[Line2D, Line2D]:
        """Marks of the limits of integration."""
        return self.windows.limits

    @property
    def flat(self) -> Rectangle:
        """Shade of the flat window."""
        return self.windows.flat

    def show(self, profile: Profile) -> None:
        """Show another profile in the unit that suits it; labels and limits stay."""
        factor = field_factor(profile)
        b, half = profile.b * factor, K * profile.u * factor
        self.line.set_data(profile.s * MM, b)
        self.band.set_verts([_area(profile.s * MM, b - half, b + half)])


@dataclass(frozen=True, eq=False)
class UncertaintyArtists:
    """Half width of the band, the area below it, and limits and window where they are known."""

    line: Line2D
    area: PolyCollection
    windows: WindowArtists | None = None

    def show(self, profile: Profile) -> None:
        """Show that of another profile, and set the scale that suits it."""
        ax = self.line.axes
        assert ax is not None
        half = K * profile.u * uncertainty_factor(profile)
        low, scale = 0.0, "linear"
        if half.min() > 0:  # in a fringe it rises by decades
            low, scale = 0.6 * float(half.min()), "log"
        if ax.get_yscale() != scale:
            ax.set_yscale(scale)
        self.line.set_data(profile.s * MM, half)
        self.area.set_verts([_area(profile.s * MM, np.full(len(half), low), half)])
        ax.set_ylim(low, 1.6 * float(half.max()) or 1.0)


@dataclass(frozen=True, eq=False)
class DecayArtists:
    """Size of the field, and the half width of its band."""

    line: Line2D
    floor: Line2D

    def show(self, profile: Profile) -> None:
        """Show those of another profile, and set the scale that suits them."""
        ax = self.line.axes
        assert ax is not None
        factor = field_factor(profile)
        size, half = np.abs(profile.b) * factor, K * profile.u * factor
        if ax.get_yscale() != "log":
            ax.set_yscale("log")
        self.line.set_data(profile.s * MM, size)
        self.floor.set_data(profile.s * MM, half)
        seen = half[half > 0]
        if len(seen) and size.max() > 0:
            ax.set_ylim(0.3 * min(float(seen.min()), float(size.max())), 3 * float(size.max()))


@dataclass(frozen=True, eq=False)
class CursorArtists:
    """What `draw_cursor` drew."""

    line: Line2D
    point: Line2D

    def move(self, at: float | None, value: float = np.nan) -> None:
        """Put it to a position (m) and a value in the unit of the axes; None hides it."""
        for artist in (self.line, self.point):
            artist.set_visible(at is not None)
        if at is not None:
            self.line.set_xdata([at * MM, at * MM])
            self.point.set_data([at * MM], [value])


def outline_of(
    results: Mapping[str, Quantity], factor: float
) -> tuple[list[float], list[float]] | None:
    """Outline of the uniform field that has the same integral: central field times length.

    Parameters
    ----------
    results : mapping
        Results of the line.
    factor : float
        From tesla to the unit of the axes.

    Returns
    -------
    tuple of lists or None
        Positions (mm) and fields; None without a magnetic length.
    """
    if "boundary_in" not in results or "boundary_out" not in results:
        return None
    low, high = results["boundary_in"].value * MM, results["boundary_out"].value * MM
    level = results["central_field"].value * factor
    return [low, low, high, high], [0.0, level, level, 0.0]


def profile_reach(profile: Profile) -> tuple[float, float]:
    """Limits of the axis of the field, in its unit: the band with some air."""
    factor = field_factor(profile)
    low = float((profile.b - K * profile.u).min()) * factor
    high = float((profile.b + K * profile.u).max()) * factor
    air = AIR * (high - low) or 1.0
    return low - air, high + air


def field_unit(profile: Profile) -> str:
    """Unit that the profile is drawn in."""
    return scale_for("T", [float(np.abs(profile.b).max())]).unit


def field_factor(profile: Profile) -> float:
    """From tesla to the unit that the profile is drawn in."""
    return scale_for("T", [float(np.abs(profile.b).max())]).factor


def field_label(profile: Profile, component: str) -> str:
    """Label of the axis of the field."""
    return f"{component} ({field_unit(profile)})"


def uncertainty_factor(profile: Profile) -> float:
    """From tesla to the unit that the half width of the band is drawn in."""
    return scale_for("T", [float(K * profile.u.max())]).factor


def uncertainty_label(profile: Profile, component: str) -> str:
    """Label of the axis of the half width."""
    return f"2u({component}) ({scale_for('T', [float(K * profile.u.max())]).unit})"


def _area(s: Floats, low: Floats, high: Floats) -> Floats:
    """Corners of the area between two curves."""
    return np.column_stack([np.concatenate([s, s[::-1]]), np.concatenate([low, high[::-1]])])
