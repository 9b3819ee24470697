"""Middle part of a report: the head line, results, verdicts, uncertainty budgets."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from fieldmap.magnet.budget import budget
from fieldmap.show.budget import TYPES, budget_html, correlation_html
from fieldmap.show.budget_rows import with_unit
from fieldmap.show.numbers import rounded, scale_for
from fieldmap.show.report.parts import Column, Section, paragraph, safe, table
from fieldmap.show.rows import (
    coverage_words,
    label,
    line_title,
    meaning,
    result_rows,
    verdict_words,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.magnet.quantity import Quantity
    from fieldmap.magnet.results import LineResults, Results
    from fieldmap.magnet.verdict import Verdict
    from fieldmap.readings.passes import Axis, Limit

__all__ = ["MAIN", "budget_parts", "charted", "head", "results_part", "verdicts_section"]

MAIN: Final = (
    "magnetic_length",
    "integrated_field",
    "integrated_field_total",
    "central_field",
    "boundary_in",
    "boundary_out",
)
"""Results whose budgets are shown."""

_FIRST: Final = ("magnetic_length", "integrated_field", "central_field")  # of the head line
_SIGNS: Final = {"accept": "ACCEPT", "reject": "REJECT", "undecided": "UNDECIDED"}


def head(results: Results, k: float) -> str:
    """The main results and the decision, to be seen at a glance.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    k : float
        Coverage factor.

    Returns
    -------
    str
        HTML.
    """
    several = len(results.lines) > 1
    rows = "".join(
        (f"<p>{safe(line_title(line))}</p>" if several else "") + _strip(line, i, results, k)
        for i, line in enumerate(results.lines)
    )
    return f'<div class="head">{rows}{_remarks(results)}</div>'


def _strip(line: LineResults, index: int, results: Results, k: float) -> str:
    """Two results and the decision side by side."""
    keys = [key for key in _FIRST if key in line.results][:2]
    cells = "".join(_cell(label(key), quantity_words(line.results[key], k)) for key in keys)
    return f'<dl class="strip">{cells}{_decision(index, results)}</dl>'


def _cell(name: str, text: str, css: str = "", more: str = "") -> str:
    below = f"<dd class=more>{safe(more)}</dd>" if more else ""
    return f'<div class="{css}"><dt>{safe(name)}</dt><dd>{safe(text)}</dd>{below}</div>'


def _decision(index: int, results: Results) -> str:
    """The worst of the decisions on a line, and what it was made on."""
    own = [one for one in results.verdicts if one.line == index]
    if not own:
        return _cell("Decision", "none", more="no limits are set")
    worst = next(
        d for d in ("reject", "undecided", "accept") if any(one.decision == d for one in own)
    )
    on = ", ".join(label(one.result).lower() for one in own if one.decision == worst)
    return _cell("Decision", _SIGNS[worst], f"fm-{worst}", on)


def _remarks(results: Results) -> str:
    """How many warnings there are."""
    count = sum(one.severity != "note" for one in results.findings)
    if not count:
        return ""
    words = "1 warning stands" if count == 1 else f"{count} warnings stand"
    return f'<p class="alert">{words} among the findings: read them before you sign.</p>'


def quantity_words(one: Quantity, k: float) -> str:
    """A result with its expanded uncertainty and unit."""
    scale = scale_for(one.unit, [one.value, k * one.u])
    value, half = rounded(one.value * scale.factor, k * one.u * scale.factor)
    return with_unit(f"{value} ± {half}", scale.unit)


def results_part(line: LineResults, axis: Axis, k: float) -> str:
    """Table of the results of one line, with what each of them is.

    Parameters
    ----------
    line : LineResults
        From `evaluate`.
    axis : Axis
        Limits and flat window.
    k : float
        Coverage factor.

    Returns
    -------
    str
        HTML; rows carry ``data-key``.
    """
    rows = result_rows(line, None, k)
    columns = (
        Column("Result"),
        Column("Value", "number"),
        Column("± U", "number"),
        Column("Unit"),
        Column("What it is"),
    )
    low, high = (f"{end * 1e3:.9g}" for end in axis.integrate)
    over = f"The integrated field is taken over the limits, {low} to {high} mm, and no further."
    if "integrated_field_total" in line.results:
        over += (
            " The total adds the estimated tails beyond both limits; they enter no other result."
        )
    return table(
        f"Results with expanded uncertainty U, k = {k:g}",
        columns,
        [(one.label, one.value, one.half_width, one.unit, meaning(one.key)) for one in rows],
        css="results",
        keys=[one.key for one in rows],
    ) + paragraph(f"{coverage_words(k)} {over}", "remark")


def verdicts_section(results: Results, limits: Sequence[Limit], k: float) -> Section:
    """Decisions with their limits, guard bands and probabilities.

    Parameters
    ----------
    results : Results
        From `evaluate`.
    limits : sequence of Limit
        What the decisions were made against.
    k : float
        Coverage factor.

    Returns
    -------
    Section
    """
    if not results.verdicts:
        return Section("Verdicts", paragraph("No limits are set, so nothing was decided."))
    items = []
    for verdict in results.verdicts:
        words = verdict_words(verdict, results, limits)
        items.append(
            f'<li class="fm-{verdict.decision}" data-key="{safe(words.key)}"><b>{words.decision}'
            f"</b> {safe(words.sentence)}<span>{safe(_found(verdict, results, k))}</span></li>"
        )
    rule = (
        "Decided after JCGM 106:2012: accepted where the value keeps the guard band's distance "
        "from the limits within them, rejected where it does so outside them, undecided otherwise."
    )
    return Section(
        "Verdicts", f'<ul class="verdicts">{"".join(items)}</ul>{paragraph(rule, "remark")}'
    )


def _found(verdict: Verdict, results: Results, k: float) -> str:
    """What was found, and the width of the guard band in its unit."""
    one = results.lines[verdict.line].results[verdict.result]
    words = f"Found {quantity_words(one, k)}"
    if verdict.band is None:
        return f"{words}."
    scale = scale_for(one.unit, [one.value, k * one.u])
    width = rounded(0.0, verdict.band * scale.factor)[1]
    return f"{words}; guard band at each limit {with_unit(width, scale.unit)}."


def budget_parts(fmap: xr.Dataset, axis: Axis, line: int, k: float) -> str:
    """Budgets of the main results of one line, and how they hang together.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    axis : Axis
        Limits and flat window.
    line : int
        Index of the line.
    k : float
        Coverage factor.

    Returns
    -------
    str
        HTML.
    """
    budgets = budget(fmap, axis=axis, line=line)
    keys = [key for key in MAIN if key in budgets.results]
    tables = "".join(budget_html(budgets[key], k=k) for key in keys)
    how = (
        "Each row is what one cause would give alone; the squares of the rows sum to that of the "
        "combined u. Causes below 0.1 % of the variance stand together."
    )
    return (
        paragraph(f"{how} {TYPES}", "remark")
        + f'<div class="budgets">{tables}</div>{correlation_html(budgets, keys)}'
    )


def charted(line: LineResults) -> str:
    """The result whose budget is drawn: the magnetic length where there is one."""
    return next(key for key in _FIRST if key in line.results)
