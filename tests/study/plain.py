"""What a user would write with numpy alone: the competitors of the joint estimate.

Drift is read off the dwells and subtracted, wire passes are differentiated, coil passes divided
by their area, all are averaged on one grid, the reference sets the level, and the trapezoidal
rule gives the integral. Nothing is weighted or smoothed.

The plain script takes the outermost reading of every coil pass as field zero; the careful one
shifts coil passes by least squares until all passes agree where they overlap.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.readings import Coil, FlipReference, PointReference, Wire, ZeroReference

if TYPE_CHECKING:
    from fieldmap.readings import Campaign, Floats, Pass

PER_GAP: Final = 24  # grid points a gap
FEWEST_POINTS: Final = 400
ENOUGH: Final = 5  # readings in a dwell to fit a line to


@dataclass(frozen=True)
class Profile:
    """The field of one pass on the grid, nan where it did not go; coils know no level."""

    field: Floats
    has_level: bool


def plain_results(campaign: Campaign, *, careful: bool) -> dict[str, float]:
    """Integrated field (T m), central field (T) and magnetic length (m) of a campaign."""
    grid = _grid(campaign)
    profiles = [_profile(one, campaign, grid) for one in campaign.passes]
    middle = sum(campaign.axis.flat) / 2
    levelled = _levelled(profiles) if careful else _zeroed(profiles, np.abs(grid - middle))
    field = _averaged(levelled)
    field = _referred(field, grid, campaign)
    low, high = campaign.axis.integrate
    left, right = campaign.axis.flat
    total = _integral(grid, field, low, high)
    central = _integral(grid, field, left, right) / (right - left)
    return {
        "integrated_field": total,
        "central_field": central,
        "magnetic_length": total / central,
    }


def _grid(campaign: Campaign) -> Floats:
    low = min(one.position.min() for one in campaign.passes)
    high = max(one.position.max() for one in campaign.passes)
    count = max(FEWEST_POINTS, int((high - low) / campaign.magnet.gap * PER_GAP)) + 1
    return np.linspace(low, high, count)


def _profile(one: Pass, campaign: Campaign, grid: Floats) -> Profile:
    """Field of one pass: flux over area, or slope of the flux over turns and length."""
    first, last = _dwells(one, campaign.stage.u_position)
    flux = one.flux - _drift(one, first, last, campaign)
    position, flux = _binned(one.position, flux, grid)
    inside = (grid >= one.position.min()) & (grid <= one.position.max())
    values = np.full(grid.shape, np.nan)
    if isinstance(one.probe, Wire):
        slope = np.gradient(flux, position) / one.probe.gain
        values[inside] = np.interp(grid[inside], position, slope)
        return Profile(values, has_level=True)
    values[inside] = np.interp(grid[inside], position, flux / one.probe.gain)
    return Profile(values, has_level=False)


def _dwells(one: Pass, jitter: float) -> tuple[Floats, Floats]:
    """Indices of the readings before the travel and of those after it."""
    still = 6.0 * jitter + 1e-6
    moved = np.flatnonzero(np.abs(one.position - one.position[0]) > still)
    moving = np.flatnonzero(np.abs(one.position - one.position[-1]) > still)
    return np.arange(moved[0]), np.arange(moving[-1] + 1, one.time.size)


def _drift(one: Pass, first: Floats, last: Floats, campaign: Campaign) -> Floats:
    """Straight line to subtract.

    A coil whose pass starts and ends outside the magnet must come back to the same flux; any
    other pass has only the slopes within its dwells.
    """
    time, flux = one.time, one.flux
    low, high = campaign.axis.integrate
    outside = min(one.position[0], one.position[-1]) <= low
    outside &= max(one.position[0], one.position[-1]) >= high
    if isinstance(one.probe, Coil) and outside and min(first.size, last.size) >= ENOUGH:
        rise = flux[last].mean() - flux[first].mean()
        return np.asarray(rise / (time[last].mean() - time[first].mean()) * time)
    above, below = 0.0, 0.0
    for dwell in (first, last):
        if dwell.size >= ENOUGH:
            t = time[dwell] - time[dwell].mean()
            above += t @ (flux[dwell] - flux[dwell].mean())
            below += t @ t
    return (above / below if below else 0.0) * time


def _binned(position: Floats, flux: Floats, grid: Floats) -> tuple[Floats, Floats]:
    """Means of the readings in cells of the grid's step."""
    step = grid[1] - grid[0]
    cell = np.round((position - grid[0]) / step).astype(int)
    order, where, count = np.unique(cell, return_inverse=True, return_counts=True)
    del order
    return np.bincount(where, position) / count, np.bincount(where, flux) / count


