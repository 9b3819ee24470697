"""Dwells of a pass: stretches in which the probe stands, so that all it records is noise.

A reading belongs to a dwell if the probe moves by less than a tenth of its usual pace over a
short window around it. The window is as long as the jitter of the position asks for. Where a
travel begins slowly, its first readings are cut off again, and as many before them: a motion too
small to show in the position may still show in the flux.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.estimate.bins import SLOWEST

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass, Record

__all__ = ["Dwell", "dwell_of", "find_dwells"]

Floats = npt.NDArray[np.float64]

FEWEST: Final = 16  # readings of a dwell
STANDS: Final = 20.0  # a travel of fewer jitters than this is none
SURE: Final = 6.0  # jitters that the threshold of a window lies above the jitter of its ends
SLICES: Final = 2000  # a window is no shorter than this part of the readings
FAR: Final = 5.0  # jitters off its place, a reading at the end of a dwell belongs to a travel
TO_ONE_SIGMA: Final = 1.4826  # median size of a normal deviation
TO_SIGMA: Final = 1.4826 / math.sqrt(6)  # median size of second differences of white jitter


@dataclass(frozen=True, eq=False)
class Dwell:
    """A stretch in which the probe stands.

    Parameters
    ----------
    number : int
        Counted from 1 within the pass.
    start, stop : int
        Readings of the pass, counted from 0; `stop` is not in it.
    time : (n,) array
        s.
    position : (n,) array
        m.
    flux : (n,) array
        Cumulative partial integral, V s.
    record : {"cumulative", "increments", "voltage"}
        How it was recorded.
    """

    number: int
    start: int
    stop: int
    time: Floats
    position: Floats
    flux: Floats
    record: Record = "cumulative"

    @property
    def at(self) -> float:
        """Where the probe stands, m."""
        return float(np.mean(self.position))

    @property
    def duration(self) -> float:
        """From the first to the last reading, s."""
        return float(self.time[-1] - self.time[0])

    @property
    def step(self) -> float:
        """Mean time between readings, s."""
        return self.duration / (len(self.time) - 1)

    @property
    def voltage(self) -> Floats:
        """Mean voltage between successive readings, V: one fewer than readings."""
        return np.asarray(np.diff(self.flux) / self.step)

    def check_even(self) -> None:
        """Refuse readings that are not evenly spaced in time.

        Raises
        ------
        InputError
            A reading is off its place by more than two steps, or time stands still.
        """
        where = f"dwell {self.number}"
        if not self.step > 0:
            raise InputError(where, "time that stands still", "readings at distinct times")
        late = self.time - self.time[0] - self.step * np.arange(len(self.time))
        if np.abs(late).max() > 2 * self.step:
            raise InputError(
                where,
                f"a reading {np.abs(late).max():.3g} s off an even spacing of {self.step:.3g} s",
                "readings that are evenly spaced in time",
                "choose another dwell, or record without pauses",
            )


def find_dwells(one: Pass, fewest: int = FEWEST) -> tuple[Dwell, ...]:
    """The dwells of a pass, in the order of time.

    Parameters
    ----------
    one : Pass
        The pass.
    fewest : int
        Readings that a dwell has at least.

    Returns
    -------
    tuple of Dwell
        Empty where the probe never stands for long enough.

    Examples
    --------
    >>> from fieldmap.readings import Wire, make_pass
    >>> z = np.concatenate([np.zeros(50), np.linspace(0, 1, 101)[1:], np.ones(30)])
    >>> one = make_pass(z, 0.05 * z, rate=50.0, probe=Wire("w", 1, 0.05))
    >>> [(dwell.at, len(dwell.time)) for dwell in find_dwells(one)]
    [(0.0, 48), (1.0, 29)]
    """
    still = _standing(one.time, one.position)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], still, [False]])))
    runs = zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True)
    cores = [_core(one.position, low, high) for low, high in runs]
    long = [(low, high) for low, high in cores if high - low >= fewest]
    return tuple(
        Dwell(
            number=number,
            start=low,
            stop=high,
            time=one.time[low:high],
            position=one.position[low:high],
            flux=one.flux[low:high],
            record=one.record,
        )
        for number, (low, high) in enumerate(long, start=1)
    )


def dwell_of(one: Pass, number: int = 1) -> Dwell:
    """One dwell of a pass by its number.

    Parameters
    ----------
    one : Pass
        The pass.
    number : int
        Counted from 1.

    Returns
    -------
    Dwell

    Raises
    ------
    InputError
        The pass has no such dwell.
    """
    found = find_dwells(one)
    if not 1 <= number <= len(found):
        there = f"dwells 1 to {len(found)}" if found else "no dwell of 16 readings or more"
        raise InputError(
            f"{one.name}, dwell {number}",
            there,
            "one of its dwells",
            "choose another one, or let the probe stand for a second before and after a travel",
        )
    return found[number - 1]


def _core(position: Floats, low: int, high: int) -> tuple[int, int]:
    """A run without the readings at its ends that belong to a travel."""
    quarter = (high - low) // 4
    inner = position[low + quarter : high - quarter]
    if not len(inner):
        return low, low
    middle = float(np.median(inner))
    spread = TO_ONE_SIGMA * float(np.median(np.abs(inner - middle)))
    tiny = 1e-12 + 1e-9 * abs(middle)
    off = np.flatnonzero(np.abs(position[low:high] - middle) > max(FAR * spread, tiny))
    before = off[off < quarter]
    after = off[off >= high - low - quarter]
    begins = low + 2 * (int(before[-1]) + 1) if low > 0 and len(before) else low
    ends = high - 2 * (high - low - int(after[0])) if high < len(position) and len(after) else high
    # the reading beside a travel goes in any case
    begins += low > 0 and begins == low
    ends -= high < len(position) and ends == high
    return begins, max(begins, ends)


def _standing(time: Floats, position: Floats) -> npt.NDArray[np.bool_]:
    """Whether the probe stands, reading by reading."""
    n = len(position)
    jitter = TO_SIGMA * float(np.median(np.abs(np.diff(position, 2)))) if n > 2 else 0.0
    if np.ptp(position) <= STANDS * jitter:
        return np.ones(n, dtype=np.bool_)
    half = max(1, n // SLICES)
    _, span, pace = _pace(time, position, half)
    if jitter > 0 and pace > 0:
        step = float(np.median(span)) / (2 * half)
        needed = SURE * math.sqrt(2) * jitter / (SLOWEST * pace * 2 * max(step, 1e-12))
        half = max(half, min(math.ceil(min(needed, n)), n // 8))
    swing, span, pace = _pace(time, position, half)
    return np.asarray(swing < SLOWEST * pace * span)


def _pace(time: Floats, position: Floats, half: int) -> tuple[Floats, Floats, float]:
    """Distance and time over a window around each reading, and the usual speed of a travel.

    The speeds are weighed by the distance, so that dwells, however long, do not count.
    """
    n = len(position)
    width = min(2 * half, n - 1)
    low = np.clip(np.arange(n) - half, 0, n - 1 - width)
    swing = np.abs(position[low + width] - position[low])
    span = time[low + width] - time[low]
    speed = np.divide(swing, span, out=np.zeros(n), where=span > 0)
    covered = float(swing.sum())
    return swing, span, float(swing @ speed) / covered if covered > 0 else 0.0
