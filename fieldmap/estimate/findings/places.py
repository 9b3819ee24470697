"""Where in a pass something was found, and numbers as they stand in a sentence."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass

__all__ = ["many", "place"]


def place(one: Pass, row: int) -> str:
    """Time and position of a reading, in words."""
    return f"{one.time[row]:.6g} s ({one.position[row] * 1e3:.6g} mm)"


def many(count: int, noun: str, plural: str | None = None) -> str:
    """A count with its noun."""
    return f"{count} {noun if count == 1 else plural or noun + 's'}"
