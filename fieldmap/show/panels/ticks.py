"""What the lists of passes and of references have in common: a box to tick in each row."""

from __future__ import annotations

import functools
from typing import TYPE_CHECKING, Any

from fieldmap.show.panels.parts import hooked, row

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["TickList"]


class TickList:
    """A box to tick for each part of a campaign, with a note beside it; subclasses say of what.

    Parameters
    ----------
    state : Reduction
        What uses the parts.
    hook : str
        Class name of a box, as ``fm-…``; a row has it with ``-row``.
    whole : str
        Class name of the list.
    empty : tuple of ipywidgets.Widget
        Shown where there is no part.
    """

    def __init__(
        self, state: Reduction, hook: str, whole: str, empty: tuple[Any, ...] = ()
    ) -> None:
        import ipywidgets

        self.state = state
        self.boxes: tuple[Any, ...] = ()
        self.notes: tuple[Any, ...] = ()
        self._following = False
        self._hook, self._empty = hook, empty
        self.widget = hooked(ipywidgets.VBox(empty), whole)
        state.listen(self._on_change)

    def _offered(self) -> Sequence[tuple[str, bool]]:
        """Words of each part of the campaign, and whether it is in use."""
        raise NotImplementedError

    def _switch(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        """Use a part, or leave it out."""
        raise NotImplementedError

    def _refresh(self) -> None:
        """Show which parts are in use, and what the map says of them."""
        raise NotImplementedError

    def _on_change(self, topic: Topic) -> None:
        if topic in {"campaign", "passes"}:
            self._rebuild()
        elif topic in {"map", "stale"}:
            self._refresh()

    def _rebuild(self) -> None:
        import ipywidgets

        old = [line for line in self.widget.children if line not in self._empty]
        self.boxes = tuple(
            hooked(ipywidgets.Checkbox(value=used, description=words, indent=False), self._hook)
            for words, used in self._offered()
        )
        self.notes = tuple(ipywidgets.HTML() for _ in self.boxes)
        pairs = zip(self.boxes, self.notes, strict=True)
        self.widget.children = (
            tuple(row(pair, f"{self._hook}-row") for pair in pairs) or self._empty
        )
        for index, box in enumerate(self.boxes):
            box.observe(functools.partial(self._on_box, index), names="value")
        for line in old:
            for part in (*line.children, line):
                part.close()

    def _on_box(self, index: int, change: dict[str, Any]) -> None:
        with self.state.lock:
            if not self._following:
                self._switch(index, change["new"])
