"""Figures that are shown again and again: axes laid out once, artists given new data.

A scene draws on a figure that it empties first; showing something else is quick as long as the
scene stays. Every `show` returns the text alternative.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar, Final

import numpy as np

from fieldmap.show.captions import cursor_words, decay_words, profile_words, uncertainty_words
from fieldmap.show.field_artists import (
    K,
    field_factor,
    field_label,
    field_unit,
    outline_of,
    profile_reach,
    uncertainty_factor,
    uncertainty_label,
)
from fieldmap.show.field_plots import (
    draw_cursor,
    draw_decay,
    draw_profile,
    draw_uncertainty,
    mark_windows,
)
from fieldmap.show.look import INK, MM

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    import numpy.typing as npt
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Axis as MapAxis
    from fieldmap.show.field_artists import CursorArtists, WindowArtists
    from fieldmap.show.profile import Profile

__all__ = [
    "BOTTOM",
    "LEFT",
    "LEGEND_ROW",
    "RIGHT",
    "Cursor",
    "DecayScene",
    "FieldScene",
    "ProfileScene",
    "ReadingsScene",
    "Scene",
    "UncertaintyScene",
    "legend_rows",
]

# inches around the axes: tick labels, axis labels, legend
LEFT: Final = 0.85
RIGHT: Final = 0.12
BOTTOM: Final = 0.48
LEGEND_ROW: Final = 0.2
COLUMNS: Final = 4
MOST_ROWS: Final = 3
AIR: Final = 0.015  # beside what is shown, of its length
AIR_ABOVE: Final = 0.05  # above and below it, of its height
Cursor = tuple[float, float, float]  # position (m), field there and its standard uncertainty (T)


def legend_rows(entries: int) -> int:
    """Rows that a legend of so many entries takes."""
    return min(-(-entries // COLUMNS), MOST_ROWS)


class Scene:
    """Axes on a figure of their own.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Emptied first.
    heights : sequence of float
        One for each axes, from the top; they share their positions.
    legend_rows : int
        Rows of the legend above.

    Attributes
    ----------
    axes : tuple of matplotlib.axes.Axes
        From the top.
    """

    def __init__(
        self, figure: Figure, heights: Sequence[float] = (1.0,), legend_rows: int = 1
    ) -> None:
        figure.clear()
        self.figure, self._rows = figure, legend_rows
        made = figure.subplots(
            len(heights), 1, sharex=True, height_ratios=tuple(heights), squeeze=False
        )
        self.axes: tuple[Axes, ...] = tuple(made[:, 0])
        self.margins()

    def margins(self, rows: int | None = None) -> None:
        """Leave room for labels and for a legend of so many rows, whatever the figure's size."""
        self._rows = self._rows if rows is None else rows
        width, height = self.figure.get_size_inches()
        self.figure.subplots_adjust(
            left=LEFT / width,
            right=1 - RIGHT / width,
            bottom=BOTTOM / height,
            top=1 - (0.12 + LEGEND_ROW * self._rows) / height,
            hspace=0.08,
        )

    def narrow(self, low: float, high: float) -> None:
        """Show exactly a stretch (m), with a little air."""
        air = AIR * (high - low)
        for ax in self.axes:
            ax.set_xlim((low - air) * MM, (high + air) * MM)


class FieldScene(Scene):
    """Curves along a line with limits, flat window and cursor.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Emptied first.
    grips : bool
        Whether to mark what can be dragged.
    """

    heights: ClassVar[tuple[float, ...]] = (1.0,)
    rows: ClassVar[int] = 1  # of the legend

    def __init__(self, figure: Figure, *, grips: bool = False) -> None:
        super().__init__(figure, self.heights, self.rows)
        self.grips = grips
        self.component = "B"
        self.windows: tuple[WindowArtists, ...] = ()
        self._profile: Profile | None = None
        self._cursors: tuple[CursorArtists, ...] = ()

    @property
    def profile(self) -> Profile:
        """What is shown."""
        assert self._profile is not None
        return self._profile

    def move_windows(self, axis: MapAxis) -> None:
        """Move limits and window."""
        for windows in self.windows:
            windows.move(axis)

    def move_cursor(self, cursor: Cursor | None) -> None:
        """Mark a position; None takes the mark away."""
        if not self._cursors and cursor is not None:
            self._cursors = tuple(draw_cursor(ax, self.profile, *cursor[:2]) for ax in self.axes)
        for artists, height in zip(self._cursors, self._heights_at(cursor), strict=False):
            artists.move(None if cursor is None else cursor[0], height)

    def _heights_at(self, cursor: Cursor | None) -> tuple[float, ...]:
        """Where the cursor's point stands in each of the axes, in its unit."""
        if cursor is None:
            return (np.nan,) * len(self.axes)
        return self._points(cursor)

    def _points(self, cursor: Cursor) -> tuple[float, ...]:
        raise NotImplementedError

    def _begin(self, profile: Profile, component: str) -> bool:
        """Whether all has to be drawn; takes the profile and shows its stretch."""
        anew = self._profile is None or self.component != component
        if anew:
            for ax in self.axes:
                ax.clear()
            self._cursors = ()
        self._profile, self.component = profile, component
        return anew

    def _end(self, words: str, axis: MapAxis, cursor: Cursor | None) -> str:
        self.narrow(float(self.profile.s[0]), float(self.profile.s[-1]))
        self.move_windows(axis)
        self.move_cursor(cursor)
        return words if cursor is None else f"{words} {cursor_words(*cursor, self.component)}"


