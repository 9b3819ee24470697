"""Results, findings and verdicts as text: pure functions of what was evaluated.

The same in HTML is in `fieldmap.show.markup`, and can be had from here too.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fieldmap.show.markup import findings_html, results_html, verdicts_html
from fieldmap.show.plain_text import ruled_table, wrapped
from fieldmap.show.rows import (
    SEVERITY_WORDS,
    campaign_title,
    coverage_words,
    line_title,
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

__all__ = [
    "findings_html",
    "findings_text",
    "results_html",
    "results_text",
    "summary_text",
    "verdicts_html",
    "verdicts_text",
]


def results_text(
    results: Results, truth: Mapping[str, Mapping[str, Any]] | None = None, *, k: float = 2.0
) -> str:
    """Results as a table in plain text.

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
        Ends without a line break.

    Raises
    ------
    InputError
        A known value without a number or with a foreign unit.

    Examples
    --------
    >>> from fieldmap.magnet.quantity import Quantity
    >>> from fieldmap.magnet.results import LineResults, Results
    >>> line = LineResults(0, 0, {"magnetic_length": Quantity(0.4000049, 8.4e-6, "m")})
    >>> print(results_text(Results("Magnet 3", "", (line,))))
    Magnet 3
    U is the expanded uncertainty, k = 2 (about 95 % coverage).
    <BLANKLINE>
    result             value    ± U  unit
    ---------------  -------  -----  ----
    Magnetic length  400.005  0.017  mm
    """
    parts = [f"{campaign_title(results)}\n{coverage_words(k)}"]
    for line in results.lines:
        heading = f"{line_title(line)}\n" if len(results.lines) > 1 else ""
        parts.append(heading + _line_text(line, truth, k))
    return "\n\n".join(parts)


def findings_text(findings: Iterable[Finding]) -> str:
    """Findings as paragraphs of plain text, worst first.

    Parameters
    ----------
    findings : iterable of Finding
        From `evaluate` or `map_findings`.

    Returns
    -------
    str

    Examples
    --------
    >>> from fieldmap.estimate.findings import Finding
    >>> print(findings_text([Finding("spikes", "warn", "pass_01.csv", "3 readings stand out.")]))
    Warning, pass_01.csv: 3 readings stand out. [spikes]
    >>> print(findings_text([]))
    No findings.
    """
    paragraphs = []
    for finding in worst_first(findings):
        place = one_line(finding.where)
        head = SEVERITY_WORDS[finding.severity] + (f", {place}" if place else "")
        words = one_line(f"{finding.text} {finding.offer}".rstrip())
        paragraphs.append(wrapped(f"{head}: {words} [{finding.code}]"))
    return "\n".join(paragraphs) or "No findings."


def verdicts_text(results: Results, limits: Sequence[Limit] = ()) -> str:
    """Verdicts as lines of plain text.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    limits : sequence of Limit, optional
        Named beside the verdicts: ``campaign.limits``, or `map_limits` of a map.

    Returns
    -------
    str

    Examples
    --------
    >>> from fieldmap.magnet.results import Results
    >>> from fieldmap.magnet.verdict import Verdict
    >>> decided = Verdict("magnetic_length", 0, "accept", 0.99987)
    >>> print(verdicts_text(Results("Magnet 3", "", (), (), (decided,))))
    ACCEPT Magnetic length: probability of conformity 99.99 %.
    """
    words = [verdict_words(verdict, results, limits) for verdict in results.verdicts]
    lines = [wrapped(f"{word.decision} {word.sentence}") for word in words]
    return "\n".join(lines) or "No limits are set, so nothing was decided."


def summary_text(
    results: Results,
    limits: Sequence[Limit] = (),
    truth: Mapping[str, Mapping[str, Any]] | None = None,
) -> str:
    """Results, verdicts and findings in one text, for a terminal.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    limits : sequence of Limit, optional
        As for `verdicts_text`.
    truth : mapping, optional
        As for `results_text`.

    Returns
    -------
    str

    Examples
    --------
    >>> from fieldmap.magnet.results import Results
    >>> print(summary_text(Results("Magnet 3", "", ())).splitlines()[-1])
    No findings.
    """
    parts = [
        results_text(results, truth),
        f"Verdicts\n{verdicts_text(results, limits)}",
        f"Findings\n{findings_text(results.findings)}",
    ]
    return "\n\n".join(parts)


def _line_text(line: LineResults, truth: Mapping[str, Mapping[str, Any]] | None, k: float) -> str:
    rows = result_rows(line, truth, k)
    if not rows:
        return "No results."
    cells = [_HEAD, *(_cells(row) for row in rows)]
    if truth is None:
        cells = [row[:4] for row in cells]
    return "\n".join(ruled_table(cells, _LEFT))


_HEAD = ("result", "value", "± U", "unit", "truth", "off by")
_LEFT = (0, 3)  # columns of words; numbers stand to the right


def _cells(row: ResultRow) -> tuple[str, ...]:
    return (row.label, row.value, row.half_width, row.unit, row.truth, row.difference)
