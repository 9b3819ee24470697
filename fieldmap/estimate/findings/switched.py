"""What is said of the corrections that the user switched on."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.estimate.findings.finding import Finding

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["switched_findings"]


def switched_findings(passes: Sequence[Pass]) -> list[Finding]:
    """A note for every pass that is not as it was recorded.

    Parameters
    ----------
    passes : sequence of Pass
        As they are fitted.

    Returns
    -------
    list of Finding
    """
    found = []
    for one in passes:
        if one.corrections:
            words = "; ".join(each.words for each in one.corrections)
            text = f"corrected as the user switched on: {words}; results rest on it."
            found.append(Finding("correction-switched-on", "note", one.name, text))
    return found
