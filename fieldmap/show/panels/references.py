"""The absolute references: what they say, how the map agrees, and which are used."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.estimate.provenance import reference_fits
from fieldmap.show.panels.departures import reference_words
from fieldmap.show.panels.ticks import TickList
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.estimate.provenance import ReferenceFit
    from fieldmap.show.panels.state import Reduction

__all__ = ["ReferencesPanel"]

MOST: Final = 3.0  # a difference beyond so many times its own expected size is looked at
ALONE: Final = 0.02  # share of a reference that the rest of the campaign has to tell


class ReferencesPanel(TickList):
    """A box to tick for each reference, with what it says and how the map agrees.

    Parameters
    ----------
    state : Reduction
        What uses the references.

    Attributes
    ----------
    boxes : tuple of ipywidgets.Checkbox
        One a reference, in the order of the campaign.
    notes : tuple of ipywidgets.HTML
        How the map agrees with each.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        none = ipywidgets.HTML('<p class="fm-remark">No reference in the campaign.</p>')
        super().__init__(state, "fm-reference", "fm-references", (none,))

    def _offered(self) -> list[tuple[str, bool]]:
        references = self.state.campaign.references if self.state.campaign else ()
        pairs = zip(references, self.state.trusted, strict=True)
        return [(one_line(reference_words(one)), used) for one, used in pairs]

    def _switch(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        self.state.trust(index, used)

    def _refresh(self) -> None:
        self._following = True
        fits = self._fits()
        for index, (box, note) in enumerate(zip(self.boxes, self.notes, strict=True)):
            used = self.state.trusted[index]
            box.value = used
            note.value = _note(fits.get(index, []), used=used, solved=not self.state.stale)
        self._following = False

    def _fits(self) -> dict[int, list[ReferenceFit]]:
        """How the map agrees with each reference that it rests on, by its index."""
        found: dict[int, list[ReferenceFit]] = {}
        if self.state.fmap is not None and not self.state.stale:
            used = [index for index, flag in enumerate(self.state.trusted) if flag]
            for fit in reference_fits(self.state.fmap):
                found.setdefault(used[fit.number - 1], []).append(fit)
        return found


def _note(fits: list[ReferenceFit], *, used: bool, solved: bool) -> str:
    if not used:
        return _marked("fm-off", "○", "not used")
    if not solved:
        return _marked("fm-off", "…", "to be solved")
    if not fits:
        return _marked("fm-off", "–", "no map")
    worst = max(fits, key=lambda fit: abs(fit.difference))
    words = f"map − reference = {worst.difference:+.2f} u"
    if worst.told < ALONE:
        return _marked("fm-off", "●", f"{words}: nothing else tells as much, so it must agree")
    if abs(worst.difference) > MOST * worst.told**0.5:
        return _marked("fm-warn", "▲", f"{words}: look at it")
    return _marked("fm-accept", "●", f"fits, {words}")


def _marked(style: str, mark: str, words: str) -> str:
    return (
        f'<span class="fm-pass-note"><span class="{style}"><b aria-hidden="true">{mark}</b> '
        f"{escape(words)}</span></span>"
    )
