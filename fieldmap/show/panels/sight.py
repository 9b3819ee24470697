"""Where a figure looks: the part of the line that it shows, and the position that is marked."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

if TYPE_CHECKING:
    from fieldmap.show.panels.state import Reduction

__all__ = ["Sight"]

SHORTEST: Final = 1e-3  # part that is shown, of the whole line
Ends = tuple[float, float]


class Sight:
    """Part and cursor, kept with the campaign where they were set by hand.

    Parameters
    ----------
    state : Reduction
        What keeps them.
    parts : widget
        Its value names the part: "" for all, "in" or "out" for a fringe.

    Attributes
    ----------
    zoom : tuple of float or None
        Ends of a part that has no name, m.
    cursor : float or None
        Position that is marked, m.
    """

    def __init__(self, state: Reduction, parts: Any) -> None:
        self.parts = parts
        self.zoom: Ends | None = None
        self.cursor: float | None = None
        self._by_hand = False  # whether the cursor was set by a person
        self._restored: set[str] = set()  # what was taken up for the campaign that is opened
        state.remember("part", self._kept_part, self._restore_part)
        state.remember("cursor", self._kept_cursor, self._restore_cursor)

    def mark(self, at: float | None) -> None:
        """Put the cursor somewhere, m."""
        self.cursor, self._by_hand = at, True

    def show(self, span: Ends | None, whole: Ends) -> None:
        """Show a part (m): as long as was asked for, moved into the whole; None for the whole."""
        if span is None:
            self.zoom = None
            return
        longest = whole[1] - whole[0]
        length = min(max(span[1] - span[0], SHORTEST * longest), longest)
        low = min(max(span[0], whole[0]), whole[1] - length)
        self.zoom = (low, low + length)

    def begin(self) -> None:
        """Another campaign: all of the line and no cursor, unless they were kept for it."""
        if "part" not in self._restored:
            self.zoom = None
        if "cursor" not in self._restored:
            self.cursor, self._by_hand = None, False
        self._restored.clear()

    def settle(self, whole: Ends, flat: Ends) -> None:
        """Let the cursor begin in the middle of the flat window, and keep it on the line."""
        at = 0.5 * (flat[0] + flat[1]) if self.cursor is None else self.cursor
        self.cursor = min(max(at, whole[0]), whole[1])

    def _kept_part(self) -> str | list[float]:
        return self.parts.value or "" if self.zoom is None else list(self.zoom)

    def _restore_part(self, kept: str | list[float]) -> None:
        """Take up a part that was kept: a name, or the two ends of another."""
        self._restored.add("part")
        if isinstance(kept, str):
            self.parts.value, self.zoom = kept, None
            return
        low, high = (float(end) for end in kept)
        if not low < high:
            raise ValueError(f"found the ends {low:g} and {high:g}, expected rising ones")
        self.zoom = (low, high)

    def _kept_cursor(self) -> float | None:
        return self.cursor if self._by_hand else None

    def _restore_cursor(self, kept: float | None) -> None:
        self._restored.add("cursor")
        self.cursor, self._by_hand = (None, False) if kept is None else (float(kept), True)
