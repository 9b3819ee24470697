"""What one unit of each fault would add to the increments of a pass.

Every signature follows from the model: Φ = (1 + gain)·X·b + drift·t, with X the flux rows and
S·b the slope dΦ/ds.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.bins import in_motion

if TYPE_CHECKING:
    from fieldmap.estimate.model import PassModel
    from fieldmap.estimate.solved import Solved

__all__ = [
    "FaultKind",
    "Signatures",
    "field_shapes",
    "field_steps",
    "pass_signatures",
    "slope",
    "step_within",
    "while_moving",
]

Floats = npt.NDArray[np.float64]

FaultKind = Literal[
    "factor",
    "shift",
    "stretch",
    "factor drifts",
    "factor changes",
    "position slips",
    "drift bends",
    "drift follows temperature",
]

CUTS = 24  # places where a change within a pass is looked for
BENDS = 6  # half waves of a drift within a pass
MOST_PIECES = 24  # of a difference between the field of a pass and that of the others
FEWEST_PIECES = 4


@dataclass(frozen=True, eq=False)
class Signatures:
    """Signatures of one kind in one pass.

    Parameters
    ----------
    kind : str
        What would be wrong.
    columns : (n, k) array
        Increments for one unit of it: relative for factors, m for positions, V s for a drift.
    bins : (k,) int array
        Bin from which on each change holds; 0 where it holds throughout.
    """

    kind: FaultKind
    columns: Floats
    bins: npt.NDArray[np.intp]


def slope(solved: Solved, number: int, b: Floats) -> Floats:
    """dΦ/ds of each bin of a pass in the field b (T, recorded frame), V s/m."""
    model = solved.models[number]
    return np.asarray(model.gain(solved.state) * (model.slope @ b))


def pass_signatures(solved: Solved, number: int, b: Floats) -> list[Signatures]:
    """All single faults of a pass but steps of the flux.

    Parameters
    ----------
    solved : Solved
        The line.
    number : int
        The pass.
    b : (size,) array
        Coefficients of the field that the pass is taken to have been in, recorded frame, T.

    Returns
    -------
    list of Signatures
    """
    model = solved.models[number]
    steps, swing = field_steps(solved, number, b), slope(solved, number, b)
    moving = while_moving(model)
    time, place = _centred(model.bins.time), model.bins.position - model.bins.position.mean()
    later = 0.5 * (time[1:] + time[:-1])
    found = [
        _throughout("factor", steps),
        _throughout("shift", moving * np.diff(swing)),
        _throughout("stretch", moving * np.diff(swing * place)),
        _throughout("factor drifts", steps * later),
        _after("factor changes", steps),
        _slips(swing, moving),
        Signatures("drift bends", _bends(time), np.zeros(BENDS, dtype=np.intp)),
    ]
    temperature = model.one.temperature
    if temperature is not None and np.ptp(temperature) > 0:
        counted = model.bins.count
        mean = np.add.reduceat(temperature, model.bins.starts) / counted
        found.append(_throughout("drift follows temperature", np.diff(mean)))
    return found


def while_moving(model: PassModel) -> Floats:
    """1 for each increment of a pass over which the probe moved, 0 where it stood.

    A probe that stands is recorded at positions that jitter. What they would change is in the
    residuals with the opposite sign: a signature made of it would always be found.
    """
    fast = in_motion(model.bins.speed)
    return np.asarray(fast[1:] & fast[:-1], dtype=float)


def field_shapes(solved: Solved, number: int, piece: float) -> Floats:
    """Increments if a pass saw a field that differs by 1 T in one piece of the line.

    Parameters
    ----------
    solved, number
        As for `pass_signatures`.
    piece : float
        Length of a piece, m.

    Returns
    -------
    (n, k) array
    """
    model = solved.models[number]
    low, high = model.bins.position.min(), model.bins.position.max()
    count = int(np.clip(round((high - low) / piece), FEWEST_PIECES, MOST_PIECES)) + 1
    corners = np.linspace(low, high, count)
    middles = model.spline.middles()
    hats = np.array([np.interp(middles, corners, one) for one in np.eye(count)]).T
    rows = solved.design(number)[:, : model.spline.size]
    return np.asarray(while_moving(model)[:, None] * (rows @ hats))


def field_steps(solved: Solved, number: int, b: Floats) -> Floats:
    """Increments of a pass that the field b (T, recorded frame) makes while it moves, V s."""
    steps = solved.design(number)[:, : len(b)] @ b
    return np.asarray(while_moving(solved.models[number]) * steps)


def step_within(solved: Solved, number: int, first: int) -> tuple[Floats, npt.NDArray[np.intp]]:
    """Signatures of a step before any reading of two neighbouring bins, and those readings.

    Parameters
    ----------
    solved, number
        As for `pass_signatures`.
    first : int
        The earlier of the two bins.

    Returns
    -------
    columns : (n, k) array
        Increments for a step of 1 V s.
    readings : (k,) int array
        First reading after each step.
    """
    bins = solved.models[number].bins
    ends = np.append(bins.starts[1:], bins.starts[-1] + int(bins.count[-1]))
    low, high = max(first - 1, 0), min(first + 2, len(ends) - 1)
    readings = np.arange(bins.starts[low] + 1, ends[high])
    share = (ends[:, None] - np.maximum(readings, bins.starts[:, None])) / bins.count[:, None]
    return np.diff(np.clip(share, 0.0, 1.0), axis=0), readings


def _centred(time: Floats) -> Floats:
    """Time of a pass from -1 to 1."""
    return np.asarray(2 * (time - time[0]) / (time[-1] - time[0]) - 1)


def _throughout(kind: FaultKind, column: Floats) -> Signatures:
    return Signatures(kind, column[:, None], np.zeros(1, dtype=np.intp))


def _after(kind: FaultKind, steps: Floats) -> Signatures:
    """The increments from some bin on are larger by one."""
    cuts = _spread(np.abs(steps))
    columns = np.where(np.arange(len(steps))[:, None] >= cuts, steps[:, None], 0.0)
    return Signatures(kind, columns, cuts)


def _slips(swing: Floats, moving: Floats) -> Signatures:
    """The positions from some bin on are too small by one metre."""
    cuts = _spread(moving * np.abs(np.diff(swing)))
    after = np.arange(len(swing))[:, None] >= cuts
    columns = np.diff(np.where(after, swing[:, None], 0.0), axis=0)
    return Signatures("position slips", moving[:, None] * columns, cuts)


def _spread(weight: Floats) -> npt.NDArray[np.intp]:
    """Bins to cut at: close where much happens, and not at the ends."""
    if weight.sum() <= 0 or len(weight) < 3:
        return np.zeros(0, dtype=np.intp)
    grown = np.cumsum(weight) / weight.sum() + np.linspace(0, 1, len(weight))
    wanted = np.linspace(0, grown[-1], CUTS + 2)[1:-1]
    cuts = np.unique(np.searchsorted(grown, wanted))
    return cuts[(cuts > 0) & (cuts < len(weight) - 1)]


def _bends(time: Floats) -> Floats:
    """Slow waves of the drift, V s."""
    waves = np.pi / 2 * np.arange(1, BENDS + 1)
    return np.diff(np.cos(waves * (time[:, None] + 1)), axis=0)
