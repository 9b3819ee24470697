"""What becomes of one fault: refused, found, harmless, off, or silently wrong."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Final, Literal

from fieldmap.errors import FieldmapError
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.evaluate import evaluate

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.magnet.results import Results
    from fieldmap.readings.passes import Campaign

__all__ = [
    "JUDGED",
    "OUTCOMES",
    "Outcome",
    "OutcomeName",
    "Twin",
    "judged",
    "reduced",
    "twin_of",
    "unsaid",
]

OutcomeName = Literal["harmless", "found", "refused", "off", "silent"]
Key = tuple[int, str]

OUTCOMES: Final[tuple[OutcomeName, ...]] = ("harmless", "found", "refused", "off", "silent")
JUDGED: Final[tuple[str, ...]] = ("integrated_field", "central_field", "magnetic_length")
HARMLESS: Final = 4.0  # u, which is 2U
SILENT: Final = 6.0  # u, which is 3U


@dataclass(frozen=True)
class Outcome:
    """What one faulty campaign came to.

    Parameters
    ----------
    name : {"harmless", "found", "refused", "off", "silent"}
        All main results within 2U = 4u of the truth; a warning that the fault-free twin does not
        have, whatever the results; no result; beyond 2U unseen; beyond 3U = 6u unseen.
    errors : mapping of (int, str) to float
        Error of each main result in its u, by line and key; empty where refused.
    said : tuple of str
        Codes of the new warnings, each with its place, or the refusal.
    """

    name: OutcomeName
    errors: Mapping[Key, float] = field(default_factory=dict)
    said: tuple[str, ...] = ()

    @property
    def worst(self) -> float:
        """Largest error of a main result, u."""
        return max((abs(error) for error in self.errors.values()), default=0.0)


@dataclass(frozen=True, eq=False)
class Twin:
    """The fault-free campaign of the same chance: what is true, and what is said anyway.

    Parameters
    ----------
    truth : mapping of (int, str) to float
        True results by line and key.
    said : frozenset of (str, str)
        Code and place of each of its warnings.
    errors : mapping of (int, str) to float
        Its own errors in u.
    """

    truth: Mapping[Key, float]
    said: frozenset[tuple[str, str]]
    errors: Mapping[Key, float]


def twin_of(results: Results, truth: Mapping[Key, float]) -> Twin:
    """What the fault-free reduction came to.

    Parameters
    ----------
    results : Results
        Of the campaign without a fault.
    truth : mapping of (int, str) to float
        True results by line and key.

    Returns
    -------
    Twin
    """
    return Twin(truth, frozenset(_warnings(results)), _errors(results, truth))


def reduced(campaign: Campaign, twin: Twin, spacing: float | None = None) -> Outcome:
    """Reduce a faulty campaign and judge what came of it.

    Parameters
    ----------
    campaign : Campaign
        With the fault.
    twin : Twin
        The fault-free one.
    spacing : float, optional
        Knot spacing, m, to save the search for it.

    Returns
    -------
    Outcome
    """
    try:
        fmap = stitch(campaign, knot_spacing=spacing)
        results = evaluate(fmap, campaign, fringe=False)
    except FieldmapError as error:
        return Outcome("refused", said=(str(error),))
    return judged(results, twin)


def judged(results: Results, twin: Twin) -> Outcome:
    """Judge the results of a faulty campaign.

    Parameters
    ----------
    results : Results
        Of the faulty campaign.
    twin : Twin
        The fault-free one.

    Returns
    -------
    Outcome
    """
    errors = _errors(results, twin.truth)
    new = _warnings(results) - twin.said
    said = tuple(sorted(f"{code} {where}".strip() for code, where in new))
    return Outcome("found" if said else unsaid(errors), errors, said)


def unsaid(errors: Mapping[Key, float]) -> OutcomeName:
    """What errors are called of which nothing is said."""
    worst = max(map(abs, errors.values()), default=0.0)
    if worst <= HARMLESS:
        return "harmless"
    return "off" if worst <= SILENT else "silent"


def _warnings(results: Results) -> set[tuple[str, str]]:
    return {(one.code, one.where) for one in results.findings if one.severity != "note"}


def _errors(results: Results, truth: Mapping[Key, float]) -> dict[Key, float]:
    """Errors of the main results in their u."""
    found = {}
    for index, line in enumerate(results.lines):
        for key in JUDGED:
            if key in line.results and (index, key) in truth:
                quantity = line.results[key]
                off = quantity.value - truth[index, key]
                found[index, key] = off / quantity.u if quantity.u > 0 else math.inf
    return found
