"""Plateaus that no field makes: a flux or a voltage that stops dead at its extreme.

A field ends a rise gently. Where the readings before a plateau still changed by many steps of the
recorded numbers each, and those on it do not change at all while the probe goes on at the same
pace, the instrument was at its limit.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.places import place
from fieldmap.estimate.resolution import flux_step, unswung

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass

__all__ = ["clipping_findings"]

Floats = npt.NDArray[np.float64]

FEWEST: Final = 6  # equal readings that make a plateau
CHANGES: Final = 12.0  # steps of the numbers by which readings beside it change at least
GOES_ON: Final = 0.4  # of the pace before: the probe still travels
EQUAL: Final = 1e-9  # of the largest: voltages that were integrated differ by rounding
BESIDE: Final = 3  # changes beside a plateau that must all be large
ABRUPT: Final = 0.7  # of the change two readings farther off: a gentle end slows down
SPREAD: Final = 3  # values that a wild sample of a voltage touches besides one
EVEN: Final = 1e-3  # of a time step: how far others may be off it


def clipping_findings(one: Pass) -> list[Finding]:
    """Name plateaus at the extreme of flux or voltage.

    Parameters
    ----------
    one : Pass
        Measured pass.

    Returns
    -------
    list of Finding
    """
    found = []
    if one.integrator.full_scale is None and one.record == "cumulative":
        # a range that is stated is checked by itself
        found += _flux(one)
    if one.record != "cumulative" and len(one.flux) > 2 * FEWEST:
        found += _rate(one)
    return found


def _flux(one: Pass) -> list[Finding]:
    """Flux that stands at its largest or smallest value."""
    step = max(flux_step(one), one.integrator.resolution)
    slack = step * (1 + 1e-6)
    for extreme in (one.flux.max(), one.flux.min()):
        run = _plateau(one.flux, float(extreme), slack, one.position)
        if run is not None:
            low, high = run
            text = (
                f"flux stands at {extreme:.5g} V s for {high - low} readings, from "
                f"{place(one, low)} to {place(one, high - 1)}, while the probe travels and "
                f"readings beside change by {_beside(one.flux, low, high):.2g} V s each: the "
                "integrator was at its limit and the flux beyond is lost; use a larger range or "
                "fewer turns, and state full_scale."
            )
            return [Finding("clipped", "warn", one.name, text)]
    return []


def _rate(one: Pass) -> list[Finding]:
    """Increments or voltage that stand at their largest or smallest value."""
    step = np.diff(one.time)
    usual = float(np.median(step))
    if not np.all(np.abs(step - usual) < EVEN * usual):
        return []
    samples, middle = np.diff(one.flux), (one.position[1:] + one.position[:-1]) / 2
    first = 0
    if one.record == "voltage":
        samples, middle, first = unswung(samples) / usual, middle[1:-1], 1
    slack = max(EQUAL * float(np.abs(samples).max()), flux_step(one) * (1 + 1e-6))
    for extreme in (float(samples.max()), float(samples.min())):
        run = _plateau(samples, extreme, slack, middle, skip=SPREAD if first else 0)
        if run is not None:
            low, high = run
            what, unit = ("voltage", "V") if first else ("the increment of flux", "V s")
            text = (
                f"{what} stands at {extreme:.5g} {unit} for {high - low} readings, from "
                f"{place(one, low + first)} to {place(one, high + first)}, while the probe "
                "travels and readings beside change: the input was at its limit and flux is lost; "
                "use a larger range or scan slower, and state max_voltage."
            )
            return [Finding("clipped", "warn", one.name, text)]
    return []


def _plateau(
    values: Floats, extreme: float, slack: float, position: Floats, skip: int = 0
) -> tuple[int, int] | None:
    """First run of values at the extreme that begins or ends dead while the probe travels.

    `skip` values beside it are spread over by what the samples went through.
    """
    if np.ptp(values) <= CHANGES * slack or np.ptp(position) == 0:
        return None
    at = np.abs(values - extreme) <= slack
    edges = np.flatnonzero(np.diff(np.concatenate([[False], at, [False]])))
    for low, high in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True):
        if high - low >= FEWEST and _dead(values, (low, high), slack, position, skip):
            return low, high
    return None


def _dead(values: Floats, run: tuple[int, int], slack: float, position: Floats, skip: int) -> bool:
    """Whether readings beside a plateau change a lot at a pace that goes on through it."""
    low, high = run
    way = np.abs(np.diff(position))
    inside = way[low : high - 1]
    for before, start in ((True, low - skip - BESIDE - 1), (False, high + skip)):
        stop = start + BESIDE + 1
        if start < 0 or stop > len(values):
            continue
        # towards the plateau: a rise that ends gently slows down before it
        changes = np.abs(np.diff(values[start:stop]))[:: 1 if before else -1]
        pace = float(np.median(way[start : stop - 1]))
        near = inside[:FEWEST] if before else inside[-FEWEST:]
        goes_on = pace > 0 and float(near.min()) > GOES_ON * pace
        if goes_on and changes.min() > CHANGES * slack and changes[-1] > ABRUPT * changes[0]:
            return True
    return False


def _beside(values: Floats, low: int, high: int) -> float:
    """Typical change per reading beside a plateau."""
    changes = np.abs(np.diff(values))
    near = np.concatenate([changes[max(low - BESIDE - 1, 0) : low], changes[high : high + BESIDE]])
    return float(np.median(near)) if len(near) else 0.0