def _zeroed(profiles: list[Profile], away: Floats) -> list[Floats]:
    """Take what a coil read farthest from the middle of the magnet as zero field."""
    fields = []
    for one in profiles:
        outermost = np.argmax(np.where(np.isfinite(one.field), away, -1.0))
        fields.append(one.field - (0.0 if one.has_level else one.field[outermost]))
    return fields


def _levelled(profiles: list[Profile]) -> list[Floats]:
    """Shift the passes without a level so that all agree where they overlap, by least squares."""
    fixed = [i for i, profile in enumerate(profiles) if profile.has_level]
    rows, goals = [], []
    for i, one in enumerate(profiles):
        for j, other in enumerate(profiles[:i]):
            common = np.isfinite(one.field) & np.isfinite(other.field)
            if not common.any() or (i in fixed and j in fixed):
                continue
            weight = np.sqrt(common.sum())
            row = np.zeros(len(profiles))
            row[i], row[j] = weight, -weight
            rows.append(row)
            goals.append(weight * np.mean(other.field[common] - one.field[common]))
    pinned = fixed or [0]
    rows += list(1e6 * np.eye(len(profiles))[pinned])
    goals += [0.0] * len(pinned)
    shifts = np.linalg.lstsq(np.array(rows), np.array(goals), rcond=None)[0]
    return [one.field + shift for one, shift in zip(profiles, shifts, strict=True)]


def _averaged(fields: list[Floats]) -> Floats:
    """Mean of all passes at each point of the grid."""
    stack = np.array(fields)
    present = np.isfinite(stack)
    return np.asarray(np.where(present, stack, 0.0).sum(axis=0) / present.sum(axis=0))


def _referred(field: Floats, grid: Floats, campaign: Campaign) -> Floats:
    """Set the level by the references: shift what coils read, scale what wires read."""
    wires = any(isinstance(one.probe, Wire) for one in campaign.passes)
    zeros = [ref for ref in campaign.references if isinstance(ref, ZeroReference)]
    if zeros:
        middles = [(ref.start + ref.stop) / 2 for ref in zeros]
        means = [
            _integral(grid, field, ref.start, ref.stop) / (ref.stop - ref.start) for ref in zeros
        ]
        if wires and all(abs(mean) <= 2.0 * ref.u for mean, ref in zip(means, zeros, strict=True)):
            return field  # a wire knows the level better than a field that nearly vanishes
        order = np.argsort(middles)
        # between two ends a straight line, beside one end a constant
        base = np.interp(grid, np.array(middles)[order], np.array(means)[order])
        return np.asarray(field - base)
    for ref in campaign.references:
        if isinstance(ref, PointReference):
            true = ref.field
        elif isinstance(ref, FlipReference):
            true = ref.flux_change / (2.0 * ref.probe.gain)
        else:
            continue
        read = _near(grid, field, ref.at, campaign.magnet.gap / 8.0)
        return field * (true / read) if wires else field + (true - read)
    return field


def _near(grid: Floats, field: Floats, at: float, reach: float) -> float:
    """Value at a point, from the parabola through the grid points around it."""
    near = np.abs(grid - at) <= reach
    return float(np.polyfit(grid[near] - at, field[near], 2)[-1])


def _integral(grid: Floats, field: Floats, low: float, high: float) -> float:
    """Trapezoidal rule between two points."""
    inside = grid[(grid > low) & (grid < high)]
    s = np.concatenate([[low], inside, [high]])
    return float(np.trapezoid(np.interp(s, grid, field), s))
