"""The uncertainty budget as text and HTML: which cause gives how much. Pure functions.

One table a result: causes, largest first, with their standard uncertainties and their shares of
the variance; and one table of how the results hang together.
"""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.magnet.budget import budget
from fieldmap.show.align import aligned_html, aligned_text
from fieldmap.show.budget_rows import NOTHING, BudgetRows, budget_rows, chosen
from fieldmap.show.display import Shown
from fieldmap.show.rows import label, one_line

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.magnet.budget import Budget, Budgets
    from fieldmap.readings.passes import Axis

__all__ = [
    "TYPES",
    "budget_html",
    "budget_table",
    "budget_text",
    "correlation_html",
    "correlation_text",
]

TYPES: Final = (
    "Type A: evaluated by statistics of these readings; type B: stated (JCGM 100:2008, 4.2, 4.3)."
)


def budget_text(one: Budget, *, k: float = 2.0) -> str:
    """The budget of one result as a table in plain text.

    Parameters
    ----------
    one : Budget
        From `fieldmap.magnet.budget.budget`.
    k : float
        Coverage factor of the expanded uncertainty.

    Returns
    -------
    str
        Causes below 0.1 % of the variance stand together in one row; the shares sum to 100.0 %.
        Ends without a line break.

    Examples
    --------
    >>> from fieldmap.magnet.budget import Budget, Contribution
    >>> parts = (Contribution("read noise", "", "A", 3e-6), Contribution("scale", "", "B", 4e-6))
    >>> print(budget_text(Budget("magnetic_length", 0.4, "m", parts)))
    Magnetic length: 400.000 ± 0.010 mm (k = 2)
    cause              where  type  u / µm  share / %
    -----------------  -----  ----  ------  ---------
    scale                     B       4.00       64.0
    read noise                A       3.00       36.0
    combined u                        5.00      100.0
    expanded U, k = 2                10.00
    """
    rows = budget_rows(one, k)
    if not rows.rows:
        return f"{rows.title}\n{NOTHING}"
    head = ("cause", "where", "type", f"u / {rows.unit or 1}", "share / %")
    columns = [list(column) for column in zip(*_cells(rows), strict=True)]
    columns[3:] = [aligned_text(column) for column in columns[3:]]
    return "\n".join([rows.title, *_lines(head, columns, left=3)])


def budget_html(one: Budget, *, k: float = 2.0) -> str:
    """The budget of one result as an HTML table.

    Parameters
    ----------
    one : Budget
        From `fieldmap.magnet.budget.budget`.
    k : float
        Coverage factor of the expanded uncertainty.

    Returns
    -------
    str
        The table carries ``data-key``.

    Examples
    --------
    >>> from fieldmap.magnet.budget import Budget
    >>> NOTHING in budget_html(Budget("magnetic_length", 0.4, "m", ()))
    True
    """
    rows = budget_rows(one, k)
    title = escape(rows.title)
    if not rows.rows:
        return f'<p class="fm-remark">{title}. {NOTHING}</p>'
    head = (
        '<th scope="col">Cause</th><th scope="col">Where</th><th scope="col">Type</th>'
        f'<th scope="col" class="fm-right">u ({escape(rows.unit or "1")})</th>'
        '<th scope="col" class="fm-right">Share of u² (%)</th>'
    )
    cells = _cells(rows)
    u, share = (aligned_html([row[i] for row in cells]) for i in (3, 4))
    body = [
        f'<tr{"" if i < len(rows.rows) else " class=fm-sum"}><th scope="row">{escape(row[0])}</th>'
        f"<td>{escape(row[1])}</td><td>{row[2]}</td>"
        f'<td class="fm-number">{u[i]}</td><td class="fm-number">{share[i]}</td></tr>'
        for i, row in enumerate(cells)
    ]
    return (
        f'<table class="fm-table fm-budget" data-key="{escape(one_line(one.result))}">'
        f"<caption>{title}</caption><thead><tr>{head}</tr></thead>"
        f"<tbody>{''.join(body)}</tbody></table>"
    )


