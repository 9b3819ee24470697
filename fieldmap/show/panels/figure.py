"""One figure at a time of what is in use, with its text alternative."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final, Literal

from fieldmap.show import figures
from fieldmap.show.budget_plots import budget_figure
from fieldmap.show.panels.parts import column, hooked, row
from fieldmap.show.picture import blank_figure, paint
from fieldmap.show.rows import label, line_title

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.figure import Figure

    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["FigurePanel", "Kind", "Part"]

Kind = Literal["profile", "passes", "residuals", "uncertainty", "budget"]
Part = Literal["", "in", "out"]
GAPS_INSIDE: Final = 3.0  # of a fringe, from its boundary towards the middle
GAPS_OUTSIDE: Final = 6.0
NAMES: Final[dict[Kind, str]] = {
    "profile": "Profile",
    "passes": "Raw passes",
    "residuals": "Residuals",
    "uncertainty": "Uncertainty",
    "budget": "Budget",
}
FIRST_BUDGET: Final = "magnetic_length"
NOTHING: Final = '<p class="fm-remark fm-empty">No picture: there is no map.</p>'


class FigurePanel:
    """Choose what to look at.

    Parameters
    ----------
    state : Reduction
        What is drawn.

    Attributes
    ----------
    kind : ipywidgets.ToggleButtons
        Which figure.
    line : ipywidgets.Dropdown
        Which line of the map; only shown where there are several.
    result : ipywidgets.Dropdown
        Which result the budget is of; only shown beside the budget.
    figure : matplotlib.figure.Figure
        The figure that is drawn on, again and again.
    picture : ipywidgets.HTML
        What was drawn.
    part : {"", "in", "out"}
        Part of the line to show: all of it, or one of its fringes; set it, then call `draw`.
    cursor : float or None
        Position to mark, m; likewise.
    decades : bool
        Whether the profile is shown on a logarithmic scale; likewise.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction, kinds: Sequence[Kind] = tuple(NAMES)) -> None:
        import ipywidgets

        self.state = state
        self.part: Part = ""
        self.cursor: float | None = None
        self.decades = False
        self.figure: Figure = blank_figure()
        self._following = False
        self.kind = hooked(
            ipywidgets.ToggleButtons(options=[(NAMES[kind], kind) for kind in kinds]), "fm-kind"
        )
        self.line = hooked(
            ipywidgets.Dropdown(description="Line", style={"description_width": "36px"}), "fm-line"
        )
        self.line.layout.display = "none"
        self.result = hooked(
            ipywidgets.Dropdown(description="Of", style={"description_width": "24px"}), "fm-of"
        )
        self.result.layout.display = "none"
        self.picture = hooked(ipywidgets.HTML(NOTHING), "fm-picture-box")
        self.bar = row((self.kind, self.line, self.result), "fm-figure-bar")
        self.widget = column((self.bar, self.picture), "fm-figure")
        self.kind.observe(self._on_choice, names="value")
        self.line.observe(self._on_choice, names="value")
        self.result.observe(self._on_choice, names="value")
        state.listen(self._on_change)

    @property
    def span(self) -> tuple[float, float] | None:
        """Ends of the part that is shown, m; None for all of the line."""
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

    def draw(self) -> None:
        """Draw what is chosen."""
        with self.state.lock:
            self.result.layout.display = "" if self.kind.value == "budget" else "none"
            if not self._drawable():
                self.picture.value = NOTHING
                return
            self.picture.value = paint(self.figure, self._drawn()).html

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
        state = self.state
        assert state.axis is not None
        if self.kind.value == "passes":
            return figures.passes_figure(self.figure, state.passes, state.axis.travel, state.marks)
        assert state.fmap is not None
        if self.kind.value == "residuals":
            return figures.residuals_figure(
                self.figure, state.fmap, state.axis.travel, state.map_marks
            )
        line = self.line.value or 0
        if self.kind.value == "uncertainty":
            return figures.uncertainty_figure(self.figure, state.fmap, state.axis, line, self.span)
        if self.kind.value == "budget":
            return budget_figure(self.figure, state.fmap, self.result.value, state.axis, line)
        if self.decades:
            return figures.decay_figure(
                self.figure, state.fmap, state.axis, line, self.span, self.cursor
            )
        results = state.lines[line].results if line < len(state.lines) else None
        return figures.profile_figure(
            self.figure, state.fmap, state.axis, results, line, self.span, self.cursor
        )

    def _on_choice(self, _: dict[str, Any]) -> None:
        if not self._following:
            self.state.attempt("drawing", self.draw)

    def _on_change(self, topic: Topic) -> None:
        if topic in {"campaign", "results"}:  # results come after every map
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
