"""Short averages of a pass: bins of successive readings, and the design rows of their means.

A bin closes when the probe has moved about half a knot, or when a slice of a dwell has
passed. The rows are averaged like the readings, so averaging approximates nothing: within a
piece of the spline a basis function is a polynomial, and the mean of a polynomial over some
readings is its coefficients times the readings' moments. Each reading is touched once per
node of the probe's response, in vectorised sums.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.estimate.spline import DEGREE, UniformSpline, piece_polynomials

if TYPE_CHECKING:
    from fieldmap.estimate.response import Response
    from fieldmap.readings.passes import Pass

__all__ = ["Bins", "bin_pass", "bin_starts", "in_motion", "mean_rows", "pass_starts"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

SLOWEST = 0.1  # of the fastest bin: what is slower stands, and only jitters
ALONE, SPREAD = 0.171, 0.108  # of a step: what a cubic spline through white samples bridges
MAX_BLOCKS = 16384  # the search for bin ends looks at this many block means at most


@dataclass(frozen=True, eq=False)
class Bins:
    """Means over the bins of one pass; every array has one entry a bin.

    Parameters
    ----------
    starts : int array
        Index of the first reading of each bin.
    count : array
        Readings in the bin.
    time, position, flux, speed : arrays
        Means, in s, m, V s and m/s.
    sense : array
        Direction of travel, +1 or -1; in a dwell that of the travel before it, since the play
        of the stage stays taken up.
    bridge : array
        ``∫A(1-A) dt`` over the bin, s, with A the share of its readings already taken: what
        the design's ``w(1 - 1/c²)/6`` is for evenly spaced readings.
    strength : array or None
        What a reading is larger by than at nominal current and reference temperature, 1: the
        field follows the supply's current, the probe its temperature.
    """

    starts: Ints
    count: Floats
    time: Floats
    position: Floats
    flux: Floats
    speed: Floats
    sense: Floats
    bridge: Floats
    strength: Floats | None = None


def bin_starts(time: Floats, position: Floats, step: float, fewest: int = 1) -> Ints:
    """First reading of each bin: bins of about `step` of travel, dwells cut into slices.

    Parameters
    ----------
    time, position : (n,) arrays
        s and m, in the order of recording.
    step : float
        Travel after which a bin closes, m.
    fewest : int
        Readings that a bin holds at least; the last one may hold fewer.

    Returns
    -------
    int array
        Increasing, starting with 0.
    """
    n = len(time)
    block = max(fewest, n // MAX_BLOCKS)
    first = np.arange(0, n, block)
    middle = np.add.reduceat(position, first) / np.diff(np.append(first, n))
    duration = float(time[-1] - time[0])
    travel = float(np.abs(np.diff(middle)).sum())
    pace = 2 * duration * step / travel if travel > 0 else duration
    slice_time = float(np.clip(pace, duration / 400, duration / 32))
    # a hair less, so that rounding does not decide where readings lie a step apart
    nearly_step, nearly_slice = step * (1 - 1e-6), slice_time * (1 - 1e-6)
    starts = [0]
    opened_at, opened_when = float(middle[0]), float(time[0])
    for index, where, when in zip(
        first[1:].tolist(), middle[1:].tolist(), time[first[1:]].tolist(), strict=True
    ):
        if abs(where - opened_at) >= nearly_step or when - opened_when >= nearly_slice:
            starts.append(index)
            opened_at, opened_when = where, when
    return np.array(starts, dtype=np.intp)


def pass_starts(one: Pass, step: float) -> Ints:
    """First reading of each bin of a pass; as `bin_starts`.

    The spline through the samples of a voltage spreads their noise over more than the next bin
    where bins hold one of them: there they hold two.
    """
    return bin_starts(one.time, one.position, step, 2 if one.record == "voltage" else 1)


def bin_pass(one: Pass, step: float, nominal_current: float | None = None) -> Bins:
    """Average a pass in bins.

    Parameters
    ----------
    one : Pass
        The pass.
    step : float
        Travel after which a bin closes, m.
    nominal_current : float, optional
        A; where the pass recorded the supply's current, readings are referred to this.

    Returns
    -------
    Bins
    """
    starts = pass_starts(one, step)
    n = len(one.time)
    count = np.diff(np.append(starts, n)).astype(float)
    origin = one.flux[0]  # the constant is unknown anyway; removing it saves digits

    def mean(values: Floats) -> Floats:
        return np.asarray(np.add.reduceat(values, starts) / count)

    speed = _bin_speed(one, starts)
    strength = _strength(one, nominal_current)
    return Bins(
        starts=starts,
        count=count,
        time=mean(one.time),
        position=mean(one.position),
        flux=mean(one.flux - origin),
        speed=speed,
        sense=_sense(speed),
        bridge=_bridge(one, starts, count),
        strength=None if strength is None else mean(strength),
    )


def _strength(one: Pass, nominal_current: float | None) -> Floats | None:
    """Reading over what it would be at nominal current and reference temperature."""
    factors = []
    if one.current is not None and nominal_current:
        factors.append(one.current / nominal_current)
    if one.temperature is not None and one.probe.temperature_coefficient:
        warmer = one.temperature - one.probe.reference_temperature
        factors.append(1 + one.probe.temperature_coefficient * warmer)
    return np.prod(factors, axis=0) if factors else None


def _bin_speed(one: Pass, starts: Ints) -> Floats:
    """Mean speed in each bin: distance between its ends over the time between them."""
    n = len(one.time)
    low = np.maximum(starts - 1, 0)
    high = np.minimum(np.append(starts[1:], n), n - 1)
    duration = one.time[high] - one.time[low]
    distance = one.position[high] - one.position[low]
    some = duration > 1e-12 * (one.time[-1] - one.time[0])
    speed: Floats = np.divide(distance, duration, out=np.zeros(len(starts)), where=some)
    return speed


def _sense(speed: Floats) -> Floats:
    """Direction of travel of each bin, carried on through dwells."""
    moving = np.flatnonzero(in_motion(speed))
    if not len(moving):
        return np.zeros(len(speed))
    last = np.searchsorted(moving, np.arange(len(speed)), side="right") - 1
    return np.asarray(np.sign(speed[moving[np.maximum(last, 0)]]))


def in_motion(speed: Floats) -> npt.NDArray[np.bool_]:
    """Which bins travel; the others stand, and only jitter."""
    return np.asarray(np.abs(speed) > SLOWEST * np.abs(speed).max(initial=0.0))


def _bridge(one: Pass, starts: Ints, count: Floats) -> Floats:
    """∫A(1-A)dt with the actual time stamps; the walk's share that a bin mean averages out."""
    n = len(one.time)
    bin_of = np.repeat(np.arange(len(starts)), count.astype(int))
    taken = (np.arange(n) - starts[bin_of] + 1.0) / count[bin_of]
    gap = np.diff(one.time, append=one.time[-1])  # the last reading of a bin has A = 1
    share = np.add.reduceat(gap * taken * (1 - taken), starts)
    if one.record == "voltage":
        # the spline through the samples spreads each of them over its neighbours' steps
        step = np.add.reduceat(gap, starts) / count
        share = share + step * np.where(count == 1, ALONE, SPREAD / count)  # 1: the last
    return np.asarray(share)


