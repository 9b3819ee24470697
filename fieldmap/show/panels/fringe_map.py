"""The panel that maps a fringe field: profile and decay, readings, residuals, one position."""

from __future__ import annotations

from typing import Any, ClassVar, Final

from fieldmap.show.panels.base import Panel
from fieldmap.show.panels.cursor import CursorPanel
from fieldmap.show.panels.parts import column, hooked, row, titled

__all__ = ["FringeMapPanel"]

PARTS: Final = (("whole line", ""), ("entry fringe", "in"), ("exit fringe", "out"))


class FringeMapPanel(Panel):
    """A large figure with the field at a cursor beside it.

    Attributes
    ----------
    part : ipywidgets.Dropdown
        Part of the line to look at.
    decades : ipywidgets.Checkbox
        Logarithmic scale.
    cursor : CursorPanel
        The field at one position.

    Examples
    --------
    >>> panel = FringeMapPanel()
    >>> panel.open()
    >>> panel.part.value = "out"
    >>> low, high = panel.figure.span
    >>> low < panel.state.results["boundary_out"].value < high
    True
    """

    title: ClassVar[str] = "Fringe field"

    def _layout(self) -> tuple[Any, ...]:
        import ipywidgets

        self.part = hooked(
            ipywidgets.Dropdown(
                description="Show", options=PARTS, style={"description_width": "40px"}
            ),
            "fm-part",
        )
        self.decades = hooked(
            ipywidgets.Checkbox(description="logarithmic", indent=False), "fm-decades"
        )
        self.cursor = CursorPanel(self.state, self.figure)
        self.figure.bar.children = (*self.figure.bar.children, self.part, self.decades)
        self.part.observe(self._on_view, names="value")
        self.decades.observe(self._on_view, names="value")
        numbers = column(
            (
                titled("Field at a position", (self.cursor.widget,)),
                titled("Limits and flat window", (self.limits.widget,)),
                titled("Results", (self.results.verdicts, self.results.table)),
            ),
            "fm-side",
        )
        pictures = column((self.figure.widget, titled("Passes", (self.passes.widget,))), "fm-main")
        return (
            row((numbers, pictures), "fm-columns"),
            titled("Findings", (self.results.findings,)),
            titled("Files", (self.save.widget,)),
        )

    def _on_view(self, _: dict[str, Any]) -> None:
        with self.state.lock:
            self.figure.part, self.figure.decades = self.part.value, self.decades.value
            span, at = self.figure.span, self.figure.cursor
            if span is not None and at is not None and not span[0] <= at <= span[1]:
                self.cursor.move(0.5 * (span[0] + span[1]))  # into sight; draws too
            else:
                self.state.attempt("drawing", self.figure.draw)
