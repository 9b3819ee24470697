"""What a notebook cell shows: one thing as text and as HTML."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from fieldmap.show.markup import findings_html, results_html, verdicts_html
from fieldmap.show.stylesheet import with_style
from fieldmap.show.tables import summary_text

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.magnet.results import Results
    from fieldmap.readings.passes import Limit

__all__ = ["Shown", "summary"]


@dataclass(frozen=True)
class Shown:
    """Text for a terminal and HTML for a notebook, of the same content.

    Parameters
    ----------
    text : str
        Plain text.
    html : str
        HTML without scripts.

    Examples
    --------
    >>> Shown("12 mm", "<b>12 mm</b>")
    12 mm
    """

    text: str
    html: str

    def __repr__(self) -> str:
        return self.text

    def _repr_html_(self) -> str:
        return with_style(self.html)


def summary(
    results: Results,
    limits: Sequence[Limit] = (),
    truth: Mapping[str, Mapping[str, Any]] | None = None,
) -> Shown:
    """Results, verdicts and findings for a notebook cell.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    limits : sequence of Limit, optional
        Named beside the verdicts: ``campaign.limits``.
    truth : mapping, optional
        Known values, key to ``{"value": …, "unit": …}``.

    Returns
    -------
    Shown

    Examples
    --------
    >>> from fieldmap.magnet.results import Results
    >>> summary(Results("Magnet 3", "", ())).text.splitlines()[0]
    'Magnet 3'
    """
    html = verdicts_html(results, limits) + results_html(results, truth)
    return Shown(
        summary_text(results, limits, truth),
        f'<section class="fm-summary">{html}{findings_html(results.findings)}</section>',
    )
