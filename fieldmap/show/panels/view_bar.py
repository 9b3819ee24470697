"""Which part of the line a figure shows, where its cursor is, and what the mouse does on it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from fieldmap.show.look import MM
from fieldmap.show.panels.limits import plain_step
from fieldmap.show.panels.parts import hooked, number_field, row

if TYPE_CHECKING:
    from collections.abc import Callable

__all__ = ["ViewBar"]

PARTS: Final = (("Whole line", ""), ("Entry fringe", "in"), ("Exit fringe", "out"))
MODES: Final = (("Point", "point"), ("Zoom", "zoom"), ("Pan", "pan"))
ABOUT_MODES: Final = (
    "Drag a limit or an end of the flat window; elsewhere the cursor follows. Escape: give up.",
    "Drag along the stretch to show. A double click shows the whole line.",
    "Drag the figure along. A double click shows the whole line.",
)


class ViewBar:
    """Fields and buttons beside a figure; each does what the mouse does on a live one.

    Attributes
    ----------
    parts : ipywidgets.ToggleButtons
        All of the line, or a fringe; none of them where another part is shown.
    low, high : ipywidgets.FloatText
        Ends of what is shown, mm.
    cursor : ipywidgets.FloatText
        Position of the cursor, mm.
    mode : ipywidgets.ToggleButtons
        What the mouse does beside a limit; only shown by a live figure.
    upper, lower : ipywidgets.Box
        To show above and below the figure.
    """

    def __init__(self) -> None:
        import ipywidgets

        self.parts = hooked(ipywidgets.ToggleButtons(options=PARTS, value=""), "fm-part", "fm-kind")
        self.low = number_field("Shown from", "fm-shown-low")
        self.high = number_field("to", "fm-shown-high")
        self.low.style.description_width = "84px"
        self.high.style.description_width = "18px"
        self.cursor = number_field("Cursor", "fm-cursor-field")
        self.cursor.style.description_width = "50px"
        self.mode = hooked(
            ipywidgets.ToggleButtons(
                options=MODES,
                description="Mouse",
                tooltips=ABOUT_MODES,
                style={"description_width": "46px"},
            ),
            "fm-mode",
            "fm-kind",
        )
        self.mode.layout.display = "none"
        mm = [hooked(ipywidgets.HTML("mm"), "fm-unit") for _ in range(2)]
        self.place = row((self.cursor, mm[0]), "fm-range")
        self.upper = row((self.parts, row((self.low, self.high, mm[1]), "fm-range")), "fm-view")
        self.lower = row((self.mode, self.place), "fm-view")
        self._following = False

    def listen(
        self,
        on_part: Callable[[str | None], None],
        on_span: Callable[[float, float], None],
        on_cursor: Callable[[float], None],
    ) -> None:
        """Call something when a part is chosen, ends are typed (m), or a position is (m)."""

        def ends(_: Any) -> None:
            if not self._following:
                on_span(self.low.value / MM, self.high.value / MM)

        def part(change: dict[str, Any]) -> None:
            if not self._following:
                on_part(change["new"])

        def position(change: dict[str, Any]) -> None:
            if not self._following:
                on_cursor(change["new"] / MM)

        self.parts.observe(part, names="value")
        self.low.observe(ends, names="value")
        self.high.observe(ends, names="value")
        self.cursor.observe(position, names="value")

    def show(
        self, part: str | None, shown: tuple[float, float], cursor: float | None, length: float
    ) -> None:
        """Show what the figure shows.

        Parameters
        ----------
        part : {"", "in", "out"} or None
            Part of the line.
        shown : tuple of float
            Its ends, m.
        cursor : float or None
            Position of the cursor, m.
        length : float
            Of the whole line, m: it gives the steps of the fields.
        """
        self._following = True
        step = plain_step(length * MM)
        self.low.step = self.high.step = self.cursor.step = step
        self.parts.value = part
        self.low.value, self.high.value = (round(end * MM, 6) for end in shown)
        if cursor is not None:
            self.cursor.value = round(cursor * MM, 6)
        self._following = False
