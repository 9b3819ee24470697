"""Numbers one above the other, aligned on their decimal points, in text and in HTML."""

from __future__ import annotations

import re
from html import escape
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["aligned_html", "aligned_text"]

_NUMBER: Final = re.compile(r"(?P<whole>[+-]?\d+)(?P<rest>(?:\.\d+)?(?:e[+-]?\d+)?)")


def aligned_text(cells: Sequence[str]) -> list[str]:
    """Pad numbers to the right, so that their decimal points meet when they stand right-aligned.

    Parameters
    ----------
    cells : sequence of str
        One column; what is no number stays as it is.

    Returns
    -------
    list of str

    Examples
    --------
    >>> aligned_text(["400.005", "-10", "0.5", "not known"])
    ['400.005', '-10    ', '0.5  ', 'not known']
    """
    longest = _longest(cells)
    return [cell if (rest := _rest(cell)) is None else cell + " " * (longest - len(rest))
            for cell in cells]  # fmt: skip


def aligned_html(cells: Sequence[str]) -> list[str]:
    """Content of table cells whose decimal points meet; they are right-aligned by the style sheet.

    Parameters
    ----------
    cells : sequence of str
        One column; what is no number is escaped and stays as it is.

    Returns
    -------
    list of str
        What follows the whole part stands in a box as wide as the longest of them, so that no
        padding gets into what is read aloud or copied.

    Examples
    --------
    >>> aligned_html(["0.05", "12"])[1]
    '12<span class="fm-frac" style="width:3ch"></span>'
    """
    longest = _longest(cells)
    if longest == 0:
        return [escape(cell) for cell in cells]
    return [_boxed(cell, longest) for cell in cells]


def _boxed(cell: str, longest: int) -> str:
    rest = _rest(cell)
    if rest is None:
        return escape(cell)
    whole = cell[: len(cell) - len(rest)]
    return f'{escape(whole)}<span class="fm-frac" style="width:{longest}ch">{escape(rest)}</span>'


def _longest(cells: Sequence[str]) -> int:
    return max((len(rest) for cell in cells if (rest := _rest(cell)) is not None), default=0)


def _rest(cell: str) -> str | None:
    """What follows the whole part of a number; None for other texts."""
    found = _NUMBER.fullmatch(cell)
    return found["rest"] if found else None
