"""Rows of a table that stand twice or out of order, told by exact equality and by the travel."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.places import many, place
from fieldmap.estimate.findings.steps import EDGE, Steps, steps_of

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass

__all__ = ["row_findings"]

Bools = npt.NDArray[np.bool_]
Floats = npt.NDArray[np.float64]

EVEN: Final = 0.5  # of the usual way: how far the steps around may be off it
SAME: Final = 1e-9  # of the largest increment: sums differ by rounding
BLOCK: Final = 5  # rows that two blocks have in common at least
LOOKED_AT: Final = 20  # jumps back that are followed up
HALF_SPAN: Final = 4  # steps on either side over which an exchange of rows evens out


def row_findings(one: Pass) -> list[Finding]:
    """Name repeated and exchanged rows of one pass.

    Parameters
    ----------
    one : Pass
        Measured pass.

    Returns
    -------
    list of Finding
    """
    if len(one.time) <= 2 * EDGE + 2:
        return []
    steps = steps_of(one)
    return [*_repeated(one, steps), *_blocks(one, steps), *_exchanged(one, steps)]


def _even_travel(steps: Steps) -> Bools:
    """Where the two steps before and after are regular, so that an odd one stands out."""
    even = np.abs(steps.way - steps.usual_way) < EVEN * np.abs(steps.usual_way)
    fine = steps.moving.copy()
    for shift in (1, 2):
        fine[shift:] &= even[:-shift]
        fine[:-shift] &= even[shift:]
    return fine


def _repeated(one: Pass, steps: Steps) -> list[Finding]:
    """Rows that are identical to the one before."""
    still = steps.way == 0
    if one.record == "cumulative":
        still &= steps.flux == 0
    elif one.record == "increments":
        same = np.abs(np.diff(steps.flux)) <= SAME * np.abs(steps.flux).max()
        still[1:] &= same
        still[0] = False
    stamped = (steps.time == 0) & (steps.usual_time > 0)
    rows = np.flatnonzero(still & (_even_travel(steps) | stamped))
    if not len(rows):
        return []
    first = int(rows[0])
    double = "; their increments count twice" if one.record == "increments" else ""
    text = (
        f"{many(len(rows), 'row is', 'rows are')} identical to the row before, the first at "
        f"{place(one, first + 1)}{double}: delete what stands twice, and check how the table was "
        "written."
    )
    return [Finding("rows-repeated", "warn", one.name, text)]


def _blocks(one: Pass, steps: Steps) -> list[Finding]:
    """Blocks of rows that stand twice: the position jumps back and the same numbers come again."""
    back = steps.moving & (np.sign(steps.way) * np.sign(steps.usual_way) < 0)
    for row in np.flatnonzero(back)[:LOOKED_AT].tolist():
        again = row + 1
        length = min(BLOCK, len(one.time) - again)
        earlier = np.flatnonzero(one.position[:again] == one.position[again])
        for start in earlier[-2:].tolist():
            rows, copies = slice(start, start + length), slice(again, again + length)
            if again - start < length or not np.ptp(one.position[rows]) > 0:
                continue
            alike = np.array_equal(one.position[rows], one.position[copies])
            if alike and _same_flux(one, rows, copies):
                text = (
                    f"rows come again: what stands from {place(one, start)} on is repeated to "
                    f"the last digit from {place(one, again)} on, {again - start} rows later; "
                    "delete what stands twice, and check how the table was written."
                )
                return [Finding("rows-repeated", "warn", one.name, text)]
    return []


def _same_flux(one: Pass, rows: slice, copies: slice) -> bool:
    """Whether two stretches recorded the same numbers; a sum of samples starts from elsewhere."""
    if one.record == "cumulative":
        return np.array_equal(one.flux[rows], one.flux[copies])
    apart = one.flux[copies] - one.flux[rows]
    return bool(np.ptp(apart) <= SAME * np.abs(one.flux).max() or one.record == "voltage")


def _exchanged(one: Pass, steps: Steps) -> list[Finding]:
    """Steps back in an even travel that the steps around make up for."""
    back = np.flatnonzero(steps.moving & (np.sign(steps.way) * np.sign(steps.usual_way) < 0))
    back = back[(back >= HALF_SPAN + 1) & (back < len(steps.way) - HALF_SPAN - 1)]
    found = [row for row in back.tolist() if _made_up_for(one.position, row)]
    if not found:
        return []
    text = (
        f"the position steps back by {abs(steps.way[found[0]]) * 1e3:.4g} mm at "
        f"{place(one, found[0])} and makes up for it in the rows beside "
        f"({many(len(found), 'such place')} in this pass): rows stand out of order; sort the table "
        "as it was recorded."
    )
    return [Finding("rows-out-of-order", "warn", one.name, text)]


def _made_up_for(position: Floats, row: int) -> bool:
    """Whether the positions around a step back are evenly spaced once they are sorted."""
    around = position[row - HALF_SPAN : row + HALF_SPAN + 2]
    ways = np.diff(np.sort(around))
    ends = np.sort(around[[0, -1]])
    pace = float(np.median(ways))
    kept = np.isclose(ends, [around.min(), around.max()], rtol=0, atol=0.2 * pace).all()
    return bool(pace > 0 and kept and np.all(np.abs(ways - pace) < 0.2 * pace))
