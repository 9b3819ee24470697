"""Time stamps against positions: clocks that jump, and readings that were lost.

Nothing here rests on chance: a step in time is told where the steps around it are regular, and what
the position did meanwhile says what it was.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.places import many, place
from fieldmap.estimate.findings.steps import EDGE, Steps, steps_of
from fieldmap.readings.corrections import Correction

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass

__all__ = ["clock_findings"]

Ints = npt.NDArray[np.intp]

REGULAR: Final = 0.9  # share of regular time steps: with fewer, none stands out
STRICT: Final = 0.98  # with so many, the sampling was timed, and a long step is a fault
LONG: Final = 1.5  # usual steps
SHORT: Final = 0.5
AS_USUAL: Final = 0.3  # how far a way may be off the usual one, or off the time's
CLEAR: Final = 6.0  # standard deviations of an increment that lost flux is told by
SEVERAL: Final = 4  # places that are named one by one


def clock_findings(one: Pass) -> list[Finding]:
    """Name jumps of the clock and lost readings of one pass.

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
    if steps.regular < REGULAR:
        return []
    usual = np.where(steps.usual_time > 0, steps.usual_time, np.inf)
    ratio = steps.time / usual
    ratio[:EDGE] = ratio[-EDGE:] = 1.0
    ways = np.divide(steps.way, steps.usual_way, out=np.zeros_like(ratio), where=steps.moving)
    long, short = ratio >= LONG, ratio <= SHORT
    as_usual = steps.moving & (np.abs(ways - 1) < AS_USUAL)
    jumped = np.flatnonzero((long | short) & as_usual)
    in_step = np.abs(ways - ratio) < AS_USUAL * ratio
    lost = np.flatnonzero(long & steps.moving & in_step)
    still = np.flatnonzero(long & ~steps.moving & _whole(ratio))
    return [
        *_jumps(one, steps, jumped),
        *_lost(one, steps, lost, "the probe travelled on"),
        *_paused(one, steps, still),
    ]


def _whole(ratio: npt.NDArray[np.float64]) -> npt.NDArray[np.bool_]:
    """Whether steps are a whole number of usual ones, not so many that any number would do."""
    return np.asarray((np.abs(ratio - np.round(ratio)) < 0.05) & (ratio < 10.5))


def _jumps(one: Pass, steps: Steps, rows: Ints) -> list[Finding]:
    """Steps in time that are long or short while the probe went its usual way."""
    if not len(rows):
        return []
    worst = int(rows[np.argmax(np.abs(steps.time[rows] - steps.usual_time[rows]))])
    strict = steps.regular >= STRICT
    often = "" if len(rows) == 1 else f" ({len(rows)} such steps in this pass, the largest named)"
    text = (
        f"time goes on by {steps.time[worst]:.4g} s at {place(one, worst)}, where "
        f"{steps.usual_time[worst]:.4g} s is regular, while the position moved by its regular "
        f"{abs(steps.way[worst]) * 1e3:.4g} mm{often}: the clock jumped, or the stage halted "
        "between two readings; mend the time stamps, or give rate in place of them."
    )
    return [Finding("clock-jump", "warn" if strict else "note", one.name, text)]


def _lost(one: Pass, steps: Steps, rows: Ints, meanwhile: str) -> list[Finding]:
    """Gaps in which the probe travelled on: harmless to a running total, not to a sum."""
    if not len(rows):
        return []
    counts = np.maximum(np.round(steps.time[rows] / steps.usual_time[rows]).astype(int) - 1, 1)
    hurt = rows[_flux_is_lost(one, steps, rows)]
    widest = int(rows[np.argmax(counts)])
    said = (
        f"{many(int(counts.sum()), 'reading')} missing in {many(len(rows), 'gap')}, most at "
        f"{place(one, widest)}, where {meanwhile} by {abs(steps.way[widest]) * 1e3:.4g} mm"
    )
    if not len(hurt):
        text = f"{said}: the field between is guessed from what is around; check the trigger."
        return [Finding("readings-lost", "note", one.name, text)]
    found = []
    for row in hurt[:SEVERAL].tolist():
        text = (
            f"{said}: the flux collected from {place(one, row)} to {place(one, row + 1)} was not "
            "recorded and all after it is displaced; the correction 'step' there frees what "
            "follows, or record the pass again."
        )
        offered = Correction("step", one.name, start=float(one.time[row + 1]))
        found.append(Finding("readings-lost", "warn", one.name, text, offered))
    if len(hurt) > SEVERAL:
        text = (
            f"{said}: flux was lost in {len(hurt)} of them, more than corrections should mend; "
            "record the pass again."
        )
        found.append(Finding("readings-lost", "warn", one.name, text))
    return found


def _flux_is_lost(one: Pass, steps: Steps, rows: Ints) -> npt.NDArray[np.bool_]:
    """Whether the flux of a gap is missing: a running total has it, as have long increments."""
    if one.record == "cumulative":
        return np.zeros(len(rows), dtype=np.bool_)
    if one.record == "voltage":
        return np.ones(len(rows), dtype=np.bool_)
    longer = steps.time[rows] / steps.usual_time[rows]
    usual, held = steps.usual_flux[rows], steps.flux[rows]
    noise = 1.4826 * float(np.median(np.abs(np.diff(steps.flux)))) / 2**0.5
    matters = np.abs(usual) * (longer - 1) > CLEAR * noise
    return np.asarray(matters & (np.abs(held - usual) < np.abs(held - usual * longer)))


def _paused(one: Pass, steps: Steps, rows: Ints) -> list[Finding]:
    """Gaps in a dwell."""
    if not len(rows):
        return []
    longest = int(rows[np.argmax(steps.time[rows])])
    regular = steps.usual_time[longest]
    text = (
        f"{many(len(rows), 'gap')} in the regular readings while the probe stood, the longest of "
        f"{steps.time[longest]:.4g} s at {place(one, longest)}, where {regular:.4g} s is regular: "
        "nothing of the field is lost; check the trigger."
    )
    return [Finding("readings-lost", "note", one.name, text)]