def correlation_text(budgets: Budgets, keys: Sequence[str] | None = None) -> str:
    """Correlation coefficients of the results as a table in plain text.

    Parameters
    ----------
    budgets : Budgets
        From `fieldmap.magnet.budget.budget`.
    keys : sequence of str, optional
        Results to show; all if not given, and those that are not there are passed over.

    Returns
    -------
    str

    Examples
    --------
    >>> from fieldmap.magnet.budget import Budget, Budgets
    >>> two = {key: Budget(key, 1.0, "m", ()) for key in ("boundary_in", "boundary_out")}
    >>> print(correlation_text(Budgets(two, np.array([[1, 0.986], [0.986, 1]]))))
    correlation of     1     2
    --------------  ----  ----
    1 Boundary in   1.00  0.99
    2 Boundary out  0.99  1.00
    """
    names, cells = _correlation(budgets, keys)
    columns = [names, *([row[i] for row in cells] for i in range(len(names)))]
    head = ["correlation of", *(str(i) for i in range(1, len(names) + 1))]
    return "\n".join(_lines(head, columns, left=1))


def correlation_html(budgets: Budgets, keys: Sequence[str] | None = None) -> str:
    """Correlation coefficients of the results as an HTML table; parameters as in text."""
    names, cells = _correlation(budgets, keys)
    head = "".join(f'<th scope="col" class="fm-right">{i}</th>' for i in range(1, len(names) + 1))
    body = "".join(
        f'<tr><th scope="row">{escape(name)}</th>'
        + "".join(f'<td class="fm-number">{cell}</td>' for cell in row)
        + "</tr>"
        for name, row in zip(names, cells, strict=True)
    )
    return (
        '<table class="fm-table fm-correlation"><caption>Correlation of the results</caption>'
        f'<thead><tr><th scope="col">Result</th>{head}</tr></thead><tbody>{body}</tbody></table>'
    )


def budget_table(
    fmap: xr.Dataset,
    result: str = "magnetic_length",
    *,
    axis: Axis | None = None,
    line: int = 0,
    k: float = 2.0,
) -> Shown:
    """The budget of one result of a map, for a notebook cell.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    result : str
        Key of the result.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    line : int
        Index of the line.
    k : float
        Coverage factor of the expanded uncertainty.

    Returns
    -------
    Shown

    Raises
    ------
    InputError
        The map gives no such result.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> "Share of u²" in budget_table(fmap).html
    True
    """
    one = chosen(budget(fmap, axis=axis, line=line), result)
    remark = f'<p class="fm-remark">{TYPES}</p>'
    return Shown(f"{budget_text(one, k=k)}\n{TYPES}", budget_html(one, k=k) + remark)


def _cells(rows: BudgetRows) -> list[tuple[str, str, str, str, str]]:
    """All rows of a budget table, the sums last."""
    return [
        *((row.cause, row.where, row.evaluation, row.u, row.percent) for row in rows.rows),
        ("combined u", "", "", rows.combined, "100.0"),
        (f"expanded U, k = {rows.k:g}", "", "", rows.expanded, ""),
    ]


def _correlation(budgets: Budgets, keys: Sequence[str] | None) -> tuple[list[str], list[list[str]]]:
    """Numbered names of the results, and rows of coefficients with two decimals."""
    there = list(budgets.results)
    index = [there.index(key) for key in (keys or there) if key in there]
    part = budgets.correlation[np.ix_(index, index)]
    names = [f"{i} {label(there[j])}" for i, j in enumerate(index, start=1)]
    return names, [[_coefficient(one) for one in row] for row in part.tolist()]


def _coefficient(one: float) -> str:
    """Two decimals; beside an exact result there is no correlation."""
    return f"{one:z.2f}" if np.isfinite(one) else "–"


def _lines(head: Sequence[str], columns: Sequence[Sequence[str]], left: int) -> list[str]:
    """Lines of a text table: columns of words to the left, of numbers to the right."""
    padded = []
    for i, (word, column) in enumerate(zip(head, columns, strict=True)):
        width = max(len(word), *(len(cell) for cell in column))
        cells = (word, "-" * width, *column)
        padded.append([cell.ljust(width) if i < left else cell.rjust(width) for cell in cells])
    return ["  ".join(row).rstrip() for row in zip(*padded, strict=True)]
