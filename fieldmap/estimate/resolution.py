"""What was recorded, found from the numbers themselves: their step, and samples of a voltage."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass

__all__ = ["common_step", "counted_step", "flux_step", "unswung"]

Floats = npt.NDArray[np.float64]

ROUNDS: Final = 24  # of Euclid's algorithm
EXACT: Final = 40.0  # times rounding that a step is at least, to be told from it
GROWING: Final = tuple(10.0 * 3.0**k for k in range(14))  # multiples of the step; each sharpens it
LEFT_OVER: Final = 0.02  # of the step: less is rounding
KINDS: Final = 3  # different multiples that show a step, none at all being one
FEW_STEPS: Final = 1e-3  # of the range of the flux
MOST_MULTIPLES: Final = 1e15
FEWEST: Final = 8  # differences that share the step
LOOKED_AT: Final = 20  # stretches of a long series, of this many differences each
STRETCH: Final = 1000


def common_step(values: Floats) -> float:
    """Largest number that all differences of a series are multiples of.

    Parameters
    ----------
    values : (n,) array
        As recorded, in any unit.

    Returns
    -------
    float
        In the unit of the values; zero where there is none above rounding.

    Examples
    --------
    >>> round(common_step(0.25 * np.array([0, 4, 1, 9, 12, 3, 3, 7, 8, 20, 22, 31])), 9)
    0.25

    Notes
    -----
    Euclid's algorithm on all differences at once, down to the rounding of the numbers.
    """
    values = np.asarray(values, dtype=float)
    rounding = EXACT * np.finfo(float).eps * float(np.abs(values).max(initial=0.0))
    found = np.unique(np.abs(_some_differences(values)))
    differences = found[found > rounding]
    if len(values) < FEWEST or not len(differences):
        return 0.0
    step = _euclid(differences, rounding) or _decimal(differences, rounding)
    if step == 0:
        return 0.0
    # an even ramp is all one difference, which is no step of the numbers
    kinds = len(np.unique(np.round(differences / step))) + (len(found) > len(differences))
    return step if kinds >= KINDS else 0.0


def _euclid(differences: Floats, rounding: float) -> float:
    """The step by Euclid's algorithm; zero where rounding stops it."""
    step = float(differences[0])
    for _ in range(ROUNDS):
        step, shared = _tried(step, differences)
        if shared:
            return step
        if step < rounding:
            break
    return 0.0


def _decimal(differences: Floats, rounding: float) -> float:
    """The step of a few differences far apart, written with few decimals."""
    finest = math.ceil(math.log10(rounding)) if rounding > 0 else -15
    for power in range(math.floor(math.log10(differences[0])), finest, -1):
        unit = 10.0**power
        multiples = np.round(differences / unit)
        if multiples[-1] > MOST_MULTIPLES:
            break
        if np.all(np.abs(differences - unit * multiples) <= rounding):
            return float(unit * np.gcd.reduce(multiples.astype(np.int64)))
    return 0.0


def _some_differences(values: Floats) -> Floats:
    """Differences of a series, or of stretches spread over a long one."""
    if len(values) <= LOOKED_AT * STRETCH:
        return np.asarray(np.diff(values))
    starts = np.linspace(0, len(values) - STRETCH - 1, LOOKED_AT).astype(int)
    return np.concatenate([np.diff(values[start : start + STRETCH + 1]) for start in starts])


def _tried(step: float, differences: Floats) -> tuple[float, bool]:
    """The step sharpened by ever larger differences, or what one leaves over as the next to try."""
    for most in (*GROWING, np.inf):
        some = differences[: np.searchsorted(differences, most * step)]
        if not len(some):
            continue
        multiples = np.round(some / step)
        rest = np.abs(some - step * multiples)
        wrong = rest > LEFT_OVER * step
        if wrong.any():
            return float(rest[wrong].min()), False
        step = float(np.sum(some) / np.sum(multiples))
    return step, True


def flux_step(one: Pass) -> float:
    """Step of the recorded flux of a pass, V s.

    Parameters
    ----------
    one : Pass
        The pass.

    Returns
    -------
    float
        Zero where the numbers show none: samples of a voltage and readings whose droop was undone
        are no longer as recorded.
    """
    droops = one.integrator.kind == "analog" and one.integrator.leak_time is not None
    if one.record == "voltage" or droops:
        return 0.0
    return common_step(one.flux)


def counted_step(one: Pass) -> float:
    """Step of the recorded flux whose rounding counts as read noise, V s.

    Parameters
    ----------
    one : Pass
        The pass.

    Returns
    -------
    float
        Zero where there is none, or where so few steps make up the whole flux that a pattern in
        it may be taken for one.
    """
    step = flux_step(one)
    return step if step < FEW_STEPS * float(np.ptp(one.flux)) else 0.0


def unswung(increments: Floats) -> Floats:
    """Increments between samples of a voltage, freed of the swing of the spline that summed them.

    For a quartic spline the (1, 4, 1)/6 mean of its increments is the (1, 11, 11, 1)/24 mean of
    its derivatives at the knots: a wild sample touches four values and no more.

    Parameters
    ----------
    increments : (n,) array
        Of a voltage sampled evenly.

    Returns
    -------
    (n - 2,) array

    Examples
    --------
    >>> unswung(np.array([1.0, 1.0, 1.0, 1.0])).tolist()
    [1.0, 1.0]
    """
    return np.asarray((increments[:-2] + 4 * increments[1:-1] + increments[2:]) / 6)
