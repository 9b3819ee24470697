"""The absolute references: what they say, how the map agrees, and which are used."""

from __future__ import annotations

import functools
from html import escape
from typing import TYPE_CHECKING, Any, Final

from fieldmap.estimate.provenance import reference_fits
from fieldmap.show.panels.departures import reference_words
from fieldmap.show.panels.parts import hooked, row
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.estimate.provenance import ReferenceFit
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["ReferencesPanel"]

MOST: Final = 3.0  # a difference beyond so many times its own expected size is looked at
ALONE: Final = 0.02  # share of a reference that the rest of the campaign has to tell


class ReferencesPanel:
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

        self.state = state
        self.boxes: tuple[Any, ...] = ()
        self.notes: tuple[Any, ...] = ()
        self._following = False
        self._none = ipywidgets.HTML('<p class="fm-remark">No reference in the campaign.</p>')
        self.widget = hooked(ipywidgets.VBox((self._none,)), "fm-references")
        state.listen(self._on_change)

    def _on_change(self, topic: Topic) -> None:
        if topic in {"campaign", "passes"}:
            self._rebuild()
        elif topic in {"map", "stale"}:
            self._refresh()

    def _rebuild(self) -> None:
        import ipywidgets

        old = self.widget.children
        references = self.state.campaign.references if self.state.campaign else ()
        self.boxes = tuple(
            hooked(
                ipywidgets.Checkbox(
                    value=used, description=one_line(reference_words(one)), indent=False
                ),
                "fm-reference",
            )
            for one, used in zip(references, self.state.trusted, strict=True)
        )
        self.notes = tuple(ipywidgets.HTML() for _ in references)
        pairs = zip(self.boxes, self.notes, strict=True)
        rows = tuple(row(pair, "fm-reference-row") for pair in pairs)
        self.widget.children = rows or (self._none,)
        for index, box in enumerate(self.boxes):
            box.observe(functools.partial(self._on_box, index), names="value")
        for line in old:
            if line is not self._none:
                for part in (*line.children, line):
                    part.close()

    def _on_box(self, index: int, change: dict[str, Any]) -> None:
        with self.state.lock:
            if not self._following:
                self.state.trust(index, change["new"])

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
