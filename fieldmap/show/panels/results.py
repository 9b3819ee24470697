"""Verdicts, results and findings of what is in use."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from fieldmap.show.markup import findings_html, results_html, verdicts_html
from fieldmap.show.panels.parts import hooked

if TYPE_CHECKING:
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["ResultsPanel"]

OUT_OF_DATE: Final = (
    '<p class="fm-remark fm-stale"><b>Out of date</b>: of an earlier choice of passes or '
    "references.</p>"
)


class ResultsPanel:
    """Three pieces to place: verdicts, table of results, findings.

    Parameters
    ----------
    state : Reduction
        Where they come from. Without results the pieces say so: no old number stays.

    Attributes
    ----------
    verdicts, table, findings : ipywidgets.HTML
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        self.state = state
        self.verdicts = hooked(ipywidgets.HTML(), "fm-verdicts-box")
        self.table = hooked(ipywidgets.HTML(), "fm-results-box")
        self.findings = hooked(ipywidgets.HTML(), "fm-findings-box")
        self._old = False
        self._show()
        state.listen(self._on_change)

    def _on_change(self, topic: Topic) -> None:
        if topic in {"campaign", "stale", "results"} or (topic == "map" and self._old):
            self._show()

    def _show(self) -> None:
        results, campaign = self.state.results, self.state.campaign
        self._old = self.state.stale
        if results is None or campaign is None:
            self.verdicts.value = ""
            self.table.value = '<p class="fm-remark">No results.</p>'
            self.findings.value = ""
            return
        note = OUT_OF_DATE if self._old else ""
        self.verdicts.value = note + verdicts_html(results, campaign.limits)
        self.table.value = note + results_html(results)
        self.findings.value = findings_html(results.findings)
