"""Look at passes freely: readings, two passes against each other, noise, corrections."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any, Final, Literal

from fieldmap.estimate.agreement import pass_agreement
from fieldmap.estimate.dwell import find_dwells
from fieldmap.estimate.map import map_lines
from fieldmap.magnet.corrections import Corrections, corrections
from fieldmap.show.explore import hear, pass_index
from fieldmap.show.explore_plots import (
    agreement_figure,
    allan_figure,
    readings_figure,
    spectrum_figure,
)
from fieldmap.show.explore_tables import agreement_shown, corrections_shown, dwell_shown
from fieldmap.show.look import MM, short
from fieldmap.show.numbers import plain
from fieldmap.show.panels.campaign import CampaignPanel, demo_campaigns
from fieldmap.show.panels.parts import column, hooked, put_on_page, row
from fieldmap.show.panels.state import Reduction
from fieldmap.show.panels.status import StatusPanel, title_html
from fieldmap.show.picture import blank_figure, paint
from fieldmap.show.rows import label
from fieldmap.show.stylesheet import stylesheet

if TYPE_CHECKING:
    import os
    from collections.abc import Sequence

    from fieldmap.readings.passes import Campaign, Pass
    from fieldmap.show.panels.state import Topic

__all__ = ["ExplorePanel", "View"]

View = Literal["readings", "pair", "spectrum", "allan", "corrections"]

ALL: Final = -1  # the choice that stands for every pass
TITLE: Final = "Explore passes"
_VIEWS: Final[tuple[tuple[str, View], ...]] = (
    ("Readings", "readings"),
    ("Two passes", "pair"),
    ("Spectrum", "spectrum"),
    ("Allan deviation", "allan"),
    ("Corrections", "corrections"),
)
_QUANTITIES: Final = (
    ("flux", "flux"),
    ("increments", "increments"),
    ("voltage", "voltage"),
    ("speed", "speed"),
)
_AGAINST: Final = (("position", "position"), ("time", "time"))
_FIRST_RESULT: Final = "magnetic_length"
# which choices each view has
_CHOICES: Final[dict[View, tuple[str, ...]]] = {
    "readings": ("first", "quantity", "against"),
    "pair": ("first", "second"),
    "spectrum": ("first", "dwell"),
    "allan": ("first", "dwell"),
    "corrections": ("result", "line"),
}
_NO_MAP: Final = '<p class="fm-remark fm-empty">Nothing to show: there is no map.</p>'
_NO_CAMPAIGN: Final = '<p class="fm-remark fm-empty">Nothing to show: choose a campaign.</p>'


class ExplorePanel:
    """Choose what to look at; every choice can be made from the keyboard.

    Attributes
    ----------
    state : Reduction
        Campaign, map and results: to go on with in the notebook.
    view : ipywidgets.ToggleButtons
        Readings, two passes, spectrum, Allan deviation or corrections.
    first, second : ipywidgets.Dropdown
        Passes, by their place in the campaign.
    dwell : ipywidgets.Dropdown
        A dwell of the first pass.
    quantity, against : ipywidgets.Dropdown
        What of the readings is drawn, and against what.
    result : ipywidgets.Dropdown
        The result that the corrections are of.
    line : ipywidgets.Dropdown
        The line of the map that it is of; only shown where there are several.
    figure : matplotlib.figure.Figure
        The figure that is drawn on, again and again.
    picture, table : ipywidgets.HTML
        What was drawn, and its numbers.
    widget : ipywidgets.VBox
        To show.

    Examples
    --------
    >>> panel = ExplorePanel()
    >>> panel.open()
    >>> panel.view.value = "pair"
    >>> "They agree" in panel.table.value
    True
    """

    def __init__(self) -> None:
        import ipywidgets

        self.state = Reduction()
        self.figure = blank_figure()
        self._following = False
        self._corrections: tuple[Any, Any, Corrections] | None = None
        self.heading = hooked(ipywidgets.HTML(title_html(TITLE, None)), "fm-heading-box")
        self.campaign = CampaignPanel(self.state)
        self.view = hooked(ipywidgets.ToggleButtons(options=_VIEWS), "fm-kind", "fm-view")
        self.first = _dropdown("Pass", "fm-first")
        self.second = _dropdown("against", "fm-second")
        self.dwell = _dropdown("Dwell", "fm-dwell")
        self.quantity = _dropdown("Show", "fm-quantity", _QUANTITIES)
        self.against = _dropdown("against", "fm-against", _AGAINST)
        self.result = _dropdown("Of", "fm-result")
        self.line = _dropdown("Line", "fm-line")
        self.picture = hooked(ipywidgets.HTML(_NO_CAMPAIGN), "fm-picture-box")
        self.table = hooked(ipywidgets.HTML(), "fm-explore-table")
        self.state.listen(self._on_change)
        self.status = StatusPanel(self.state)
        self.widget = column(
            (
                ipywidgets.HTML(f"<style>{stylesheet()}</style>"),
                self.heading,
                self.campaign.widget,
                self.status.widget,
                self.status.controls,
                row((self.view, *self._choices().values()), "fm-figure-bar"),
                self.picture,
                self.table,
            ),
            "fm",
            "fm-panel",
            "fm-explore-panel",
        )
        self._show_choices()
        for choice in (self.view, *self._choices().values()):
            choice.observe(self._on_choice, names="value")

    def open(self, source: str | os.PathLike[str] | Campaign | None = None) -> None:
        """Open a campaign.

        Parameters
        ----------
        source : path or Campaign, optional
            A campaign.toml, its folder, or a campaign that is loaded already; the first one of
            the demo if not given.
        """
        self.state.open(next(iter(demo_campaigns().values())) if source is None else source)

    def show(self, source: str | os.PathLike[str] | Campaign | None = None) -> None:
        """Show the panel in a notebook, and open a campaign in it; as for `open`.

        It comes back once the campaign is solved; others are solved in the background.
        """
        put_on_page(self.widget, TITLE)
        self.state.background = True
        if source is not None or self.state.campaign is None:
            self.open(source)
        self.wait()

    def wait(self, timeout: float | None = None) -> bool:
        """Wait until nothing is solved in the background; whether that is so."""
        try:
            return self.state.wait(timeout)
        except KeyboardInterrupt:
            self.state.stop()
            raise

    def close(self) -> None:
        """Take the panel off the page, and end what it does in the background."""
        self.state.stop()
        self.widget.close()

    def draw(self) -> None:
        """Draw what is chosen."""
        with self.state.lock:
            self.picture.value, self.table.value = "", ""
            if self.state.campaign is None or not self.state.campaign.passes:
                self.picture.value = _NO_CAMPAIGN
            elif self.state.fmap is None and self.view.value in {"pair", "corrections"}:
                self.picture.value = _NO_MAP
            else:
                self._draw()

    def _draw(self) -> None:
        view: View = self.view.value
        if view == "readings":
            self._draw_readings()
        elif view == "pair":
            self._draw_pair()
        elif view == "corrections":
            self._show_corrections()
        else:
            self._draw_dwell()

    def _draw_readings(self) -> None:
        campaign = self._campaign
        wanted = self.first.value
        marks = [wanted] if wanted != ALL else list(range(len(campaign.passes)))
        words = readings_figure(
            self.figure,
            [campaign.passes[i] for i in marks],
            self.quantity.value,
            self.against.value,
            campaign.axis.travel,
            marks,
        )
        self.picture.value = paint(self.figure, words).html

    def _draw_pair(self) -> None:
        fmap, passes = self.state.fmap, self._campaign.passes
        assert fmap is not None
        indices = [pass_index(fmap, passes[i]) for i in (self.first.value, self.second.value)]
        if None in indices:
            self.picture.value = _NO_MAP
            return
        found = pass_agreement(fmap, *(int(i) for i in indices if i is not None))
        words = agreement_figure(self.figure, found, self._campaign.axis.travel)
        self.picture.value = paint(self.figure, words).html
        self.table.value = agreement_shown(found).html

    def _draw_dwell(self) -> None:
        one = self._campaign.passes[self.first.value]
        heard = hear(one, self.dwell.value or 1, self.state.fmap)
        drawn = spectrum_figure if self.view.value == "spectrum" else allan_figure
        self.picture.value = paint(self.figure, drawn(self.figure, heard)).html
        self.table.value = dwell_shown(heard).html

    def _show_corrections(self) -> None:
        fmap = self.state.fmap
        assert fmap is not None
        line = self.line.value or 0
        known, axis = self._corrections, self.state.axis
        if known is None or known[0] is not fmap or known[1] != (axis, line):
            used = replace(self._campaign, passes=self.state.passes)
            known = fmap, (axis, line), corrections(fmap, used, axis=axis, line=line)
            self._corrections = known
        found = known[2]
        self._offer(self.result, [(label(key), key) for key in found.results], _FIRST_RESULT)
        self.table.value = corrections_shown(found, self.result.value).html

    @property
    def _campaign(self) -> Campaign:
        campaign = self.state.campaign
        assert campaign is not None
        return campaign

    def _choices(self) -> dict[str, Any]:
        return {
            "first": self.first,
            "second": self.second,
            "dwell": self.dwell,
            "quantity": self.quantity,
            "against": self.against,
            "result": self.result,
            "line": self.line,
        }

    def _show_choices(self) -> None:
        """Show the choices that the view has, and offer all passes where it can draw them."""
        wanted = _CHOICES[self.view.value]
        for name, widget in self._choices().items():
            widget.layout.display = "" if name in wanted else "none"
        passes = self.state.campaign.passes if self.state.campaign else ()
        options = [(short(one.name), i) for i, one in enumerate(passes)]
        every = [("all passes", ALL)] if self.view.value == "readings" and options else []
        self._offer(self.first, [*every, *options])
        self._offer(self.second, options, 1 if len(options) > 1 else None)
        self._offer_dwells(passes)
        lines = map_lines(self.state.fmap) if self.state.fmap is not None else []
        titles = [f"x {plain(one.x * MM, 4)} mm, y {plain(one.y * MM, 4)} mm" for one in lines]
        self._offer(self.line, [(title, i) for i, title in enumerate(titles)])
        if len(lines) < 2:
            self.line.layout.display = "none"

    def _offer_dwells(self, passes: Sequence[Pass]) -> None:
        """Offer the dwells of the first pass."""
        index = self.first.value
        if "dwell" not in _CHOICES[self.view.value] or index is None or index == ALL:
            return
        found = find_dwells(passes[index])
        titles = [f"{one.number}: {plain(one.at * MM, 5)} mm" for one in found]
        self._offer(self.dwell, [(title, i) for i, title in enumerate(titles, start=1)])

    def _offer(self, choice: Any, options: list[tuple[str, Any]], first: Any = None) -> None:
        """Offer options; what is chosen stays where it is among them."""
        if list(choice.options) == options:
            return
        values = [value for _, value in options]
        usual = first if first in values else next(iter(values), None)
        chosen = choice.value if choice.value in values else usual
        before, self._following = self._following, True
        choice.options = options
        choice.value = chosen
        self._following = before

    def _on_choice(self, _: dict[str, Any]) -> None:
        with self.state.lock:
            if not self._following:
                self.state.attempt("drawing", self._follow)

    def _follow(self) -> None:
        self.picture.value, self.table.value = "", ""  # nothing old stays beside an error
        self._show_choices()
        self.draw()

    def _on_change(self, topic: Topic) -> None:
        if topic == "campaign":
            self._corrections = None
            self.heading.value = title_html(TITLE, self.state.campaign)
        if topic in {"campaign", "passes", "results"}:  # results come after every map
            self.state.attempt("drawing", self._follow)


def _dropdown(description: str, hook: str, options: Sequence[tuple[str, str]] = ()) -> Any:
    """A list to choose from, as wide as it needs to be."""
    import ipywidgets

    width = f"{8 * len(description) + 4}px"
    choice = ipywidgets.Dropdown(
        description=description, options=options, style={"description_width": width}
    )
    return hooked(choice, "fm-choice", hook)
