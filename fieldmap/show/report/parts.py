"""What reports are built of: sections, tables, figures. Every text is escaped here."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Literal

from fieldmap.show.align import aligned_html
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["Column", "Section", "figure", "paragraph", "safe", "table"]

Kind = Literal["words", "number", "code"]


@dataclass(frozen=True)
class Section:
    """A part of a report: its title, and what stands below as HTML."""

    title: str
    html: str


@dataclass(frozen=True)
class Column:
    """Head of a table's column, and how its cells are set."""

    head: str
    kind: Kind = "words"


def safe(text: str) -> str:
    """Text from anywhere, as HTML on one line."""
    return escape(one_line(text))


def paragraph(text: str, css: str = "") -> str:
    """A paragraph of plain text."""
    named = f' class="{css}"' if css else ""
    return f"<p{named}>{safe(text)}</p>"


def table(
    caption: str,
    columns: Sequence[Column],
    rows: Sequence[Sequence[str]],
    *,
    css: str = "",
    keys: Sequence[str] | None = None,
) -> str:
    """A table of plain texts: numbers aligned on their decimal points.

    Parameters
    ----------
    caption : str
        Says what it holds.
    columns : sequence of Column
        Heads; the first column names the rows.
    rows : sequence of sequence of str
        As many texts each as there are columns.
    css : str
        Class names.
    keys : sequence of str, optional
        ``data-key`` of each row.

    Returns
    -------
    str

    Examples
    --------
    >>> shown = table("Tolls", [Column("bridge"), Column("toll", "number")], [["A<B", "0.50"]])
    >>> "A&lt;B" in shown, '<th scope="col">bridge</th>' in shown
    (True, True)
    """
    cells = [_cells(column, [row[i] for row in rows]) for i, column in enumerate(columns)]
    head = "".join(f'<th scope="col"{_set(column)}>{safe(column.head)}</th>' for column in columns)
    body = []
    for i in range(len(rows)):
        key = f' data-key="{safe(keys[i])}"' if keys else ""
        rest = "".join(
            f"<td{_set(column)}>{cells[j][i]}</td>" for j, column in enumerate(columns[1:], start=1)
        )
        body.append(f'<tr{key}><th scope="row"{_set(columns[0])}>{cells[0][i]}</th>{rest}</tr>')
    return (
        f'<table class="{css}"><caption>{safe(caption)}</caption>'
        f"<thead><tr>{head}</tr></thead><tbody>{''.join(body)}</tbody></table>"
    )


def figure(svg: str, words: str) -> str:
    """A figure with its words below; they are its text alternative already."""
    return f'<figure>{svg}<figcaption aria-hidden="true">{safe(words)}</figcaption></figure>'


def _cells(column: Column, texts: Sequence[str]) -> list[str]:
    if column.kind == "number":
        return aligned_html([one_line(text) for text in texts])
    return [safe(text) for text in texts]


def _set(column: Column) -> str:
    return "" if column.kind == "words" else f' class="{column.kind}"'
