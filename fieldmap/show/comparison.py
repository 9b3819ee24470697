"""A comparison of two profiles as text and as HTML: pure functions of what was found."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.show.budget_rows import with_unit
from fieldmap.show.display import Shown
from fieldmap.show.look import MM
from fieldmap.show.numbers import plain, rounded, scale_for
from fieldmap.show.plain_text import ruled_table, wrapped
from fieldmap.show.rows import label, one_line

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.magnet.comparison.outcome import ComparedResult, Comparison, Stretch
    from fieldmap.magnet.quantity import Quantity

__all__ = ["comparison_html", "comparison_text", "show_comparison"]

K: Final = 2.0
RESULTS_HEAD: Final = ("result", "first", "second", "difference", "± U", "unit", "significant")
STRETCHES_HEAD: Final = ("from (mm)", "to (mm)", "largest at (mm)", "difference", "± band", "unit")


def comparison_text(comparison: Comparison) -> str:
    """A comparison as plain text.

    Parameters
    ----------
    comparison : Comparison
        From `compare`.

    Returns
    -------
    str
        Ends without a line break.

    Examples
    --------
    >>> import numpy as np
    >>> from fieldmap.magnet.comparison.outcome import Comparison, DifferenceProfile
    >>> s, none = np.linspace(-0.1, 0.1, 3), np.zeros(3)
    >>> band = DifferenceProfile(s, none, none + 1e-5, 2.5)
    >>> found = Comparison(
    ...     ("May", "June"), "By", "z", False, none, none, None, None, 0.0, band, None, {}, ()
    ... )
    >>> print(comparison_text(found))
    By of May (first) less June (second), z from -100 to 100 mm.
    <BLANKLINE>
    The profiles were compared as they stand.
    Nowhere does the difference leave its simultaneous 95 % band.
    """
    parts = [_title(comparison)]
    if comparison.results:
        rows = [_result_cells(key, one) for key, one in comparison.results.items()]
        parts.append(f"{wrapped(_coverage())}\n{_table(RESULTS_HEAD, rows)}")
    parts.append("\n".join(wrapped(one) for one in _sentences(comparison)))
    if comparison.stretches:
        rows = [_stretch_cells(one) for one in comparison.stretches]
        parts.append(_table(STRETCHES_HEAD, rows))
    if comparison.remarks:
        parts.append("\n".join(wrapped(one_line(one)) for one in comparison.remarks))
    return "\n\n".join(parts)


def comparison_html(comparison: Comparison) -> str:
    """A comparison as HTML without scripts; every text from a file is escaped.

    Parameters
    ----------
    comparison : Comparison
        From `compare`.

    Returns
    -------
    str
        The classes are those of `fieldmap.show.stylesheet`; rows carry ``data-key``.
    """
    parts = []
    if comparison.results:
        rows = [(key, _result_cells(key, one)) for key, one in comparison.results.items()]
        parts.append(_html_table(_title(comparison), RESULTS_HEAD, rows))
        parts.append(f'<p class="fm-remark">{escape(_coverage())}</p>')
    else:
        parts.append(f"<p>{escape(_title(comparison))}</p>")
    parts += [f"<p>{escape(one)}</p>" for one in _sentences(comparison)]
    if comparison.stretches:
        cells = [(f"stretch-{i}", _stretch_cells(one)) for i, one in _counted(comparison)]
        title = "Where the difference leaves its simultaneous 95 % band"
        parts.append(_html_table(title, STRETCHES_HEAD, cells))
    parts += [f'<p class="fm-remark">{escape(one_line(one))}</p>' for one in comparison.remarks]
    return f'<section class="fm-summary fm-comparison">{"".join(parts)}</section>'


def show_comparison(comparison: Comparison) -> Shown:
    """A comparison for a notebook cell.

    Parameters
    ----------
    comparison : Comparison
        From `compare`.

    Returns
    -------
    Shown
    """
    return Shown(comparison_text(comparison), comparison_html(comparison))


def _counted(comparison: Comparison) -> list[tuple[int, Stretch]]:
    return list(enumerate(comparison.stretches, start=1))


def _title(comparison: Comparison) -> str:
    first, second = (one_line(name) for name in comparison.names)
    low, high = comparison.before.s[0] * MM, comparison.before.s[-1] * MM
    return (
        f"{one_line(comparison.component)} of {first} (first) less {second} (second), "
        f"{comparison.travel} from {plain(low, 6)} to {plain(high, 6)} mm."
    )


def _coverage() -> str:
    return (
        "Results before any alignment; U is the expanded uncertainty, k = 2; a difference is "
        "significant beyond it."
    )


def _sentences(comparison: Comparison) -> list[str]:
    """Alignment and verdict in words."""
    return [*_alignment(comparison), *_verdict(comparison)]


def _alignment(comparison: Comparison) -> list[str]:
    shift, scale = comparison.shift, comparison.scale
    if shift is None or scale is None:
        return ["The profiles were compared as they stand."]
    sentence = (
        f"The second fits the first best when moved by {_with_u(shift)} and enlarged by "
        f"{_with_u(scale)} (k = 2, correlation {comparison.correlation:z.2f})."
    )
    return [sentence]


def _verdict(comparison: Comparison) -> list[str]:
    when = "" if comparison.after is None else "After that, "
    count = len(comparison.stretches)
    if count == 0:
        words = "nowhere does the difference leave its simultaneous 95 % band."
    else:
        where = "1 stretch" if count == 1 else f"{count} stretches"
        words = f"the difference leaves its simultaneous 95 % band on {where}."
    return [when + words if when else words[0].upper() + words[1:]]


def _with_u(one: Quantity) -> str:
    scale = scale_for(one.unit, [one.value])
    value, half = rounded(one.value * scale.factor, one.expanded(K) * scale.factor)
    return with_unit(f"{value} ± {half}", scale.unit)


def _result_cells(key: str, one: ComparedResult) -> tuple[str, ...]:
    scale = scale_for(one.first.unit, [one.first.value, one.second.value])
    factor = scale.factor
    difference, half = rounded(one.difference.value * factor, one.difference.expanded(K) * factor)
    decimals = len(difference.partition(".")[2])
    first, second = (f"{q.value * factor:z.{decimals}f}" for q in (one.first, one.second))
    told = "YES" if one.significant else "no"
    return (label(key), first, second, difference, half, scale.unit, told)


def _stretch_cells(one: Stretch) -> tuple[str, ...]:
    scale = scale_for("T", [one.difference])
    value, half = rounded(one.difference * scale.factor, one.half_width * scale.factor)
    places = (plain(place * MM, 6) for place in (one.start, one.stop, one.at))
    return (*places, value, half, scale.unit)


def _table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    cells = [tuple(head), *rows]
    left = (0,) if head is RESULTS_HEAD else ()
    return "\n".join(ruled_table(cells, left))


def _html_table(title: str, head: Sequence[str], rows: Sequence[tuple[str, Sequence[str]]]) -> str:
    names = "".join(f'<th scope="col">{escape(word.capitalize())}</th>' for word in head)
    body = "".join(
        f'<tr data-key="{escape(key)}"><th scope="row">{escape(cells[0])}</th>'
        + "".join(f"<td>{escape(cell)}</td>" for cell in cells[1:])
        + "</tr>"
        for key, cells in rows
    )
    return (
        f'<table class="fm-table"><caption>{escape(title)}</caption>'
        f"<thead><tr>{names}</tr></thead><tbody>{body}</tbody></table>"
    )
