"""Sections that a report has on demand: a comparison, a confirmation by trials, faults put in."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.show.comparison import comparison_html
from fieldmap.show.comparison_plots import HEIGHT, comparison_figure
from fieldmap.show.confirmation import confirmation_html
from fieldmap.show.faults import faults_html
from fieldmap.show.picture import blank_figure
from fieldmap.show.report.parts import Section, figure
from fieldmap.show.vector import inline_svg

if TYPE_CHECKING:
    from fieldmap.bench.confirmation import Confirmation
    from fieldmap.bench.fault_trials import FaultTrials
    from fieldmap.magnet.comparison import Comparison

__all__ = ["comparison_section", "confirmation_section", "faults_section"]


def comparison_section(comparison: Comparison) -> Section:
    """A comparison as a section of a report.

    Parameters
    ----------
    comparison : Comparison
        From `compare`.

    Returns
    -------
    Section
        To be given to `report_html` or `save_report` as one of `extra`.
    """
    drawn = blank_figure()
    drawn.set_size_inches(drawn.get_figwidth(), HEIGHT)
    words = comparison_figure(drawn, comparison)
    picture = figure(inline_svg(drawn, words, "comparison"), words)
    return Section("Comparison", picture + comparison_html(comparison))


def confirmation_section(confirmation: Confirmation) -> Section:
    """A confirmation by trials as a section of a report.

    Parameters
    ----------
    confirmation : Confirmation
        From `confirm`.

    Returns
    -------
    Section
        To be given to `report_html` or `save_report` as one of `extra`.
    """
    return Section("Confirmation by trials", confirmation_html(confirmation))


def faults_section(faults: FaultTrials) -> Section:
    """Faults put into the campaign as a section of a report.

    Parameters
    ----------
    faults : FaultTrials
        From `fault_trials`.

    Returns
    -------
    Section
        To be given to `report_html` or `save_report` as one of `extra`.
    """
    return Section("Faults put in", faults_html(faults))
