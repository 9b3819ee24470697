"""The panel that answers whether a magnet has the magnetic length of its drawing."""

from __future__ import annotations

from typing import Any, ClassVar

from fieldmap.show.panels.base import Panel
from fieldmap.show.panels.parts import column, row, titled

__all__ = ["MagneticLengthPanel"]


class MagneticLengthPanel(Panel):
    """Verdict, results and limits to the left, figure and passes to the right.

    Examples
    --------
    >>> panel = MagneticLengthPanel()
    >>> panel.open()
    >>> panel.state.results["magnetic_length"].unit
    'm'
    """

    title: ClassVar[str] = "Magnetic length"

    def _layout(self) -> tuple[Any, ...]:
        numbers = column(
            (
                self.results.verdicts,
                self.results.table,
                titled("Limits and flat window", (self.limits.widget,)),
            ),
            "fm-side",
        )
        pictures = column((self.figure.widget, self._readings()), "fm-main")
        return (
            row((numbers, pictures), "fm-columns"),
            titled("Findings", (self.results.findings,)),
            titled("Files", (self.save.widget,)),
        )
