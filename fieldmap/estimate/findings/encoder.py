"""Positions that jump: lost counts of the encoder, or lost rows where no time was recorded."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.places import place
from fieldmap.estimate.findings.steps import EDGE, Steps, steps_of
from fieldmap.estimate.findings.thresholds import FAMILY_SHARE
from fieldmap.estimate.findings.wild import Wild, wild_runs
from fieldmap.readings.corrections import Correction

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["encoder_findings"]

LEAST: Final = 1e-3  # of the usual way: a smaller jump is rounding
STEPWISE: Final = 0.3  # of the travel in jumps: the stage goes from stop to stop
RETURNS: Final = 0.2  # of a jump: what may be left when it is taken back
FOLLOWS: Final = 0.3  # of the flux that belongs to a jump
CLEAR: Final = 6.0  # standard deviations of an increment that the flux of a jump is told by
SEVERAL: Final = 4  # jumps that are named one by one


def encoder_findings(passes: Sequence[Pass]) -> list[Finding]:
    """Name jumps in position.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes.

    Returns
    -------
    list of Finding
    """
    looks = max(sum(len(one.time) for one in passes), 1)
    return [finding for one in passes for finding in _jumps(one, FAMILY_SHARE / looks)]


def _jumps(one: Pass, chance: float) -> list[Finding]:
    """Jumps of one pass: wild speeds."""
    if len(one.time) <= 2 * EDGE + 2:
        return []
    steps = steps_of(one)
    usual = float(np.median(steps.time))
    if usual <= 0:
        return []
    speed = np.divide(steps.way, steps.time, out=np.zeros_like(steps.way), where=steps.time > 0)
    middle = (one.time[1:] + one.time[:-1]) / 2
    grain, even = 2 * steps.count / usual, np.zeros(len(speed))
    runs = wild_runs(middle, speed, chance=chance, grain=grain, steep=even)
    ways = np.abs(steps.way)
    typical = float(np.median(ways[ways > 0])) if np.any(ways > 0) else 0.0
    runs = [run for run in runs if abs(run.size) * usual > LEAST * typical]
    if sum(abs(run.size) * usual for run in runs) > STEPWISE * float(ways.sum()):
        return []
    runs.sort(key=lambda run: -abs(run.size))
    found = [_told(one, steps, run, usual, LEAST * typical) for run in runs[:SEVERAL]]
    if len(runs) > SEVERAL:
        text = f"{len(runs) - SEVERAL} more jumps in position lie in this pass: check the encoder."
        found.append(Finding("position-jump", "warn", one.name, text))
    return found


def _told(one: Pass, steps: Steps, run: Wild, usual: float, least: float) -> Finding:
    """One jump: of rows, of a single reading, or of the encoder."""
    row, size = run.start, run.size * usual
    extra = float(np.sum((steps.way - steps.usual_way)[row : row + run.count]))
    allowed = max(run.allowed * usual, least) * 1e3
    said = (
        f"position jumps by {size * 1e3:.4g} mm at {place(one, row)} beside a regular step of "
        f"{abs(steps.usual_way[row]) * 1e3:.4g} mm, where jitter allows {allowed:.2g} mm"
    )
    if run.count == 2 and abs(extra) < RETURNS * abs(size):
        text = f"{said}, and returns: a single position is wrong; mend or delete that row."
        return Finding("position-jump", "warn", one.name, text)
    if _flux_follows(steps, row):
        text = f"{said}, and the flux moved as far: rows were lost there"
        if one.record == "cumulative":
            text += "; the field between is guessed from what is around; check the trigger."
            return Finding("readings-lost", "note", one.name, text)
        text += (
            ", with their flux; the correction 'step' there frees what follows, or record the pass "
            "again."
        )
        offered = Correction("step", one.name, start=float(one.time[row + 1]))
        return Finding("readings-lost", "warn", one.name, text, offered)
    text = (
        f"{said}, while time went on regularly: the encoder lost or gained counts, or rows are "
        "missing; all positions after it are in doubt: check the encoder and record the pass again."
    )
    return Finding("position-jump", "warn", one.name, text)


def _flux_follows(steps: Steps, row: int) -> bool:
    """Whether the flux changed in proportion to a jump, so that the probe truly went that way."""
    if not steps.moving[row]:
        return False
    due = steps.usual_flux[row] * (steps.way[row] / steps.usual_way[row] - 1)
    more = steps.flux[row] - steps.usual_flux[row]
    noise = 1.4826 * float(np.median(np.abs(np.diff(steps.flux)))) / 2**0.5
    return bool(abs(due) > CLEAR * noise and abs(more - due) < FOLLOWS * abs(due))
