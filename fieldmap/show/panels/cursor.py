"""The field at one position, with its uncertainty."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Any

from fieldmap.estimate.map import map_magnet
from fieldmap.show.captions import field_words
from fieldmap.show.look import MM
from fieldmap.show.numbers import plain
from fieldmap.show.panels.limits import plain_step
from fieldmap.show.panels.parts import column, hooked, number_field, row
from fieldmap.show.profile import field_at

if TYPE_CHECKING:
    from fieldmap.show.panels.figure import FigurePanel
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["CursorPanel"]

K = 2.0


class CursorPanel:
    """Move a cursor along the line and read the field there.

    Parameters
    ----------
    state : Reduction
        Where the field comes from.
    figure : FigurePanel
        Shows the cursor; its line is the one that is read.

    Attributes
    ----------
    at : ipywidgets.FloatText
        Position, mm.
    bar : ipywidgets.FloatSlider
        The same, to move.
    readout : ipywidgets.HTML
        The field there.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction, figure: FigurePanel) -> None:
        import ipywidgets

        self.state, self.figure = state, figure
        self._following = False
        self.at = number_field("Position", "fm-cursor-at")
        self.bar = hooked(
            ipywidgets.FloatSlider(min=-1, max=1, continuous_update=False, readout=False),
            "fm-bar",
            "fm-cursor-bar",
        )
        self.readout = hooked(ipywidgets.HTML(), "fm-cursor-readout")
        unit = hooked(ipywidgets.HTML("mm"), "fm-unit")
        self.widget = column(
            (row((self.at, unit), "fm-range"), self.bar, self.readout), "fm-cursor"
        )
        self.at.observe(self._on_move, names="value")
        self.bar.observe(self._on_move, names="value")
        figure.line.observe(self._on_line, names="value")
        figure.on_cursor(self._on_cursor)
        figure.at.place.layout.display = "none"  # the field of the figure is this one's twin
        state.listen(self._on_change)

    def move(self, to: float) -> None:
        """Put the cursor somewhere, m, and read the field there."""
        self._show_position(to)
        self.figure.move_cursor(to)

    def _on_move(self, change: dict[str, Any]) -> None:
        with self.state.lock:
            if not self._following:
                self.move(change["new"] / MM)

    def _on_line(self, _: dict[str, Any]) -> None:
        with self.state.lock:
            if self.figure.cursor is not None and self.state.fmap is not None:
                self.state.attempt("reading the field", self._read)

    def _on_cursor(self) -> None:
        if self.figure.cursor is not None:
            self._show_position(self.figure.cursor)
        self._read()

    def _read(self) -> None:
        at, line, fmap = self.figure.cursor, self.figure.line.value or 0, self.state.fmap
        self.readout.value = ""
        if at is None or fmap is None:
            return
        value, u = field_at(fmap, at, line)
        component = map_magnet(fmap).component
        told = "" if abs(value) > K * u else "<br>not told from zero"
        share = ""
        if line < len(self.state.lines):
            central = self.state.lines[line].results["central_field"].value
            if central:
                share = f"<br><small>{100 * value / central:.3f} % of the central field</small>"
        self.readout.value = (
            f'<div class="fm-reading" role="status"><small>{escape(component)} at '
            f"{plain(at * MM, 8)} mm (k = 2)</small><br>"
            f"<b>{escape(field_words(value, u))}</b>{told}{share}</div>"
        )

    def _show_position(self, at: float) -> None:
        self._following = True
        self.at.value = round(at * MM, 6)
        self.bar.value = min(max(self.at.value, self.bar.min), self.bar.max)
        self._following = False

    def _on_change(self, topic: Topic) -> None:
        if topic == "campaign":
            self.readout.value = ""
        if topic == "map" and self.state.fmap is not None:
            self._follow_map()
        if topic == "results":
            self._read()

    def _follow_map(self) -> None:
        """Take the mapped range, and the place that the figure's cursor begins at."""
        lines = self.state.profiles
        one = lines[min(self.figure.line.value or 0, len(lines) - 1)]
        low, high = round(one.low * MM, 6), round(one.high * MM, 6)
        self._following = True
        self.at.step = self.bar.step = plain_step(high - low)
        self.bar.min, self.bar.max = min(self.bar.min, low), max(self.bar.max, high)
        self.bar.min, self.bar.max = low, high
        self._following = False
        if self.figure.cursor is not None:
            self._show_position(self.figure.cursor)
