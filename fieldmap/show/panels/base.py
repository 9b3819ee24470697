"""What the composed panels have in common: a state, a title, a status, ways to open and show."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, ClassVar

from fieldmap.show.panels.campaign import CampaignPanel, demo_campaigns
from fieldmap.show.panels.figure import FigurePanel
from fieldmap.show.panels.limits import LimitsPanel
from fieldmap.show.panels.parts import column, hooked
from fieldmap.show.panels.passes import PassesPanel
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

        self.state = Reduction()
        self.heading = hooked(ipywidgets.HTML(title_html(self.title, None)), "fm-heading-box")
        self.campaign = CampaignPanel(self.state)
        self.passes = PassesPanel(self.state)
        self.limits = LimitsPanel(self.state)
        self.results = ResultsPanel(self.state)
        self.figure = FigurePanel(self.state)
        self.save = SavePanel(self.state)
        self.state.listen(self._on_change)
        layout = self._layout()
        self.status = StatusPanel(self.state)
        head = (
            ipywidgets.HTML(f"<style>{stylesheet()}</style>"),
            self.heading,
            self.campaign.widget,
            self.status.widget,
        )
        self.widget = column((*head, *layout), "fm", "fm-panel")

    def _layout(self) -> tuple[Any, ...]:
        """Widgets below the status line."""
        raise NotImplementedError

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
        """Show the panel in a notebook, and open a campaign in it.

        Parameters
        ----------
        source : path or Campaign, optional
            As for `open`. A campaign that is open already stays if none is given.
        """
        from IPython.display import display

        display(self.widget)  # type: ignore[no-untyped-call]
        if source is not None or self.state.campaign is None:
            self.open(source)

    def close(self) -> None:
        """Take the panel off the page."""
        self.widget.close()

    def _on_change(self, topic: Topic) -> None:
        if topic == "campaign":
            self.heading.value = title_html(self.title, self.state.campaign)
