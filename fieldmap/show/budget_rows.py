"""What a budget table says, before it becomes text, HTML or a chart."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from fieldmap.errors import InputError
from fieldmap.show.numbers import Scale, last_place, rounded, scale_for, to_place
from fieldmap.show.rows import label, one_line

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.magnet.budget import Budget, Budgets, Contribution

__all__ = [
    "NOTHING",
    "BudgetRow",
    "BudgetRows",
    "budget_rows",
    "chosen",
    "percentages",
    "result_words",
    "with_unit",
]

WORTH_A_ROW: Final = 0.001  # of the variance
NOTHING: Final = "Nothing uncertain enters this result."
_SMALL_LENGTH: Final = 1e-4  # m: below, lengths are given in micrometres


@dataclass(frozen=True)
class BudgetRow:
    """One cause, ready to print; `share` is its share of the variance."""

    cause: str
    where: str
    evaluation: str
    u: str
    percent: str
    share: float


@dataclass(frozen=True)
class BudgetRows:
    """The budget of one result, ready to print.

    Parameters
    ----------
    result : str
        Key of the result.
    title : str
        The result with its value, as a heading.
    rows : tuple of BudgetRow
        Largest first; what is too small for a row of its own is in the last one.
    unit : str
        Of all contributions.
    combined, expanded : str
        Combined standard uncertainty u and expanded uncertainty U.
    k : float
        Coverage factor of the latter.
    """

    result: str
    title: str
    rows: tuple[BudgetRow, ...]
    unit: str
    combined: str
    expanded: str
    k: float


def budget_rows(one: Budget, k: float = 2.0, most: int | None = None) -> BudgetRows:
    """Rows of the budget of one result, by cause.

    Parameters
    ----------
    one : Budget
        From `fieldmap.magnet.budget.budget`.
    k : float
        Coverage factor of the expanded uncertainty.
    most : int, optional
        Causes to name at most; those below 0.1 % of the variance are never named.

    Returns
    -------
    BudgetRows
        Percentages to one decimal that sum to exactly 100.0.

    Examples
    --------
    >>> from fieldmap.magnet.budget import Budget, Contribution
    >>> parts = (Contribution("read noise", "", "A", 3e-6), Contribution("scale", "", "B", 4e-6))
    >>> shown = budget_rows(Budget("magnetic_length", 0.4, "m", parts))
    >>> [(row.cause, row.u, row.percent) for row in shown.rows], shown.combined, shown.unit
    ([('scale', '4.00', '64.0'), ('read noise', '3.00', '36.0')], '5.00', 'µm')
    """
    scale = _scale(one.unit, one.u)
    named, others = _split(one, most)
    groups = [(part,) for part in named] + ([others] if others else [])
    sizes = [math.hypot(*(part.u for part in group)) for group in groups]
    shares = [(size / one.u) ** 2 for size in sizes]
    place = last_place(one.u * scale.factor) - 1 if one.u > 0 else 0
    rows = [
        BudgetRow(*_name(group, is_rest=i >= len(named)), to_place(size * scale.factor, place),
                  percent, share)
        for i, (group, size, percent, share) in enumerate(
            zip(groups, sizes, percentages(shares), shares, strict=True))
    ]  # fmt: skip
    return BudgetRows(
        one.result,
        f"{label(one.result)}: {result_words(one, k)}",
        tuple(rows),
        one_line(scale.unit),
        to_place(one.u * scale.factor, place),
        to_place(k * one.u * scale.factor, place),
        k,
    )


def chosen(budgets: Budgets, result: str) -> Budget:
    """The budget of one result.

    Raises
    ------
    InputError
        There is none; the sentence names those that are.
    """
    if result not in budgets.results:
        there = ", ".join(budgets.results)
        raise InputError("result", repr(result), f"one that this map gives: {there}")
    return budgets[result]


def result_words(one: Budget, k: float = 2.0) -> str:
    """Value of a result with its expanded uncertainty.

    Examples
    --------
    >>> from fieldmap.magnet.budget import Budget, Contribution
    >>> result_words(Budget("magnetic_length", 0.4, "m", (Contribution("a", "", "A", 5e-6),)))
    '400.000 ± 0.010 mm (k = 2)'
    """
    scale = scale_for(one.unit, [one.value, k * one.u])
    value, half = rounded(one.value * scale.factor, k * one.u * scale.factor)
    return f"{with_unit(f'{value} ± {half}', scale.unit)} (k = {k:g})"


def with_unit(number: str, unit: str) -> str:
    """A number with its unit; a power of ten is no unit but a factor.

    Examples
    --------
    >>> with_unit("0.013 ± 0.018", "1e-4"), with_unit("0.018", "mm")
    ('(0.013 ± 0.018)·1e-4', '0.018 mm')
    """
    if not unit:
        return number
    if not unit.startswith("1"):
        return f"{number} {one_line(unit)}"
    return f"({number})·{unit}" if " " in number else f"{number}·{unit}"


def percentages(shares: Sequence[float]) -> list[str]:
    """Shares in percent to one decimal, rounded so that the column sums to exactly 100.0.

    Parameters
    ----------
    shares : sequence of float
        They sum to 1.

    Returns
    -------
    list of str
        None is off by as much as 0.1: the last digit is raised where most was cut off.

    Examples
    --------
    >>> percentages([1 / 3, 1 / 3, 1 / 3])
    ['33.4', '33.3', '33.3']
    """
    wanted = [1000 * share for share in shares]
    given = [math.floor(one + 1e-9) for one in wanted]
    missing = round(sum(wanted)) - sum(given)
    for i in sorted(range(len(wanted)), key=lambda i: given[i] - wanted[i])[:missing]:
        given[i] += 1
    return [f"{one / 10:.1f}" for one in given]


def _split(
    one: Budget, most: int | None
) -> tuple[tuple[Contribution, ...], tuple[Contribution, ...]]:
    """What is named and what is not; a single small one keeps its name."""
    causes = one.by_cause()
    count = sum(one.share(part) >= WORTH_A_ROW for part in causes)
    if most is not None and len(causes) > most:
        count = min(count, most - 1)
    if count == len(causes) - 1:
        count += 1
    return causes[:count], causes[count:]


def _name(group: Sequence[Contribution], *, is_rest: bool) -> tuple[str, str, str]:
    first = group[0]
    if not is_rest:
        return one_line(first.cause), one_line(first.where), first.evaluation
    kinds = ", ".join(sorted({part.evaluation for part in group}))
    return f"{len(group)} others", "", kinds


def _scale(unit: str, u: float) -> Scale:
    """A unit in which the contributions read well: small lengths in micrometres."""
    if unit == "m" and u < _SMALL_LENGTH:
        return Scale("µm", 1e6)
    return scale_for(unit, [u])
