"""What the tables say, before it becomes text or HTML: labels, rounded numbers, sentences."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import InputError
from fieldmap.estimate.findings.assumed import ASSUMED
from fieldmap.readings.sections import RESULT_UNITS
from fieldmap.show.numbers import Scale, like, plain, rounded, scale_for
from fieldmap.units import scale_to_si

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from fieldmap.estimate.findings import Finding
    from fieldmap.magnet.quantity import Quantity
    from fieldmap.magnet.results import LineResults, Results
    from fieldmap.magnet.verdict import Verdict
    from fieldmap.readings.passes import Limit

__all__ = [
    "SEVERITY_WORDS",
    "ResultRow",
    "VerdictWords",
    "campaign_title",
    "coverage_words",
    "label",
    "line_title",
    "meaning",
    "one_line",
    "result_rows",
    "verdict_words",
    "worst_first",
]

SEVERITY_WORDS: Final = {"refuse": "Refused", "warn": "Warning", "note": "Note"}
DECISION_WORDS: Final = {"accept": "ACCEPT", "reject": "REJECT", "undecided": "UNDECIDED"}

_WORDS: Final[Mapping[str, tuple[str, str]]] = {
    "integrated_field": ("Integrated field", "∫B ds between the limits of integration"),
    "central_field": ("Central field", "mean of B over the flat window"),
    "magnetic_length": ("Magnetic length", "integrated field divided by central field"),
    "boundary_in": ("Boundary in", "where a field of central strength would begin"),
    "boundary_out": ("Boundary out", "where a field of central strength would end"),
    "magnetic_centre": ("Magnetic centre", "midway between the two boundaries"),
    "peak_field": ("Peak field", "largest |B| between the limits, with its sign"),
    "peak_position": ("Peak position", "where |B| is largest"),
    "homogeneity": ("Homogeneity", "(max − min) / (2·central field) over the flat window"),
    "tail_in": ("Tail in", "integral estimated before the lower limit"),
    "tail_out": ("Tail out", "integral estimated beyond the upper limit"),
    "integrated_field_total": ("Integrated field, total", "integrated field and both tails"),
    "fringe_integral_in": ("Fringe integral in", "∫B(B0 − B)/(g·B0²) ds at the entry"),
    "fringe_integral_out": ("Fringe integral out", "∫B(B0 − B)/(g·B0²) ds at the exit"),
}


_APART: Final = {
    "tail_in": "tail",
    "tail_out": "tail",
    "fringe_integral_in": "fringe",
    "fringe_integral_out": "fringe",
}


@dataclass(frozen=True)
class ResultRow:
    """One result ready to print; `truth` and `difference` are empty where nothing is known."""

    key: str
    label: str
    value: str
    half_width: str
    unit: str
    truth: str = ""
    difference: str = ""


@dataclass(frozen=True)
class VerdictWords:
    """One verdict ready to print."""

    key: str
    decision: str
    sentence: str


def label(key: str) -> str:
    """How a result is called in a table.

    Examples
    --------
    >>> label("boundary_in")
    'Boundary in'
    """
    return _WORDS[key][0] if key in _WORDS else one_line(key).replace("_", " ").capitalize()


def meaning(key: str) -> str:
    """What a result is, in a few words; empty for a key without any."""
    return _WORDS[key][1] if key in _WORDS else ""


def one_line(text: str) -> str:
    """Text from a file on one line: no breaks and no control characters."""
    return "".join(c if c.isprintable() else " " for c in text)


def campaign_title(results: Results) -> str:
    """Name of the campaign, or a word in its place."""
    return one_line(results.campaign) or "Results"


def coverage_words(k: float) -> str:
    """What the half widths of a table are."""
    share = 100 * math.erf(k / math.sqrt(2))
    digits = 0 if share < 99 else 1
    return f"U is the expanded uncertainty, k = {k:g} (about {share:.{digits}f} % coverage)."


def line_title(line: LineResults) -> str:
    """Place of a line, for its heading."""
    return f"Line at x = {plain(line.x * 1e3)} mm, y = {plain(line.y * 1e3)} mm"


def worst_first(findings: Iterable[Finding]) -> list[Finding]:
    """Refusals, then warnings, then notes; what is assumed of any campaign stands elsewhere."""
    order = list(SEVERITY_WORDS)
    said = [finding for finding in findings if finding.code != ASSUMED]
    return sorted(said, key=lambda finding: order.index(finding.severity))


def result_rows(
    line: LineResults, truth: Mapping[str, Mapping[str, Any]] | None, k: float
) -> list[ResultRow]:
    """Rows of the results table of one line.

    Parameters
    ----------
    line : LineResults
        Results of the line.
    truth : mapping or None
        Key to ``{"value": …, "unit": …}``.
    k : float
        Coverage factor.

    Returns
    -------
    list of ResultRow
        In the order of the results; numbers of one unit share one scale.

    Raises
    ------
    InputError
        A known value that is no number, or in a unit of another kind.
    """
    scales = _scales(line.results)
    return [
        _row(key, one, scales[key], (truth or {}).get(key), k) for key, one in line.results.items()
    ]


def _scales(results: Mapping[str, Quantity]) -> dict[str, Scale]:
    """Scale of each result: one for all of a unit, save for those of another size altogether."""
    groups: dict[tuple[str, str], list[str]] = {}
    for key, one in results.items():
        groups.setdefault((one.unit, _APART.get(key, "")), []).append(key)
    return {
        key: scale_for(unit, [results[other].value for other in keys])
        for (unit, _), keys in groups.items()
        for key in keys
    }


def _row(
    key: str, one: Quantity, scale: Scale, truth: Mapping[str, Any] | None, k: float
) -> ResultRow:
    value, half_width = rounded(one.value * scale.factor, one.expanded(k) * scale.factor)
    unit = one_line(scale.unit)
    if truth is None:
        return ResultRow(key, label(key), value, half_width, unit)
    known = _known(key, truth, one.unit)
    off = (one.value - known) / one.u if one.u > 0 else math.nan
    return ResultRow(
        key,
        label(key),
        value,
        half_width,
        unit,
        like(known * scale.factor, value),
        f"{off:+.1f} u" if math.isfinite(off) else "",
    )


def _known(key: str, truth: Mapping[str, Any], unit: str) -> float:
    """A known value in SI."""
    place = f"known value of {key}"
    value, given = truth.get("value"), str(truth.get("unit", unit))
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise InputError(place, repr(value), "a number under 'value'")
    return float(value) * (1.0 if given == unit else scale_to_si(given, unit, place))


def verdict_words(verdict: Verdict, results: Results, limits: Sequence[Limit] = ()) -> VerdictWords:
    """A verdict in words.

    Parameters
    ----------
    verdict : Verdict
        One of ``results.verdicts``.
    results : Results
        What it was made from.
    limits : sequence of Limit, optional
        Where its limits are found.

    Returns
    -------
    VerdictWords
    """
    where = ""
    if len(results.lines) > 1:
        where = f", {line_title(results.lines[verdict.line]).lower()}"
    limit = next((one for one in limits if one.result == verdict.result), None)
    bounds = "" if limit is None else f" ({_between(limit, limit.lower, limit.upper)})"
    rule = "" if limit is None or verdict.band is None else f", {_rule(limit, verdict.band)}"
    reason = ""
    if verdict.decision == "undecided":
        plainly = limit is None or limit.guard == 1
        reason = "; the interval crosses a limit" if plainly else "; the value is in a guard band"
    return VerdictWords(
        verdict.result,
        DECISION_WORDS[verdict.decision],
        f"{label(verdict.result)}{where}{bounds}: "
        f"probability of conformity {_percent(verdict.probability)}{rule}{reason}.",
    )


def _between(limit: Limit, low: float | None, high: float | None, step: float = 0.0) -> str:
    """An interval of a result in a handy unit, to the digits of a step if one is given."""
    given = [bound for bound in (limit.lower, limit.upper) if bound is not None]
    scale = scale_for(RESULT_UNITS.get(limit.result, "1"), given)
    lower, upper = (
        None if bound is None else _bound(bound * scale.factor, step * scale.factor)
        for bound in (low, high)
    )
    if lower is None:
        return f"at most {upper} {scale.unit}".rstrip()
    if upper is None:
        return f"at least {lower} {scale.unit}".rstrip()
    return f"{lower} to {upper} {scale.unit}".rstrip()


def _bound(value: float, step: float) -> str:
    return rounded(value, step)[0] if step > 0 else plain(value)


def _rule(limit: Limit, band: float) -> str:
    """What is accepted, and the guard band where it is a special one."""
    low = None if limit.lower is None else limit.lower + band
    high = None if limit.upper is None else limit.upper - band
    special = [] if limit.guard == 1 else [f"guard band {limit.guard:g}·U"]
    special += [] if limit.k is None else [f"k = {limit.k:g}"]
    how = f" ({', '.join(special)})" if special else ""
    if low is not None and high is not None and low > high:
        return f"the guard bands leave nothing to accept{how}"
    return f"accepted {_between(limit, low, high, band)}{how}"


def _percent(probability: float) -> str:
    """A probability that is never rounded to certainty."""
    if probability > 0.9999:
        return "above 99.99 %"
    if probability < 0.0001:
        return "below 0.01 %"
    return f"{100 * probability:.4g} %"
