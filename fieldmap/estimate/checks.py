"""What a campaign must satisfy before it is fitted, whether it came from a file or from arrays."""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import replace
from typing import TYPE_CHECKING

from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.corrected import corrected_passes
from fieldmap.readings.passes import (
    Campaign,
    FlipReference,
    Pass,
    PointReference,
    Reference,
    ZeroReference,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.probe import Probe

__all__ = ["check_reach", "check_references", "check_spacing", "check_time_and_travel", "prepared"]

MOST_STATED = 6000  # knots: a matrix of that size still fits in memory several times

FAR, MANY = 10.0, 200.0  # times the limits and times the gap that a line may be long
FARTHEST = 5.0  # times the length of all else that one pass may stretch the line to


def prepared(campaign: Campaign) -> Campaign:
    """The campaign with passes told apart by name and corrected, checked as a whole.

    Parameters
    ----------
    campaign : Campaign
        As loaded or built.

    Returns
    -------
    Campaign
        The same where all is well; passes of one name get a number, and the corrections that are
        switched on are made: they stand with their passes then.

    Raises
    ------
    InputError
        A gap that is no length, two different probes under one name, or a correction that fits no
        pass.
    RefusedError
        Nothing measured.
    """
    if not campaign.passes:
        raise RefusedError(
            "nothing-measured",
            str(campaign.path or campaign.name),
            "found no measured pass, expected at least one [[passes]] entry with a file; "
            "name the table that the bench recorded.",
        )
    gap = campaign.magnet.gap
    if not (math.isfinite(gap) and gap > 0):
        raise InputError("[magnet] gap", f"{gap:g} m", "a length above zero")
    probes: dict[str, Probe] = {}
    for one in campaign.passes:
        if probes.setdefault(one.probe.name, one.probe) != one.probe:
            raise InputError(
                one.name,
                f"a second, different probe named '{one.probe.name}'",
                "one name for each probe",
                "rename one of them",
            )
    passes = corrected_passes(_told_apart(campaign.passes), campaign.corrections)
    return replace(campaign, passes=passes, corrections=())


def _told_apart(passes: Sequence[Pass]) -> tuple[Pass, ...]:
    """Number the passes that share a name: a drift belongs to one pass."""
    total = Counter(one.name for one in passes)
    seen: Counter[str] = Counter()
    named = []
    for one in passes:
        seen[one.name] += 1
        many = total[one.name] > 1
        named.append(replace(one, name=f"{one.name} ({seen[one.name]})") if many else one)
    return tuple(named)


def check_spacing(spacing: float | None, low: float, high: float) -> None:
    """Refuse knots that are no knots, and more of them than can be solved for."""
    least, most = (high - low) / MOST_STATED, (high - low) / 4
    if spacing is None or (math.isfinite(spacing) and least <= spacing <= most):
        return
    expected = f"a length from {least:g} m to a quarter of the line, {most:g} m"
    raise InputError("knot_spacing", f"{spacing:g} m", expected)


def check_time_and_travel(passes: Sequence[Pass], low: float, high: float) -> None:
    """Refuse a line on which nothing moves, and a pass whose clock stands still."""
    if high <= low:
        raise RefusedError(
            "no-travel",
            ", ".join(one.name for one in passes),
            f"found the probe standing at {low * 1e3:.6g} mm throughout, expected a pass that "
            "moves; check the position column and its unit.",
        )
    for one in passes:
        if one.time[-1] <= one.time[0]:
            raise InputError(
                one.name,
                f"one time stamp, {one.time[0]:g} s, for all readings",
                "time that goes on",
                "check the time column and its unit, or give rate instead",
            )


def check_reach(passes: Sequence[Pass], integrate: tuple[float, float], gap: float) -> None:
    """Refuse positions that lie far beyond all others: a wrong unit, most often.

    Parameters
    ----------
    passes : sequence of Pass
        Of one line.
    integrate : tuple of float
        Limits of the integrated field, m.
    gap : float
        Full gap or bore, m.

    Raises
    ------
    RefusedError
        ``positions-out-of-proportion``.
    """
    ends = [(float(one.position.min()), float(one.position.max())) for one in passes]
    low, high = min(end for end, _ in ends), max(end for _, end in ends)
    if high - low > max(FAR * (integrate[1] - integrate[0]), MANY * gap):
        raise RefusedError(
            "positions-out-of-proportion",
            ", ".join(one.name for one in passes),
            f"found positions from {low * 1e3:.6g} to {high * 1e3:.6g} mm, expected a line of at "
            f"most {FAR:g} times the limits in [axis] integrate or {MANY:g} gaps; check the "
            "position column and its unit, and the units in [axis] and [magnet].",
        )
    for one in passes:
        others = [p.position for p in passes if p is not one]
        known = [*integrate, *(end for p in others for end in (float(p.min()), float(p.max())))]
        low, high = min(known), max(known)
        whole = max(high, float(one.position.max())) - min(low, float(one.position.min()))
        if whole > FARTHEST * (high - low):
            raise RefusedError(
                "positions-out-of-proportion",
                one.name,
                f"found positions from {one.position.min() * 1e3:.6g} to "
                f"{one.position.max() * 1e3:.6g} mm, expected none so far outside [axis] integrate "
                f"and the other passes, {low * 1e3:.6g} to {high * 1e3:.6g} mm; check the unit of "
                "the position column.",
            )


def check_references(
    numbered: Sequence[tuple[int, Reference]], low: float, high: float, slack: float
) -> list[Reference]:
    """References of one line, checked; a zero stretch is cut to what was mapped.

    Parameters
    ----------
    numbered : sequence of (int, reference)
        Those that bear on the line, with their numbers in the campaign.
    low, high : float
        Ends of the mapped range, m.
    slack : float
        How far outside it a place still counts as its end, m.

    Returns
    -------
    list

    Raises
    ------
    InputError
        A reference outside the mapped range, or with an uncertainty that is none.
    """
    return [_checked(one, number, low, high, slack) for number, one in numbered]


def _checked(one: Reference, number: int, low: float, high: float, slack: float) -> Reference:
    where = f"[[references]] {number}"
    u = one.u_flux_change if isinstance(one, FlipReference) else one.u
    if not (math.isfinite(u) and u > 0):
        raise InputError(where, f"a standard uncertainty of {u:g}", "one above zero")
    mapped = f"the mapped range, {low * 1e3:.6g} to {high * 1e3:.6g} mm"
    remedy = "mend the position, or scan that far"
    if isinstance(one, ZeroReference):
        start, stop = max(one.start, low), min(one.stop, high)
        if not stop > start:
            found = f"a stretch from {one.start * 1e3:.6g} to {one.stop * 1e3:.6g} mm"
            raise InputError(where, found, f"a stretch that overlaps {mapped}", remedy)
        return replace(one, start=start, stop=stop)
    if not low - slack <= one.at <= high + slack:
        raise InputError(where, f"at = {one.at * 1e3:.6g} mm", f"a place within {mapped}", remedy)
    value = one.field if isinstance(one, PointReference) else one.flux_change
    if not math.isfinite(value):
        raise InputError(where, f"the value {value:g}", "a finite number")
    return one
