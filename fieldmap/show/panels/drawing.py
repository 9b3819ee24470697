"""Draws what is in use on one figure, again and again, and anew only what has changed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal, TypeVar

from fieldmap.estimate.map import map_magnet
from fieldmap.show.budget_plots import budget_figure
from fieldmap.show.captions import overlaps_words, passes_words, residuals_words
from fieldmap.show.kept import KeptByMap
from fieldmap.show.overlaps import overlaps_of
from fieldmap.show.plots import draw_overlaps, draw_passes, draw_residuals
from fieldmap.show.profile import field_at, line_of, profile_of
from fieldmap.show.scenes import (
    DecayScene,
    FieldScene,
    ProfileScene,
    ReadingsScene,
    Scene,
    UncertaintyScene,
)

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D

    from fieldmap.readings.passes import Axis
    from fieldmap.show.panels.canvas import FigureView
    from fieldmap.show.panels.state import Reduction
    from fieldmap.show.scenes import Cursor

__all__ = ["Drawing", "Kind"]

Kind = Literal["profile", "passes", "residuals", "overlaps", "uncertainty", "budget"]
Span = tuple[float, float]
S = TypeVar("S", bound=FieldScene)


class Drawing:
    """The figure of a panel.

    Parameters
    ----------
    view : FigureView
        Whose figure is drawn on.
    """

    def __init__(self, view: FigureView) -> None:
        self.view = view
        self._scene: Scene | None = None
        self._readings: tuple[Any, ...] = ()  # what a scene of readings shows
        self._profile = KeptByMap(profile_of)
        self._overlaps = KeptByMap(overlaps_of)

    @property
    def shows_windows(self) -> bool:
        """Whether limits and flat window are on the figure."""
        return isinstance(self._scene, FieldScene)

    def clear(self) -> None:
        """Draw all anew next time."""
        with self.view.lock:
            self._scene, self._readings = None, ()
            self.view.figure.clear()

    def margins(self) -> None:
        """Fit the axes into a figure that has changed its size."""
        if self._scene is not None:
            self._scene.margins()

    def move_windows(self, axis: Axis) -> None:
        """Move the marks of limits and flat window; they are not shown before the next drawing."""
        with self.view.lock:
            if isinstance(self._scene, FieldScene):
                self._scene.move_windows(axis)

    def draw(
        self,
        state: Reduction,
        kind: Kind,
        *,
        line: int = 0,
        span: Span | None = None,
        cursor: float | None = None,
        result: str = "",
        decades: bool = False,
    ) -> str:
        """Draw, and give the text alternative.

        Parameters
        ----------
        state : Reduction
            With a map, but for the raw passes; with results for a budget.
        kind : str
            Which figure.
        line : int
            Index of the line.
        span : tuple of float, optional
            Part of the line, m; all of it if not given.
        cursor : float, optional
            Position to mark, m.
        result : str
            Key of the result whose budget is drawn.
        decades : bool
            Whether the profile is drawn on a logarithmic scale.

        Returns
        -------
        str
        """
        if kind == "budget":
            return self._budget(state, result, line)
        marked = _marked(state.fmap, cursor, line)
        if kind in {"passes", "residuals", "overlaps"}:
            return self._draw_readings(state, kind, span, marked)
        return self._draw_field(state, "decay" if decades and kind == "profile" else kind,
                                line, span, marked)  # fmt: skip

    def _draw_field(
        self, state: Reduction, kind: str, line: int, span: Span | None, cursor: Cursor | None
    ) -> str:
        assert state.axis is not None
        assert state.fmap is not None
        profile = self._profile(state.fmap, line, span)
        component = map_magnet(state.fmap).component
        if kind == "uncertainty":
            return self._as(UncertaintyScene).show(profile, state.axis, component, cursor)
        if kind == "decay":
            return self._as(DecayScene).show(profile, state.axis, component, cursor)
        results = state.lines[line].results if line < len(state.lines) else None
        return self._as(ProfileScene).show(profile, state.axis, results, component, cursor)

    def _as(self, scene: type[S]) -> S:
        """The scene on the figure if it is of that kind, or a new one."""
        if type(self._scene) is scene:
            return self._scene
        made = scene(self.view.figure, grips=self.view.live)
        self._scene, self._readings = made, ()
        return made

    def _draw_readings(
        self, state: Reduction, kind: Kind, span: Span | None, cursor: Cursor | None
    ) -> str:
        words, draw, *shown = self._readings_of(state, kind)
        key = (kind, *shown)
        if not isinstance(self._scene, ReadingsScene):
            self._scene, self._readings = ReadingsScene(self.view.figure), ()
        if _same(key, self._readings):
            self._scene.view(span)
            self._scene.move_cursor(cursor)
        else:
            self._scene.show(draw, span, cursor)
            self._readings = key
        return words

    def _readings_of(
        self, state: Reduction, kind: Kind
    ) -> tuple[str, Callable[[Axes], Sequence[Line2D]], Any, Any]:
        """Words, how to draw, and what tells whether that has been drawn already."""
        assert state.axis is not None
        travel = state.axis.travel
        if kind == "passes":
            passes, own = state.passes, state.marks
            words = passes_words(passes, travel)
            return words, lambda ax: draw_passes(ax, passes, travel, own), state.campaign, own
        fmap, marks = state.fmap, state.map_marks
        assert fmap is not None
        if kind == "residuals":
            words = residuals_words(fmap)
            return words, lambda ax: draw_residuals(ax, fmap, travel, marks), fmap, marks
        found = self._overlaps(fmap)
        words = overlaps_words(found)
        return words, lambda ax: draw_overlaps(ax, found, travel, marks), fmap, marks

    def _budget(self, state: Reduction, result: str, line: int) -> str:
        assert state.fmap is not None
        self._scene, self._readings = None, ()
        return budget_figure(self.view.figure, state.fmap, result, state.axis, line)


def _marked(fmap: xr.Dataset | None, at: float | None, line: int) -> Cursor | None:
    """The field at a position to mark; none outside the line."""
    if fmap is None or at is None:
        return None
    one = line_of(fmap, line)
    return (at, *field_at(fmap, at, line)) if one.low <= at <= one.high else None


def _same(one: tuple[Any, ...], other: tuple[Any, ...]) -> bool:
    """Whether two keys hold the same things; maps and campaigns are known by their identity."""
    return len(one) == len(other) and all(
        a is b or (isinstance(a, (str, tuple)) and a == b) for a, b in zip(one, other, strict=True)
    )
