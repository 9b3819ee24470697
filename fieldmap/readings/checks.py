"""Checks that every set of readings passes, from a file or from arrays."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.errors import InputError

if TYPE_CHECKING:
    from fieldmap.readings.passes import Floats

__all__ = ["FEWEST_READINGS", "LARGEST", "RowPlace", "check_count", "check_finite", "check_time"]

FEWEST_READINGS: Final = 3
LARGEST: Final = 1e15  # in SI units: nothing on a bench is larger, and its powers are still numbers

RowPlace = Callable[[int], str]
"""Names the place of a reading, counted from 0: a line of a file, an element of an array."""


def check_count(count: int, where: str) -> None:
    """Refuse fewer than three readings."""
    if count < FEWEST_READINGS:
        found = f"{count} reading{'' if count == 1 else 's'}"
        raise InputError(where, found, "three or more", "record the pass again or leave it out")


def check_finite(values: Floats, column: str, place: RowPlace) -> None:
    """Refuse readings that are not a finite number."""
    sound = np.abs(values) <= LARGEST
    if sound.all():
        return
    row = int(np.flatnonzero(~sound)[0])
    if np.isfinite(values[row]):
        where, found = f"{place(row)}, column {column!r}", f"{values[row]:.6g} in SI units"
        remedy = "mend or delete the row, or mend the unit of the column"
        raise InputError(where, found, f"a size up to {LARGEST:g}", remedy)
    found = "a missing value or not-a-number" if np.isnan(values[row]) else "an infinite value"
    where = f"{place(row)}, column {column!r}"
    raise InputError(where, found, "a finite number", "mend or delete the row")


def check_time(time: Floats, place: RowPlace, *, strictly: bool = False) -> None:
    """Refuse time that runs backwards; `strictly`: time that stands still as well."""
    late, early = time[1:], time[:-1]
    wrong = late <= early if strictly else late < early
    if not wrong.any():
        return
    row = int(np.flatnonzero(wrong)[0]) + 1
    where = f"{place(row)}, column 'time'"
    found = f"{time[row]:.12g} s after {time[row - 1]:.12g} s"
    if time[row] == time[row - 1]:
        remedy = "record time with more digits, or give 'rate' instead"
        raise InputError(where, found, "time that grows: voltage samples are integrated", remedy)
    raise InputError(where, found, "time that never runs backwards", "sort or mend the rows")