class ProfileScene(FieldScene):
    """The field with its band, and below it the half width of the band."""

    heights = (2.6, 1.0)

    def show(
        self,
        profile: Profile,
        axis: MapAxis,
        results: Mapping[str, Quantity] | None = None,
        component: str = "B",
        cursor: Cursor | None = None,
    ) -> str:
        """Show a profile; parameters as for `draw_profile`."""
        outline = outline_of(results or {}, field_factor(profile))
        if self._profile is not None and (outline is None) != (self._drawn.equivalent is None):
            self._profile = None  # the legend changes
        before = self._profile
        if self._begin(profile, component):
            self._draw(axis, results)
        elif profile is not before:
            self._update()
        if self._drawn.equivalent is not None and outline is not None:
            self._drawn.equivalent.set_data(*outline)
        return self._end(profile_words(profile, axis, results, component), axis, cursor)

    def _draw(self, axis: MapAxis, results: Mapping[str, Quantity] | None) -> None:
        upper, lower = self.axes
        self._drawn = draw_profile(
            upper, self.profile, axis, results, self.component, grips=self.grips
        )
        self._below = draw_uncertainty(lower, self.profile, axis, self.component)
        assert self._below.windows is not None
        self.windows = (self._drawn.windows, self._below.windows)
        upper.set_xlabel("")
        upper.tick_params(labelbottom=False)

    def _update(self) -> None:
        upper, lower = self.axes
        self._drawn.show(self.profile)
        self._below.show(self.profile)
        upper.set_ylim(*profile_reach(self.profile))
        upper.set_ylabel(field_label(self.profile, self.component))
        lower.set_ylabel(uncertainty_label(self.profile, self.component))

    def _points(self, cursor: Cursor) -> tuple[float, ...]:
        _, value, u = cursor
        return value * field_factor(self.profile), K * u * uncertainty_factor(self.profile)


class UncertaintyScene(FieldScene):
    """The half width of the band alone."""

    rows = 0

    def show(
        self,
        profile: Profile,
        axis: MapAxis,
        component: str = "B",
        cursor: Cursor | None = None,
    ) -> str:
        """Show that of a profile; parameters as for `draw_uncertainty`."""
        (ax,) = self.axes
        if self._begin(profile, component):
            self._drawn = draw_uncertainty(ax, profile, axis, component, grips=self.grips)
            assert self._drawn.windows is not None
            self.windows = (self._drawn.windows,)
        else:
            self._drawn.show(profile)
            ax.set_ylabel(uncertainty_label(profile, component))
        return self._end(uncertainty_words(profile, component), axis, cursor)

    def _points(self, cursor: Cursor) -> tuple[float, ...]:
        return (K * cursor[2] * uncertainty_factor(self.profile),)


class DecayScene(FieldScene):
    """The size of the field on a logarithmic scale."""

    def show(
        self,
        profile: Profile,
        axis: MapAxis,
        component: str = "B",
        cursor: Cursor | None = None,
    ) -> str:
        """Show that of a profile; parameters as for `draw_decay`."""
        (ax,) = self.axes
        if self._begin(profile, component):
            self._drawn = draw_decay(ax, profile, axis.travel, component)
            self.windows = (mark_windows(ax, axis, grips=self.grips),)
        else:
            self._drawn.show(profile)
            ax.set_ylabel(f"|{component}| ({field_unit(profile)})")
        return self._end(decay_words(profile, component), axis, cursor)

    def _points(self, cursor: Cursor) -> tuple[float, ...]:
        return (abs(cursor[1]) * field_factor(self.profile),)


class ReadingsScene(Scene):
    """Curves of passes against position; they change only with the passes in use."""

    def __init__(self, figure: Figure) -> None:
        super().__init__(figure)
        self._cursor: Line2D | None = None
        self._reach = (0.0, 1.0)
        self._lines: tuple[Line2D, ...] = ()

    def show(
        self,
        draw: Callable[[Axes], Sequence[Line2D]],
        span: tuple[float, float] | None = None,
        cursor: Cursor | None = None,
    ) -> None:
        """Show curves.

        Parameters
        ----------
        draw : callable
            Draws on the axes that it is given and returns the curves.
        span : tuple of float, optional
            Part of the positions to show, m; all if not given.
        cursor : tuple, optional
            Position to mark.
        """
        (ax,) = self.axes
        ax.clear()
        self._cursor = None
        self._lines = tuple(draw(ax))
        self.margins(legend_rows(len(self._lines)))
        self._reach = ax.get_ylim()
        self.view(span)
        self.move_cursor(cursor)

    def view(self, span: tuple[float, float] | None) -> None:
        """Show a part of the positions, with the heights that are found there."""
        (ax,) = self.axes
        if span is None:
            ax.autoscale(axis="x")
            ax.set_ylim(*self._reach)
            return
        self.narrow(*span)
        low, high = ax.get_xlim()
        seen = [_within(line, low, high) for line in self._lines]
        inside = np.concatenate([*seen, np.empty(0)])
        if len(inside):
            air = AIR_ABOVE * float(np.ptp(inside)) or 1.0
            ax.set_ylim(float(inside.min()) - air, float(inside.max()) + air)

    def move_cursor(self, cursor: Cursor | None) -> None:
        """Mark a position; None takes the mark away."""
        (ax,) = self.axes
        if self._cursor is None and cursor is not None:
            self._cursor = ax.axvline(cursor[0] * MM, color=INK, linewidth=1.0)
        if self._cursor is not None:
            self._cursor.set_visible(cursor is not None)
            if cursor is not None:
                self._cursor.set_xdata([cursor[0] * MM] * 2)


def _within(line: Line2D, low: float, high: float) -> npt.NDArray[np.float64]:
    """Heights of the points of a curve between two positions of the axes."""
    x, y = np.asarray(line.get_xdata(), float), np.asarray(line.get_ydata(), float)
    return y[(x >= low) & (x <= high)]
