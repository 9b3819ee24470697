"""What was chosen by hand against the campaign file, as findings."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from fieldmap.errors import InputError
from fieldmap.estimate.findings import Finding
from fieldmap.readings.passes import FlipReference, PointReference
from fieldmap.show.numbers import plain

if TYPE_CHECKING:
    from fieldmap.readings.passes import Axis, Campaign, Reference

__all__ = ["check_order", "departures", "reference_words", "same_spans"]

MM = 1e3


def departures(
    campaign: Campaign,
    active: tuple[bool, ...],
    trusted: tuple[bool, ...],
    axis: Axis,
    added: tuple[str, ...] = (),
) -> list[Finding]:
    """Notes of every departure from the campaign file.

    Parameters
    ----------
    campaign : Campaign
        As it was read.
    active, trusted : tuple of bool
        Which of its passes and of its references are in use.
    axis : Axis
        Limits and flat window in use.
    added : tuple of str, optional
        Passes that the campaign file does not name.

    Returns
    -------
    list of Finding
    """
    notes = []
    left_out = [one.name for one, used in zip(campaign.passes, active, strict=True) if not used]
    if left_out:
        text = (
            f"{len(left_out)} of {len(active)} passes left out by hand; results rest on the rest."
        )
        notes.append(Finding("passes-left-out", "note", ", ".join(left_out), text))
    if added:
        text = "taken in from the folder by hand; the campaign file does not name them yet."
        notes.append(Finding("passes-added", "note", ", ".join(added), text))
    unused = [i for i, used in enumerate(trusted) if not used]
    if unused:
        names = ", ".join(reference_words(campaign.references[i]) for i in unused)
        where = ", ".join(f"[[references]] {i + 1}" for i in unused)
        text = f"left out by hand: {names}; in the map the other references are counted anew."
        notes.append(Finding("references-left-out", "note", where, text))
    if not same_spans(axis, campaign.axis):
        text = (
            f"limits were moved by hand to {_span(axis.integrate)}, flat window "
            f"{_span(axis.flat)}; the campaign file says {_span(campaign.axis.integrate)} and "
            f"{_span(campaign.axis.flat)}."
        )
        notes.append(Finding("limits-moved", "note", "[axis]", text))
    return notes


def reference_words(reference: Reference) -> str:
    """What a reference says, in a few words.

    Examples
    --------
    >>> reference_words(PointReference(0.0, 0.52718, 1e-5))
    'point at 0 mm: 0.52718 T, u = 1e-05 T'
    """
    place = ""
    if reference.x is not None or reference.y is not None:
        x, y = (plain((value or 0.0) * MM) for value in (reference.x, reference.y))
        place = f", line x = {x} mm, y = {y} mm"
    if isinstance(reference, PointReference):
        value, u = plain(reference.field), plain(reference.u)
        return f"point at {plain(reference.at * MM)} mm: {value} T, u = {u} T{place}"
    if isinstance(reference, FlipReference):
        change, u = plain(reference.flux_change), plain(reference.u_flux_change)
        return (
            f"flip of {reference.probe.name} at {plain(reference.at * MM)} mm: "
            f"{change} V s, u = {u} V s{place}"
        )
    ends = f"{plain(reference.start * MM)} to {plain(reference.stop * MM)} mm"
    return f"zero field from {ends}: u = {plain(reference.u)} T{place}"


def check_order(axis: Axis) -> None:
    """Refuse limits or a window that end before they begin.

    Raises
    ------
    InputError
        Says which.
    """
    for key, (low, high) in (("integrate", axis.integrate), ("flat", axis.flat)):
        if not low < high:
            raise InputError(
                f"[axis] {key}",
                f"from {low * MM:.6g} to {high * MM:.6g} mm",
                "a first limit below the second",
                "move one of them",
            )


def same_spans(one: Axis, other: Axis) -> bool:
    """Whether limits and window agree to a nanometre: fields in mm round off more than that."""
    ends = zip((*one.integrate, *one.flat), (*other.integrate, *other.flat), strict=True)
    return all(math.isclose(a, b, rel_tol=0, abs_tol=1e-9) for a, b in ends)


def _span(ends: tuple[float, float]) -> str:
    return f"{ends[0] * MM:.6g} to {ends[1] * MM:.6g} mm"
