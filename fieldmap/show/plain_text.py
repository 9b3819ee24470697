"""Tables and paragraphs in plain text, for a terminal."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from collections.abc import Collection, Sequence

__all__ = ["WIDTH", "ruled_table", "wrapped"]

WIDTH: Final = 88


def ruled_table(rows: Sequence[Sequence[str]], left: Collection[int] = (0,)) -> list[str]:
    r"""Lines of a table with a rule under its heading.

    Parameters
    ----------
    rows : sequence of sequence of str
        The heading first, all of the same length.
    left : collection of int
        Columns of words, which stand to the left; numbers stand to the right.

    Returns
    -------
    list of str

    Examples
    --------
    >>> print("\n".join(ruled_table([("result", "value"), ("peak", "0.5")])))
    result  value
    ------  -----
    peak      0.5
    """
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    lines = [
        "  ".join(
            cell.ljust(width) if i in left else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]
    lines.insert(1, "  ".join("-" * width for width in widths))
    return lines


def wrapped(text: str) -> str:
    """A paragraph whose later lines are indented.

    Examples
    --------
    >>> wrapped("one line")
    'one line'
    """
    return textwrap.fill(text, WIDTH, subsequent_indent="  ", break_on_hyphens=False)
