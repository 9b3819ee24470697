"""Short runs of values that their neighbours do not bear out, in any series of readings.

A value is held against the cubic through its two neighbours on either side. What it may depart by
is t times a local scale, with t of Student's distribution such that one series in many thousands
exceeds it by chance. The scale is the median departure nearby (noise), or what the departures where
the series is steep say of times and positions (jitter seen through the slope), whichever is larger;
half a step of the recorded numbers comes on top. A feature that is narrow, not wild, is told by its
surroundings: with the run taken out, they must fit each other several times better than the run
fits them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

__all__ = ["FEWEST", "Wild", "wild_runs"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]
Bools = npt.NDArray[np.bool_]

FEWEST: Final = 24  # values of a series that is searched
BLOCK: Final = 128  # values that a local scale comes from, with as many on either side
EFFICIENCY: Final = 0.25  # freedom of a median departure, per value: 0.37, less for correlation
STEEP: Final = 0.3  # of the greatest slope: where jitter is measured
UNEVEN: Final = 5.0  # ratio of neighbouring spacings beyond which no cubic is trusted
TO_SIGMA: Final = 1.4826
REACH: Final = 6  # values on either side of a run that must fit each other
SURE: Final = 0.35  # of the tolerance: a misfit below this is noise
NARROW: Final = 6.0  # times what the surroundings misfit each other
ROUNDING: Final = 1e-8  # of the range: no series is trusted beyond that
MOST: Final = 20000  # starts of longer runs: with more of them the series is all features


@dataclass(frozen=True)
class Wild:
    """A run of wild values.

    Parameters
    ----------
    start, count : int
        First value and number of them.
    size : float
        Largest departure from the neighbours, signed, in the unit of the values.
    allowed : float
        Departure that chance allows there.
    """

    start: int
    count: int
    size: float
    allowed: float


@dataclass(frozen=True, eq=False)
class _Series:
    """Values with what each may depart by."""

    at: Floats
    values: Floats
    tolerance: Floats
    grain: float


def wild_runs(
    at: Floats,
    values: Floats,
    *,
    chance: float,
    grain: float = 0.0,
    steep: Floats | None = None,
    longest: int = 2,
) -> list[Wild]:
    """Find wild runs in a series.

    Parameters
    ----------
    at : (n,) array
        Where the values were taken: time, growing; where it stands still often, the number of
        the value is used.
    values : (n,) array
        The series.
    chance : float
        Chance of a false alarm at one value.
    grain : float
        Step of the recorded numbers.
    steep : (n,) array, optional
        How much jitter shows at each value, up to a factor; the slope of the series if left out.
    longest : int
        Most values in a run.

    Returns
    -------
    list of Wild
        In the order of the series; empty for fewer than 24 values.

    Notes
    -----
    Departures scaled by a median of m others follow Student's distribution closely, with 0.37 m
    degrees of freedom for normal noise (efficiency of the median absolute deviation: F. R. Hampel,
    J. Am. Stat. Assoc. 69, 383, 1974).

    Examples
    --------
    >>> at = np.arange(100.0)
    >>> values = np.sin(at / 20) + 1e-4 * np.random.default_rng(1).normal(size=100)
    >>> values[40] += 0.01
    >>> [(run.start, run.count) for run in wild_runs(at, values, chance=1e-8)]
    [(40, 1)]
    """
    if len(values) < FEWEST:
        return []
    at = _abscissa(at)
    departure, bound = _departures(at, values, grain)
    if not departure.any():
        return []
    tolerance = _tolerances(departure, _steepness(values) if steep is None else steep, chance)
    low, high = np.quantile(values, [0.005, 0.995]) if len(values) < 5000 else _range(values)
    tolerance += ROUNDING * (high - low) + 16 * np.finfo(float).eps * np.abs(values).max()
    suspects = np.abs(departure) > tolerance + bound
    if not suspects.any():
        return []
    suspects[[0, 1, -2, -1]] = suspects[[2, 2, -3, -3]]  # the ends have neighbours on one side
    return _confirmed(_Series(at, values, tolerance, grain), suspects, longest)


def _range(values: Floats) -> tuple[float, float]:
    """Range of a long series without its extremes."""
    part = values[:: len(values) // 2500]
    low, high = np.quantile(part, [0.005, 0.995])
    return float(low), float(high)


def _abscissa(at: Floats) -> Floats:
    """Times less their start, or numbers where time stands still too often to be used."""
    step = np.diff(at)
    usual = float(np.median(step))
    if usual <= 0 or np.count_nonzero(step <= usual / UNEVEN) > 0.01 * len(step):
        return np.arange(len(at), dtype=float)
    return np.asarray(at - at[0])


def _departures(at: Floats, values: Floats, grain: float) -> tuple[Floats, Floats]:
    """Departure of every value over its standard uncertainty at unit noise; what rounding makes.

    Zero at two values on either end, and where the spacing is too uneven to tell.
    """
    departure, bound = np.zeros(len(values)), np.zeros(len(values))
    step = np.diff(at)
    usual = float(np.median(step))
    if np.abs(step - usual).max() < 1e-3 * usual:
        outer, inner = values[:-4] + values[4:], values[1:-3] + values[3:-1]
        norm = np.sqrt(1 + 34 / 36)
        departure[2:-2] = (values[2:-2] - inner * (2 / 3) + outer / 6) / norm
        bound[2:-2] = grain * (4 / 3) / norm
        return departure, bound
    nodes = [at[:-4] - at[2:-2], at[1:-3] - at[2:-2], at[3:-1] - at[2:-2], at[4:] - at[2:-2]]
    known = [values[:-4], values[1:-3], values[3:-1], values[4:]]
    width = np.lib.stride_tricks.sliding_window_view(step, 4)
    trusted = width.max(axis=1) < UNEVEN * width.min(axis=1)
    if not trusted.any():
        return departure, bound
    safe = [np.where(trusted, node, i) for i, node in zip((-2, -1, 1, 2), nodes, strict=True)]
    weights = _weights(safe)
    guess = sum(w * y for w, y in zip(weights, known, strict=True))
    norm = np.sqrt(1 + sum(w**2 for w in weights))
    departure[2:-2] = np.where(trusted, (values[2:-2] - guess) / norm, 0.0)
    bound[2:-2] = grain / 2 * (1 + sum(np.abs(w) for w in weights)) / norm
    return departure, bound


def _weights(nodes: list[Floats]) -> list[Floats]:
    """Lagrange weights at zero of four nodes each."""
    weights = []
    for j, own in enumerate(nodes):
        weight = np.ones_like(own)
        for k, other in enumerate(nodes):
            if k != j:
                weight = weight * other / (other - own)
        weights.append(weight)
    return weights


def _steepness(values: Floats) -> Floats:
    """Change per value around each, which a wild value does not raise."""
    near, far = np.zeros(len(values)), np.zeros(len(values))
    near[1:-1] = np.abs(values[2:] - values[:-2]) / 2
    far[2:-2] = np.abs(values[4:] - values[:-4]) / 4
    slope = np.minimum(near, far)
    wide = slope.copy()
    wide[1:] = np.maximum(wide[1:], slope[:-1])
    wide[:-1] = np.maximum(wide[:-1], slope[1:])
    return wide


def _tolerances(departure: Floats, steep: Floats, chance: float) -> Floats:
    """What chance lets each departure reach."""
    sizes = np.abs(departure[2:-2])
    blocks = len(sizes) // BLOCK
    if blocks > 1:
        shaped = sizes[: blocks * BLOCK].reshape(blocks, BLOCK)
        typical = TO_SIGMA * np.median(shaped, axis=1)
        wide = np.maximum(
            typical, np.maximum(np.append(typical[1:], 0), np.append(0, typical[:-1]))
        )
        near = np.minimum(np.arange(len(departure)) // BLOCK, blocks - 1)
        noise = wide[near] * _times(2 * BLOCK, chance)
    else:
        noise = np.full(len(departure), TO_SIGMA * np.median(sizes) * _times(len(sizes), chance))
    inner = steep[2:-2]
    top = np.flatnonzero(inner > STEEP * inner.max(initial=0.0))
    if not len(top):
        return np.asarray(noise)
    jitter = TO_SIGMA * float(np.median(sizes[top] / inner[top]))
    return np.asarray(np.maximum(noise, jitter * _times(len(top), chance) * steep))


def _times(count: int, chance: float) -> float:
    """Standard deviations, known from `count` values, that chance exceeds that rarely."""
    from scipy.special import stdtrit

    return float(-stdtrit(max(EFFICIENCY * count, 1.0), chance / 2))


def _confirmed(series: _Series, suspects: Bools, longest: int) -> list[Wild]:
    """Runs of suspects that depart far more than what is around them, the shortest first."""
    found: list[Wild] = []
    open_to = suspects.copy()
    for count in range(1, longest + 1):
        first = np.flatnonzero(open_to)
        first = first[first + count <= len(open_to)]
        first = first[open_to[first + count - 1]]
        first = first[(first + count < len(open_to)) | (first > 0)]
        if not len(first) or (count > 2 and len(first) > MOST):
            break
        size, allowed = _held(series, first, count)
        margin = np.abs(size) / allowed
        for k in np.argsort(-margin, kind="stable").tolist():
            if margin[k] <= 1:
                break
            start = int(first[k])
            if open_to[start] and open_to[start + count - 1]:
                found.append(Wild(start, count, float(size[k]), float(allowed[k])))
                open_to[max(start - 2, 0) : start + count + 2] = False
    return sorted(found, key=lambda run: run.start)


def _held(series: _Series, first: Ints, count: int) -> tuple[Floats, Floats]:
    """Departure of each run from its surroundings, and what it is allowed.

    A run is as wild as the milder of its two ends; the larger one is what is told.
    """
    kept = 2 * REACH
    left = np.clip(first - REACH, 0, len(series.at) - count - kept)
    order = left[:, None] + np.arange(kept)
    order = order + count * (order >= first[:, None])
    at, values = series.at[order], series.values[order]
    noise = SURE * series.tolerance[order]
    misfit = np.zeros(len(first))
    before = first - left
    for k in range(kept):
        others = [j for j in _nearest(k, kept) if j != k]
        rest, norm, rounding = _departs(at, values, at[:, k], values[:, k], others, series.grain)
        excess = np.maximum((np.abs(rest) - rounding) / norm - noise[:, k], 0.0)
        close = (k >= before - 4) & (k < before + 4)
        misfit = np.where(close, np.maximum(misfit, excess), misfit)
    sizes, limits = [], []
    for j in sorted({0, count - 1}):
        here = first + j
        size, norm, rounding = _around(series, at, values, here, before)
        sizes.append(size)
        limits.append(norm * (series.tolerance[here] + NARROW * misfit) + rounding)
    size, allowed = np.array(sizes), np.array(limits)
    ratio = np.abs(size) / allowed
    telling, columns = np.argmax(np.abs(size), axis=0), np.arange(len(first))
    shown = size[telling, columns]
    return shown, np.abs(shown) / np.maximum(ratio.min(axis=0), 1e-300)


def _nearest(k: int, count: int) -> list[int]:
    """The five places around one, itself included."""
    low = min(max(k - 2, 0), count - 5)
    return list(range(low, low + 5))


def _departs(
    at: Floats, values: Floats, where: Floats, value: Floats, nodes: list[int], grain: float
) -> tuple[Floats, Floats, Floats]:
    """Departure of values from the cubic through four columns, its norm, the rounding in it."""
    apart = [at[:, j] - where for j in nodes]
    span = np.maximum.reduce([np.abs(one) for one in apart])
    closest = np.minimum.reduce(
        [np.abs(a - b) for i, a in enumerate(apart) for b in apart[i + 1 :]]
        + [np.abs(a) for a in apart]
    )
    even = closest > 1e-3 * span
    safe = [np.where(even, one, i) for i, one in zip((-2.0, -1.0, 1.0, 2.0), apart, strict=True)]
    weights = _weights(safe)
    guess = sum(w * values[:, j] for w, j in zip(weights, nodes, strict=True))
    norm = np.sqrt(1 + sum(w**2 for w in weights))
    rounding = grain / 2 * (1 + sum(np.abs(w) for w in weights))
    return np.where(even, value - guess, 0.0), norm, np.asarray(rounding)


def _around(
    series: _Series, at: Floats, values: Floats, here: Ints, before: Ints
) -> tuple[Floats, Floats, Floats]:
    """Departure of single values from the cubic through the nearest four that are kept."""
    low = np.clip(before - 2, 0, 2 * REACH - 4)
    rows = np.arange(len(here))[:, None]
    columns = low[:, None] + np.arange(4)
    return _departs(
        at[rows, columns],
        values[rows, columns],
        series.at[here],
        series.values[here],
        [0, 1, 2, 3],
        series.grain,
    )
