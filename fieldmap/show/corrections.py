"""Corrections that were switched on, and those that findings offer, in words and rows."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from fieldmap.errors import InputError
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.provenance import map_corrections
from fieldmap.readings.corrections import entries_text
from fieldmap.readings.schema import listed, one_of
from fieldmap.show.numbers import rounded
from fieldmap.show.rows import one_line
from fieldmap.show.stated import in_handy_unit

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    import xarray as xr

    from fieldmap.estimate.provenance import Applied
    from fieldmap.readings.corrections import Correction
    from fieldmap.readings.passes import Campaign

__all__ = [
    "HEAD",
    "by_hand",
    "chosen_corrections",
    "correction_rows",
    "found_words",
    "offered",
    "switched_on_text",
]

ALL = "all"
HEAD = ("Pass", "Correction", "Found", "u", "Unit")


def correction_rows(fmap: xr.Dataset) -> list[tuple[str, str, str, str, str]]:
    """The corrections of a map: pass, what was done, value found, its u, unit.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    list of tuple of str
        Empty where none was switched on.
    """
    return [
        (one_line(one.correction.where), one.correction.words, *_numbers(one))
        for one in map_corrections(fmap)
    ]


def _numbers(one: Applied) -> tuple[str, str, str]:
    """Value, standard uncertainty and unit, ready to print; empty where there is none."""
    if not math.isfinite(one.value):
        return "", "", ""
    scale = in_handy_unit(one.unit, one.value or one.u)
    value, u = rounded(one.value * scale.factor, one.u * scale.factor)
    return value, u, scale.unit


def found_words(one: Applied) -> str:
    """What the readings found of a correction, in a few words; empty where it has no value."""
    value, u, unit = _numbers(one)
    shown = "" if unit == "1" else f" {unit}"
    return f"found {value}{shown}, u = {u}{shown}" if value else ""


def offered(findings: Iterable[Finding]) -> list[Correction]:
    """The corrections that findings offer, each once."""
    each = (one.correction for one in findings if one.correction is not None)
    return list({one.place: one for one in each}.values())


def chosen_corrections(
    campaign: Campaign, findings: Iterable[Finding], wheres: Sequence[str]
) -> list[Correction]:
    """The corrections that findings offer for some passes.

    Parameters
    ----------
    campaign : Campaign
        What was reduced.
    findings : iterable of Finding
        What was said of it.
    wheres : sequence of str
        Names of passes, or "all".

    Returns
    -------
    list of Correction
        Each once; those that the campaign has already are left out.

    Raises
    ------
    InputError
        A name of no pass, or a pass for which nothing is offered.
    """
    had = {one.place for one in campaign.corrections}
    each = [one for one in offered(findings) if one.place not in had]
    names = [one.name for one in campaign.passes]
    found: dict[Correction, None] = {}
    for where in wheres:
        if where != ALL:
            one_of(where, [*names, ALL], "--correct", "a pass among")
        own = [one for one in each if where in (ALL, one.where)]
        if not own:
            raise InputError(
                f"--correct {where}",
                "no finding that offers a correction there",
                "a pass whose finding offers one",
                _remedy(each),
            )
        found |= dict.fromkeys(own)
    return list(found)


def _remedy(each: Sequence[Correction]) -> str:
    """Where something is offered, if anywhere."""
    places = listed(dict.fromkeys(one.where for one in each))
    return f"name {places}" if each else "reduce without --correct"


def by_hand(corrections: Sequence[Correction]) -> list[Finding]:
    """A note that corrections are switched on which the campaign file does not name."""
    if not corrections:
        return []
    places = ", ".join(dict.fromkeys(one.where for one in corrections))
    words = "; ".join(f"{one.where}: {one.words}" for one in corrections)
    text = (
        f"switched on by hand ({words}); the campaign file does not name them yet: add their "
        "entries under [[corrections]] to keep them."
    )
    return [Finding("corrections-by-hand", "note", places, text)]


def switched_on_text(fmap: xr.Dataset, added: Sequence[Correction] = ()) -> str:
    """The corrections of a map as plain text, and the entries that keep those just added.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    added : sequence of Correction, optional
        Those that the campaign file does not name.

    Returns
    -------
    str
        Empty where no correction was made.
    """
    lines = []
    for one in map_corrections(fmap):
        found = found_words(one)
        tail = f"; {found}" if found else ""
        lines.append(f"{one_line(one.correction.where)}: {one.correction.words}{tail}.")
    parts = ["Corrections switched on\n" + "\n".join(lines)] if lines else []
    if added:
        parts.append(f"To keep them, add to the campaign file:\n\n{entries_text(added)}")
    return "\n\n".join(parts)
