"""Results, findings and verdicts as HTML: pure functions, every text from a file escaped."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Any

from fieldmap.show.rows import (
    SEVERITY_WORDS,
    campaign_title,
    coverage_words,
    line_title,
    meaning,
    one_line,
    result_rows,
    verdict_words,
    worst_first,
)

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from fieldmap.estimate.findings import Finding
    from fieldmap.magnet.results import LineResults, Results
    from fieldmap.readings.passes import Limit
    from fieldmap.show.rows import ResultRow

__all__ = ["findings_html", "results_html", "verdicts_html"]

_HEAD = ("Result", "Value", "± U", "Unit", "Truth", "Off by")


def results_html(
    results: Results, truth: Mapping[str, Mapping[str, Any]] | None = None, *, k: float = 2.0
) -> str:
    """Results as HTML tables, one a line of the map.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    truth : mapping, optional
        Key of a result to ``{"value": …, "unit": …}``: known values to set beside the results,
        with the difference in standard uncertainties.
    k : float
        Coverage factor of the expanded uncertainty that is shown.

    Returns
    -------
    str
        Rows carry ``data-key``; the classes are those of `fieldmap.show.stylesheet`.

    Raises
    ------
    InputError
        A known value without a number or with a foreign unit.

    Examples
    --------
    >>> from fieldmap.magnet.quantity import Quantity
    >>> from fieldmap.magnet.results import LineResults, Results
    >>> line = LineResults(0, 0, {"magnetic_length": Quantity(0.4000049, 8.4e-6, "m")})
    >>> "<td>400.005</td><td>0.017</td>" in results_html(Results("a < b", "", (line,)))
    True
    """
    note = f'<p class="fm-remark">{escape(coverage_words(k))}</p>'
    several = len(results.lines) > 1
    tables = [_table(results, line, truth, k, several) for line in results.lines]
    return f'<div class="fm-results">{"".join(tables)}{note}</div>'


def findings_html(findings: Iterable[Finding]) -> str:
    """Findings as an HTML list, worst first.

    Parameters
    ----------
    findings : iterable of Finding
        From `evaluate` or `map_findings`.

    Returns
    -------
    str

    Examples
    --------
    >>> findings_html([])
    '<p class="fm-remark">No findings.</p>'
    """
    items = [_finding(finding) for finding in worst_first(findings)]
    if not items:
        return '<p class="fm-remark">No findings.</p>'
    return f'<ul class="fm-findings">{"".join(items)}</ul>'


def verdicts_html(results: Results, limits: Sequence[Limit] = ()) -> str:
    """Verdicts as an HTML list: each says its decision in words, colour is an addition.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    limits : sequence of Limit, optional
        Named beside the verdicts.

    Returns
    -------
    str

    Examples
    --------
    >>> from fieldmap.magnet.results import Results
    >>> verdicts_html(Results("Magnet 3", "", ()))
    '<p class="fm-remark">No limits are set, so nothing was decided.</p>'
    """
    if not results.verdicts:
        return '<p class="fm-remark">No limits are set, so nothing was decided.</p>'
    items = []
    for verdict in results.verdicts:
        words = verdict_words(verdict, results, limits)
        items.append(
            f'<li class="fm-{verdict.decision}" data-key="{escape(words.key)}">'
            f"<b>{words.decision}</b> {escape(words.sentence)}</li>"
        )
    return f'<ul class="fm-verdicts">{"".join(items)}</ul>'


def _table(
    results: Results,
    line: LineResults,
    truth: Mapping[str, Mapping[str, Any]] | None,
    k: float,
    several: bool,  # noqa: FBT001 - private, named at its only call
) -> str:
    title = campaign_title(results) + (f": {line_title(line)}" if several else "")
    columns = len(_HEAD) if truth is not None else 4
    head = "".join(f'<th scope="col">{word}</th>' for word in _HEAD[:columns])
    body = "".join(_row(row, columns) for row in result_rows(line, truth, k))
    kind = "fm-table" if several else "fm-table fm-single"
    return (
        f'<table class="{kind}"><caption>{escape(title)}</caption>'
        f"<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
    )


def _row(row: ResultRow, columns: int) -> str:
    cells = (row.value, row.half_width, row.unit, row.truth, row.difference)[: columns - 1]
    return (
        f'<tr data-key="{escape(one_line(row.key))}">'
        f'<th scope="row" title="{escape(meaning(row.key))}">{escape(row.label)}</th>'
        + "".join(f"<td>{escape(cell)}</td>" for cell in cells)
        + "</tr>"
    )


def _finding(finding: Finding) -> str:
    place, code = escape(one_line(finding.where)), escape(one_line(finding.code))
    where = f" <span>{place}</span>" if place else ""
    return (
        f'<li class="fm-{escape(finding.severity)}" data-code="{code}">'
        f"<b>{SEVERITY_WORDS[finding.severity]}</b>{where}: "
        f"{escape(one_line(f'{finding.text} {finding.offer}'.rstrip()))} "
        f"<code>{code}</code></li>"
    )
