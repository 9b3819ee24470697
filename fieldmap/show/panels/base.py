"""What the composed panels have in common: a state, a title, a status, ways to open and show."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, ClassVar

from fieldmap.show.panels.campaign import CampaignPanel, demo_campaigns
from fieldmap.show.panels.figure import FigurePanel
from fieldmap.show.panels.limits import LimitsPanel
from fieldmap.show.panels.live import LivePanel
from fieldmap.show.panels.offered import OffersPanel
from fieldmap.show.panels.parts import column, hooked, put_on_page, remembered, titled
from fieldmap.show.panels.passes import PassesPanel
from fieldmap.show.panels.references import ReferencesPanel
from fieldmap.show.panels.results import ResultsPanel
from fieldmap.show.panels.save import SavePanel
from fieldmap.show.panels.state import Reduction
from fieldmap.show.panels.status import StatusPanel, title_html
from fieldmap.show.stylesheet import stylesheet

if TYPE_CHECKING:
    import os

    from fieldmap.readings.passes import Campaign
    from fieldmap.show.panels.state import Topic

__all__ = ["Panel"]


class Panel:
    """Parts that share one state; a subclass lays them out.

    Attributes
    ----------
    state : Reduction
        Campaign, map and results: to go on with in the notebook.
    widget : ipywidgets.VBox
        To show.
    """

    title: ClassVar[str] = ""

    def __init__(self) -> None:
        import ipywidgets

        self.state = Reduction(keeps=True)
        self.heading = hooked(ipywidgets.HTML(title_html(self.title, None)), "fm-heading-box")
        self.campaign = CampaignPanel(self.state)
        self.passes = PassesPanel(self.state)
        self.references = ReferencesPanel(self.state)
        self.offers = OffersPanel(self.state)
        self.limits = LimitsPanel(self.state)
        self.results = ResultsPanel(self.state)
        self.figure = FigurePanel(self.state)
        self.save = SavePanel(self.state)
        self.live = LivePanel(self.state)
        self.state.listen(self._on_change)
        remembered(self.state, "figure", self.figure.kind)
        layout = self._layout()
        self.status = StatusPanel(self.state)
        head = (
            ipywidgets.HTML(f"<style>{stylesheet()}</style>"),
            self.heading,
            self.campaign.widget,
            self.status.widget,
            self.status.controls,
        )
        self.widget = column((*head, *layout), "fm", "fm-panel")

    def _layout(self) -> tuple[Any, ...]:
        """Widgets below the status line."""
        raise NotImplementedError

    def _readings(self) -> Any:
        """What the map rests on: passes, references, and the folder they come from."""
        return column(
            (
                titled("Passes", (self.passes.widget,)),
                self.offers.section,
                titled("References", (self.references.widget,)),
                titled("While measuring", (self.live.widget,)),
            ),
            "fm-readings",
        )

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
        """Show the panel in a notebook, and open a campaign in it; comes back once it is solved.

        What is changed later is solved in the background; `wait` for it where code goes on with
        ``state.results``.

        Parameters
        ----------
        source : path or Campaign, optional
            As for `open`. A campaign that is open already stays if none is given.
        """
        put_on_page(self.widget, self.title)
        self.state.background = True
        if source is not None or self.state.campaign is None:
            self.open(source)
        self.wait()

    def wait(self, timeout: float | None = None) -> bool:
        """Wait until the map and the results are those of what is set.

        Parameters
        ----------
        timeout : float, optional
            s. An interrupt stops the solving as well as the waiting.

        Returns
        -------
        bool
            Whether nothing is left to do.
        """
        try:
            return self.state.wait(timeout)
        except KeyboardInterrupt:
            self.state.stop()
            raise

    def close(self) -> None:
        """Take the panel off the page, and end what it does in the background."""
        self.live.close()
        self.state.stop()
        self.widget.close()

    def _on_change(self, topic: Topic) -> None:
        if topic in {"campaign", "passes"}:
            self.heading.value = title_html(self.title, self.state.campaign)