def mean_rows(
    bins: Bins, position: Floats, response: Response, spline: UniformSpline
) -> tuple[sparse.csr_array, sparse.csr_array, sparse.csr_array]:
    """Design rows of the bin means.

    Parameters
    ----------
    bins : Bins
        The bins.
    position : (n,) array
        Position of every reading, m.
    response : Response
        How the probe reads the spline.
    spline : UniformSpline
        The knots.

    Returns
    -------
    running : (bins, size + 1) sparse array
        Flux rows on the coefficients of F, V s per (T m); empty for round coils.
    direct : (bins, size) sparse array
        Flux rows on the coefficients of B, V s/T.
    slope : (bins, size) sparse array
        Rows of dΦ/ds on the coefficients of B, V s/(T m).
    """
    shape = (len(bins.starts), spline.size)
    running = _empty(shape[0], spline.size + 1)
    direct = _empty(*shape)
    slope = _empty(*shape)
    bin_of = np.repeat(np.arange(len(bins.starts)), bins.count.astype(int))
    cubic = piece_polynomials(DEGREE)
    rising = cubic[1:] * np.arange(1, DEGREE + 1)[:, None] / spline.spacing
    for offset, weight in zip(response.offsets, response.weights, strict=True):
        owner, piece, moments = _moments(position + offset, bin_of, bins.count, spline)
        scatter = _Scatter(owner, piece)
        if response.of_integral:
            quartic = piece_polynomials(DEGREE + 1)
            running = running + scatter(weight * moments @ quartic, running.shape)
            slope = slope + scatter(weight * moments[:, :-1] @ cubic, shape)
        else:
            direct = direct + scatter(weight * moments[:, :-1] @ cubic, shape)
            slope = slope + scatter(weight * moments[:, :-2] @ rising, shape)
    return running, direct, slope


def _moments(
    s: Floats, bin_of: Ints, count: Floats, spline: UniformSpline
) -> tuple[Ints, Ints, Floats]:
    """Moments up to the fourth of the readings of each (bin, piece), divided by the bin's count."""
    piece, x = spline.locate(s)
    first = np.flatnonzero(np.append(True, (np.diff(piece) != 0) | (np.diff(bin_of) != 0)))
    owner = bin_of[first]
    moments = np.empty((len(first), DEGREE + 2))
    moments[:, 0] = np.diff(np.append(first, len(s)))
    power = x.copy()
    for k in range(1, DEGREE + 2):
        moments[:, k] = np.add.reduceat(power, first)
        if k <= DEGREE:
            power *= x
    return owner, piece[first], moments / count[owner][:, None]


@dataclass(frozen=True, eq=False)
class _Scatter:
    """Adds blocks of neighbouring columns, one block a (bin, piece), into a sparse array."""

    owner: Ints
    piece: Ints

    def __call__(self, blocks: Floats, shape: tuple[int, int]) -> sparse.csr_array:
        width = blocks.shape[1]
        rows = np.repeat(self.owner, width)
        columns = (self.piece[:, None] + np.arange(width)).ravel()
        return sparse.csr_array((blocks.ravel(), (rows, columns)), shape=shape)


def _empty(rows: int, columns: int) -> sparse.csr_array:
    return sparse.csr_array((rows, columns))
