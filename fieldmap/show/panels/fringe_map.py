"""The panel that maps a fringe field: profile and decay, readings, residuals, one position."""

from __future__ import annotations

from typing import Any, ClassVar

from fieldmap.show.panels.base import Panel
from fieldmap.show.panels.cursor import CursorPanel
from fieldmap.show.panels.parts import column, hooked, remembered, row, titled

__all__ = ["FringeMapPanel"]


class FringeMapPanel(Panel):
    """A large figure with the field at a cursor beside it.

    Attributes
    ----------
    part : ipywidgets.ToggleButtons
        Part of the line to look at.
    decades : ipywidgets.Checkbox
        Logarithmic scale.
    cursor : CursorPanel
        The field at one position.

    Examples
    --------
    >>> panel = FringeMapPanel()
    >>> panel.state.keeps = False  # an example leaves no settings behind
    >>> panel.open()
    >>> panel.part.value = "out"
    >>> low, high = panel.figure.span
    >>> low < panel.state.results["boundary_out"].value < high
    True
    """

    title: ClassVar[str] = "Fringe field"

    def _layout(self) -> tuple[Any, ...]:
        import ipywidgets

        self.part = self.figure.at.parts
        self.decades = hooked(
            ipywidgets.Checkbox(description="logarithmic", indent=False), "fm-decades"
        )
        remembered(self.state, "decades", self.decades)
        self.cursor = CursorPanel(self.state, self.figure)
        self.figure.bar.children = (*self.figure.bar.children, self.decades)
        self.decades.observe(self._on_view, names="value")
        numbers = column(
            (
                titled("Field at a position", (self.cursor.widget,)),
                titled("Limits and flat window", (self.limits.widget,)),
                titled("Results", (self.results.verdicts, self.results.table)),
            ),
            "fm-side",
        )
        pictures = column((self.figure.widget, self._readings()), "fm-main")
        return (
            row((numbers, pictures), "fm-columns"),
            titled("Findings", (self.results.findings,)),
            titled("Files", (self.save.widget,)),
        )

    def _on_view(self, _: dict[str, Any]) -> None:
        with self.state.lock:
            self.figure.decades = self.decades.value
            self.state.attempt("drawing", self.figure.draw)
