"""One figure at a time of what is in use, with its text alternative."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final, Literal

from fieldmap.show.panels.canvas import FigureView
from fieldmap.show.panels.drawing import Drawing, Kind
from fieldmap.show.panels.mouse import Mouse
from fieldmap.show.panels.parts import column, hooked, row
from fieldmap.show.panels.sight import Sight
from fieldmap.show.panels.view_bar import ViewBar
from fieldmap.show.profile import field_at
from fieldmap.show.rows import label, line_title

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    import xarray as xr
    from matplotlib.figure import Figure

    from fieldmap.readings.passes import Axis
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["FigurePanel", "Kind", "Part"]

Part = Literal["", "in", "out"]
GAPS_INSIDE: Final = 3.0  # of a fringe, from its boundary towards the middle
GAPS_OUTSIDE: Final = 6.0
NAMES: Final[dict[Kind, str]] = {
    "profile": "Profile",
    "passes": "Raw passes",
    "residuals": "Residuals",
    "overlaps": "Overlaps",
    "uncertainty": "Uncertainty",
    "budget": "Budget",
}
FIRST_BUDGET: Final = "magnetic_length"
NOTHING: Final = '<p class="fm-remark fm-empty">No picture: there is no map.</p>'


class FigurePanel:
    """Choose what to look at, and where.

    Where the figure is live, limits and flat window can be dragged on it, and the cursor set.
    Part and cursor stay when another figure along the line is chosen.

    Parameters
    ----------
    state : Reduction
        What is drawn.
    kinds : sequence of str
        Figures to choose from.
    static : bool, optional
        Whether the figure stays a picture; as for `FigureView`.

    Attributes
    ----------
    kind : ipywidgets.ToggleButtons
        Which figure.
    line : ipywidgets.Dropdown
        Which line of the map; only shown where there are several.
    result : ipywidgets.Dropdown
        Which result the budget is of; only shown beside the budget.
    view : FigureView
        The figure.
    drawing : Drawing
        What draws on it.
    at : ViewBar
        Which part of the line it shows, and its cursor.
    mouse : Mouse
        What the mouse does on it.
    sight : Sight
        Part and cursor.
    decades : bool
        Whether the profile is shown on a logarithmic scale; set it, then call `draw`.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(
        self,
        state: Reduction,
        kinds: Sequence[Kind] = tuple(NAMES),
        *,
        static: bool | None = None,
    ) -> None:
        import ipywidgets

        self.state = state
        self.decades = False
        self._cursor_listeners: list[Callable[[], None]] = []
        self._following = False
        self.kind = hooked(
            ipywidgets.ToggleButtons(options=[(NAMES[kind], kind) for kind in kinds]), "fm-kind"
        )
        self.line = _choice("Line", "36px", "fm-line")
        self.result = _choice("Of", "24px", "fm-of")
        self.view = FigureView(static=static)
        self.view.blank(NOTHING)
        self.drawing = Drawing(self.view)
        self.at = ViewBar()
        self.sight = Sight(state, self.at.parts)
        self.mouse = Mouse(self.view, self, self._guarded)
        self.bar = row((self.kind, self.line, self.result), "fm-figure-bar")
        self.widget = column(
            (self.bar, self.at.upper, self.view.widget, self.at.lower), "fm-figure"
        )
        for choice in (self.kind, self.line, self.result):
            choice.observe(self._on_choice, names="value")
        self.at.listen(self._on_part, self._on_span, self.move_cursor)
        self.at.mode.observe(self._on_mode, names="value")
        self.view.when_live(self._on_live)
        self.view.connect("resize_event", self._on_resize)
        state.listen(self._on_change)

    @property
    def figure(self) -> Figure:
        """The figure that is drawn on, again and again."""
        return self.view.figure

    @property
    def picture(self) -> Any:
        """Picture with its text alternative, or the caption of the live figure."""
        return self.view.picture

    @property
    def cursor(self) -> float | None:
        """Position that is marked, m."""
        return self.sight.cursor

    @property
    def part(self) -> Part | None:
        """Part of the line: all of it, or one of its fringes; None for any other."""
        return None if self.sight.zoom is not None else self.at.parts.value

    @property
    def axis(self) -> Axis | None:
        """Limits and window in use."""
        return self.state.axis

    @property
    def mapped(self) -> tuple[float, float] | None:
        """Ends of the line that is shown, m; None where the figure shows no line."""
        return None if self.kind.value == "budget" else self._line_ends()

    def _line_ends(self) -> tuple[float, float] | None:
        profiles = self.state.profiles
        if not profiles or self.state.fmap is None:
            return None
        one = profiles[min(self.line.value or 0, len(profiles) - 1)]
        return one.low, one.high

    @property
    def span(self) -> tuple[float, float] | None:
        """Ends of the part that is shown, m; None for all of the line."""
        if self.sight.zoom is not None:
            return self.sight.zoom
        line = self.line.value or 0
        if self.state.campaign is None or line >= len(self.state.lines):
            return None
        boundary = self.state.lines[line].results.get(f"boundary_{self.part}")
        if boundary is None:
            return None
        gap = self.state.campaign.magnet.gap
        inside, outside = GAPS_INSIDE * gap, GAPS_OUTSIDE * gap
        before, after = (outside, inside) if self.part == "in" else (inside, outside)
        return boundary.value - before, boundary.value + after

    @property
    def shown(self) -> tuple[float, float]:
        """Ends of what is shown, m, within the line."""
        low, high = self.mapped or (0.0, 0.0)
        span = self.span or (low, high)
        return max(low, span[0]), min(high, span[1])

    @property
    def grips_shown(self) -> bool:
        """Whether the figure shows limits and window to drag."""
        return self.drawing.shows_windows and self.state.fmap is not None

    def draw(self) -> None:
        """Draw what is chosen."""
        with self.state.lock, self.view.lock:
            self.result.layout.display = "" if self.kind.value == "budget" else "none"
            if not self._drawable():
                self.drawing.clear()
                self.view.blank(NOTHING)
                return
            self.view.refresh(self._drawn())
            self._follow()

    def set_axis(self, axis: Axis) -> None:
        """Evaluate with other limits."""
        before = self.state.axis
        self.state.move(integrate=axis.integrate, flat=axis.flat)
        if self.state.axis == before:
            self.draw()  # nobody else does: it may have been moved on the figure alone

    def preview(self, axis: Axis) -> None:
        """Move the marks of limits and window on the figure alone."""
        self.drawing.move_windows(axis)

    def set_span(self, span: tuple[float, float] | None) -> None:
        """Show a part of the line (m); None for all of it."""
        with self.state.lock:
            if self.mapped is None:
                return
            self.sight.show(span, self.mapped)
            if span is None:
                self.at.show("", self.mapped, self.cursor, self.mapped[1] - self.mapped[0])
            self.draw()

    def set_cursor(self, at: float | None) -> None:
        """Mark a position (m) within the line; None takes the mark away."""
        with self.state.lock:
            self.sight.mark(at)
            if self.mapped is not None:
                self.draw()
            for listener in self._cursor_listeners:
                listener()

    def move_cursor(self, to: float) -> None:
        """Mark a position (m); one outside the line is said to be so, and none is marked."""
        with self.state.lock:
            if self.state.fmap is None:
                return
            line, found = self.line.value or 0, self.state.fmap
            known = self.state.attempt("reading the field", lambda: _check(found, to, line))
            self.set_cursor(to if known else None)
            self.settled()

    def settled(self) -> None:
        """Keep part and cursor with the campaign."""
        self.state.keep()

    def on_cursor(self, listener: Callable[[], None]) -> None:
        """Call something whenever the cursor has moved."""
        self._cursor_listeners.append(listener)

    def _drawable(self) -> bool:
        """Whether there is what the chosen figure shows."""
        state = self.state
        if state.campaign is None or state.axis is None:
            return False
        if self.kind.value == "budget" and not state.lines:
            return False
        return state.fmap is not None or self.kind.value == "passes"

    def _drawn(self) -> str:
        """Draw on the figure; its text alternative."""
        return self.drawing.draw(
            self.state,
            self.kind.value,
            line=self.line.value or 0,
            span=self.span,
            cursor=self.cursor,
            result=self.result.value,
            decades=self.decades,
        )

    def _follow(self) -> None:
        """Let the fields beside the figure show what it shows."""
        mapped = self.mapped
        for part in (self.at.upper, self.at.lower):
            part.layout.display = "none" if mapped is None else ""
        if mapped is not None:
            self.at.show(self.part, self.shown, self.cursor, mapped[1] - mapped[0])

    def _guarded(self, work: Callable[[], None]) -> None:
        """Run what an event of the figure asks for; what goes wrong is said."""
        with self.state.lock:
            try:
                work()
            except Exception as error:  # noqa: BLE001 no error of a handler reaches anybody
                self.state.attempt("moving on the figure", _raiser(error))

    def _on_part(self, part: str | None) -> None:
        if part is None:
            return
        with self.state.lock:
            self.sight.zoom = None
            span, at = self.span, self.cursor
            if span is not None and at is not None and not span[0] <= at <= span[1]:
                self.set_cursor(0.5 * (span[0] + span[1]))  # into sight; draws too
            else:
                self.state.attempt("drawing", self.draw)
            self.settled()

    def _on_span(self, low: float, high: float) -> None:
        with self.state.lock:
            self.state.attempt("drawing", lambda: self._show_typed(low, high))

    def _show_typed(self, low: float, high: float) -> None:
        self.set_span((min(low, high), max(low, high)))
        self.settled()

    def _on_mode(self, change: dict[str, Any]) -> None:
        self.mouse.mode = change["new"]

    def _on_live(self) -> None:
        with self.state.lock:
            self.at.mode.layout.display = ""
            self.drawing.clear()  # drawn anew with marks of what can be dragged
            self._guarded(self.draw)

    def _on_resize(self, _: Any) -> None:
        with self.view.lock:
            self.drawing.margins()

    def _on_choice(self, _: dict[str, Any]) -> None:
        if not self._following:
            self.state.attempt("drawing", self.draw)

    def _on_change(self, topic: Topic) -> None:
        if topic == "campaign":
            self.sight.begin()
            self.drawing.clear()
        if topic == "map":
            mapped, axis = self._line_ends(), self.state.axis
            if mapped is not None and axis is not None:
                self.sight.settle(mapped, axis.flat)
        if topic in {"campaign", "passes", "results"}:  # results come after every map
            self._offer_lines()
            self._offer_results()
            self.draw()

    def _offer_lines(self) -> None:
        """Offer the lines of the map where there is a choice."""
        titles = [line_title(line) for line in self.state.lines]
        if not titles or titles == [title for title, _ in self.line.options]:
            return
        self._following = True
        self.line.options = [(title, i) for i, title in enumerate(titles)]
        self.line.value = 0
        self.line.layout.display = "" if len(titles) > 1 else "none"
        self._following = False

    def _offer_results(self) -> None:
        """Offer the results of the lines to take apart; the chosen one stays if it is there."""
        if not self.state.lines:
            return
        keys = list(self.state.lines[self.line.value or 0].results)
        if keys == [key for _, key in self.result.options]:
            return
        first = FIRST_BUDGET if FIRST_BUDGET in keys else keys[0]
        chosen = self.result.value if self.result.value in keys else first
        self._following = True
        self.result.options = [(label(key), key) for key in keys]
        self.result.value = chosen
        self._following = False


def _check(fmap: xr.Dataset, at: float, line: int) -> None:
    """Refuse a position outside the line, in words."""
    field_at(fmap, at, line)


def _choice(description: str, width: str, hook: str) -> Any:
    """A list to choose from; not shown before there is a choice."""
    import ipywidgets

    choice = ipywidgets.Dropdown(description=description, style={"description_width": width})
    choice.layout.display = "none"
    return hooked(choice, hook)


def _raiser(error: Exception) -> Callable[[], None]:
    def work() -> None:
        raise error

    return work
