"""Entries of a campaign file that come in lists: records of a kind, references, limits."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

from fieldmap.errors import InputError
from fieldmap.readings import sections
from fieldmap.readings.corrections import Correction, check_correction, check_once
from fieldmap.readings.passes import FlipReference, Limit, Reference, ZeroReference
from fieldmap.readings.probe import Coil
from fieldmap.readings.schema import (
    Key,
    as_table,
    choice,
    key_place,
    listed,
    one_of,
    read_section,
    shown,
)
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.readings.passes import Pass
    from fieldmap.readings.probe import Probe
    from fieldmap.readings.sections import Kind

__all__ = ["of_kind", "read_correction", "read_corrections", "read_limits", "read_references"]


def of_kind(raw: object, kinds: Mapping[str, Kind], place: str, **extra: object) -> Any:
    """Build a record of one of several kinds from its section."""
    named = as_table(raw, place).get(sections.KIND)
    kind_key = Key(sections.KIND, choice(*kinds), required=True)
    kind = kind_key.read(named, key_place(place, sections.KIND)) if named is not None else ""
    keys = kinds[kind].keys if kind else ()
    if not kind:
        expected = f"kind = one of {listed(kinds)}"
        raise InputError(place, f"no key {sections.KIND!r}", expected, "add it")
    values = read_section(raw, (kind_key, *keys), place)
    del values[sections.KIND]
    return kinds[kind].build(**values, **extra)


def read_references(
    raw: list[Any], probes: Mapping[str, Probe], file: str
) -> tuple[Reference, ...]:
    """Read the absolute references.

    Parameters
    ----------
    raw : list
        Entries of [[references]] as the TOML reader gave them.
    probes : mapping of str to Probe
        The probes that a flip may name.
    file : str
        How errors name the campaign file.

    Returns
    -------
    tuple of Reference

    Raises
    ------
    InputError
        Names the entry and the key.
    """
    references: list[Reference] = []
    for index, entry in enumerate(raw, 1):
        place = f"{file}, [[references]] {index}"
        reference = of_kind(entry, sections.REFERENCES, place)
        if isinstance(reference, FlipReference):
            reference = replace(reference, probe=_coil(str(reference.probe), probes, place))
        if isinstance(reference, ZeroReference) and not reference.start < reference.stop:
            found = f"'from' {reference.start:g} m and 'to' {reference.stop:g} m"
            raise InputError(place, found, "'from' below 'to'", "exchange or mend the two")
        references.append(reference)
    return tuple(references)


def _coil(name: str, probes: Mapping[str, Probe], place: str) -> Coil:
    """Find the coil that a flip names."""
    where = key_place(place, "probe")
    probe = probes[one_of(name, list(probes), where, "a probe among")]
    if not isinstance(probe, Coil):
        raise InputError(where, f"{quoted(name)}, which is no coil", "a coil", "name a coil")
    return probe


def read_correction(raw: object, place: str) -> Correction:
    """Read one correction as it stands in a campaign file or beside a finding.

    Parameters
    ----------
    raw : object
        An entry of [[corrections]], or `Correction.as_entry`.
    place : str
        How errors name it.

    Returns
    -------
    Correction

    Raises
    ------
    InputError
        Names the key.

    Examples
    --------
    >>> read_correction({"kind": "step", "pass": "a.csv", "at": "12 s"}, "here").start
    12.0
    """
    found: Correction = of_kind(raw, sections.CORRECTION_KINDS, place)
    return found


def read_corrections(
    raw: list[Any], passes: Sequence[Pass], awaited: Sequence[str], file: str
) -> tuple[Correction, ...]:
    """Read what the user switched on against faults of single passes.

    Parameters
    ----------
    raw : list
        Entries of [[corrections]].
    passes : sequence of Pass
        The measured passes.
    awaited : sequence of str
        Names of passes that are not there yet: their corrections wait with them.
    file : str
        How errors name the campaign file.

    Returns
    -------
    tuple of Correction

    Raises
    ------
    InputError
        Names the entry, and the key where it is one.
    """
    measured = {one.name: one for one in passes}
    names = (*measured, *awaited)
    found: list[Correction] = []
    for index, entry in enumerate(raw, 1):
        place = f"{file}, [[corrections]] {index}"
        one = read_correction(entry, place)
        one_of(one.where, names, key_place(place, "pass"), "a measured pass among")
        check_once(one, found, place)
        if one.where in measured:
            check_correction(one, measured[one.where], place, names)
        found.append(one)
    return tuple(one for one in found if one.where in measured)


def read_limits(raw: list[Any], file: str) -> tuple[Limit, ...]:
    """Read the limits; one result has one entry.

    Parameters
    ----------
    raw : list
        Entries of [[limits]].
    file : str
        How errors name the campaign file.

    Returns
    -------
    tuple of Limit

    Raises
    ------
    InputError
        Names the entry and the key.
    """
    limits: list[Limit] = []
    for index, entry in enumerate(raw, 1):
        place = f"{file}, [[limits]] {index}"
        limit = _limit(as_table(entry, place), place)
        if limit.result in {other.result for other in limits}:
            where = key_place(place, "result")
            raise InputError(where, f"{limit.result!r} again", "each result once", "join the two")
        limits.append(limit)
    return tuple(limits)


def _limit(entry: Mapping[str, Any], place: str) -> Limit:
    """Read one limit: nominal and tolerance, or lower and upper or one of them."""
    where = key_place(place, "result")
    result = entry.get("result")
    known = list(sections.RESULT_UNITS)
    if not isinstance(result, str):
        stands = "no such key" if result is None else shown(result)
        raise InputError(where, stands, f"a result among {listed(known)}", "name the result")
    unit = sections.RESULT_UNITS[one_of(result, known, where, "a result among")]
    values = read_section(entry, sections.limit_keys(unit), place)
    rule = {key: values[key] for key in ("k", "guard") if key in values}
    given = set(values) - {"result"} - set(rule)
    if given == {"nominal", "tolerance"}:
        lower = values["nominal"] - values["tolerance"]
        return Limit(result, lower, values["nominal"] + values["tolerance"], **rule)
    if not given or given - {"lower", "upper"}:
        found = f"the keys {listed(sorted(given))}" if given else "no limit"
        expected = "'nominal' and 'tolerance', or 'lower' or 'upper' or both"
        raise InputError(place, found, expected, "write one of these")
    lower, upper = values.get("lower"), values.get("upper")
    if lower is not None and upper is not None and not lower < upper:
        found = f"'lower' {lower:g} and 'upper' {upper:g}"
        raise InputError(place, found, "'lower' below 'upper'", "exchange or mend the two")
    return Limit(result, lower, upper, **rule)
