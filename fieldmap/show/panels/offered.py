"""The list of offered corrections, there only where there is one."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.estimate.provenance import map_corrections
from fieldmap.show.corrections import found_words
from fieldmap.show.panels.parts import titled
from fieldmap.show.panels.ticks import TickList
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.readings.corrections import Correction
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["OffersPanel"]


class OffersPanel(TickList):
    """A box to tick for each correction that a finding offers.

    Parameters
    ----------
    state : Reduction
        What makes the corrections.

    Attributes
    ----------
    boxes : tuple of ipywidgets.Checkbox
        One a correction, in the order of ``state.offers.listed``.
    notes : tuple of ipywidgets.HTML
        Whether each is made, and what the readings found of it.
    widget : ipywidgets.VBox
        The list.
    section : ipywidgets.VBox
        The list under its heading, to show; away where nothing is offered.
    """

    def __init__(self, state: Reduction) -> None:
        self._listed: tuple[Correction, ...] = ()
        super().__init__(state, "fm-offered", "fm-corrections")
        self.section = titled("Offered corrections", (self.widget,), "fm-corrections-section")
        self.section.layout.display = "none"

    def _offered(self) -> list[tuple[str, bool]]:
        offers = self.state.offers
        self._listed = offers.listed
        self.section.layout.display = "" if offers.listed else "none"
        return [
            (one_line(f"{one.where}: {one.words}"), one in offers.ticked) for one in offers.listed
        ]

    def _switch(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        self.state.correct(index, used)

    def _on_change(self, topic: Topic) -> None:
        super()._on_change(topic)
        if topic == "map" and self._listed != self.state.offers.listed:
            self._rebuild()
            self._refresh()

    def _refresh(self) -> None:
        if self._listed != self.state.offers.listed:
            return  # a new list is built first
        self._following = True
        state = self.state
        made = {}
        if state.fmap is not None and not state.stale:
            made = {one.correction: found_words(one) for one in map_corrections(state.fmap)}
        for one, box, note in zip(self._listed, self.boxes, self.notes, strict=True):
            box.value = one in state.offers.ticked
            note.value = _note(used=box.value, solved=not state.stale, found=made.get(one))
        self._following = False


def _note(*, used: bool, solved: bool, found: str | None) -> str:
    if not used:
        words, mark, css = "not made", "○", "fm-off"
    elif not solved or found is None:
        words, mark, css = "to be solved", "…", "fm-off"
    else:
        words, mark, css = ", ".join(filter(None, ("made", found))), "●", "fm-accept"
    return f'<span class="{css}"><b aria-hidden="true">{mark}</b> {words}</span>'
