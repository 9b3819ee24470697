"""The head of a table in HTML: lines as they stand, readings as they are read."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.readings.layout import QUANTITIES
from fieldmap.show.align import aligned_html
from fieldmap.show.numbers import plain

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.readings.passes import Floats

__all__ = ["parsed_html", "raw_html"]

ROWS: Final = 6


def raw_html(lines: Sequence[str]) -> str:
    """Lines of a file with their numbers, nothing in them taken for HTML.

    Examples
    --------
    >>> raw_html(["<b>"])
    '<pre class="fm-raw"><b aria-hidden="true">1  </b>&lt;b&gt;</pre>'
    """
    width = len(str(len(lines)))
    numbered = "\n".join(
        f'<b aria-hidden="true">{number:>{width}}  </b>{escape(line)}'
        for number, line in enumerate(lines, start=1)
    )
    return f'<pre class="fm-raw">{numbered}</pre>'


def parsed_html(columns: Mapping[str, Floats], rows: int = ROWS) -> str:
    """The first readings of a table in SI.

    Parameters
    ----------
    columns : mapping of str to (n,) array
        By the names of `fieldmap.readings.layout.QUANTITIES`.
    rows : int
        Readings to show; the last one of them all follows.

    Returns
    -------
    str
        An HTML table.
    """
    count = len(next(iter(columns.values())))
    shown = [*range(min(rows, count)), *([count - 1] if count > rows else [])]
    head = "".join(
        f'<th scope="col" class="fm-right">{escape(name)} ({escape(QUANTITIES[name])})</th>'
        for name in columns
    )
    cells = [aligned_html([plain(float(v[i]), 7) for i in shown]) for v in columns.values()]
    body = "".join(
        f'<tr><th scope="row">{index + 1}</th>'
        + "".join(f'<td class="fm-number">{column[k]}</td>' for column in cells)
        + "</tr>"
        for k, index in enumerate(shown)
    )
    return (
        '<table class="fm-table fm-explore" data-kind="readings"><caption>First readings and the '
        f'last one</caption><thead><tr><th scope="col">reading</th>{head}</tr></thead>'
        f"<tbody>{body}</tbody></table>"
    )
