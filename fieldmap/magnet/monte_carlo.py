"""Propagation of distributions by trials, as many as the wanted digits need.

Source: JCGM 101:2008, Supplement 1 to the GUM: the adaptive procedure of 7.9, coverage intervals
of 7.7 and 5.3.4; several outputs at once after JCGM 102:2011, 7.8.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError

__all__ = ["Propagated", "Sampler", "coverage_interval", "propagate", "shortest_interval"]

Floats = npt.NDArray[np.float64]

Sampler = Callable[[np.random.Generator, int], Floats]
"""Draws the inputs and gives the outputs: so many trials, one column an output."""

SEED: Final = 20_131
MOST: Final = 2_000_000
BLOCK: Final = 10_000


@dataclass(frozen=True, eq=False)
class Propagated:
    """What the trials say of q outputs, in the units of the outputs.

    Parameters
    ----------
    value : (q,) array
        Mean of the trials: the estimate.
    u : (q,) array
        Their standard deviation: the standard uncertainty.
    covariance : (q, q) array
        Covariance of the outputs.
    symmetric : (q, 2) array
        Ends of the probabilistically symmetric coverage interval.
    shortest : (q, 2) array
        Ends of the shortest coverage interval.
    coverage : float
        Their coverage probability.
    tolerance : (q,) array
        Numerical tolerance that the digits ask for.
    trials : int
        Trials made.
    settled : bool
        Whether estimate, uncertainty and both ends stand still within the tolerance.
    """

    value: Floats
    u: Floats
    covariance: Floats
    symmetric: Floats
    shortest: Floats
    coverage: float
    tolerance: Floats
    trials: int
    settled: bool

    @property
    def correlation(self) -> Floats:
        """Correlation of the outputs; nan where one does not vary."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(self.covariance / np.outer(self.u, self.u))


def propagate(
    sample: Sampler,
    *,
    digits: int = 2,
    coverage: float = 0.95,
    seed: int = SEED,
    most: int = MOST,
    block: int = BLOCK,
) -> Propagated:
    """Propagate distributions through a model by trials until the result stands still.

    Parameters
    ----------
    sample : callable
        Takes a generator and a number m; draws the inputs m times and gives the outputs, an
        array (m, q), or (m,) for a single one.
    digits : int
        Significant digits of u that are to be right, 1 or 2 as a rule.
    coverage : float
        Coverage probability of the intervals.
    seed : int
        Of the generator.
    most : int
        Trials at which it gives up; what it has then is given with ``settled`` false.
    block : int
        Trials between two looks; raised where the coverage asks for more.

    Returns
    -------
    Propagated

    Raises
    ------
    InputError
        Arguments out of range, or outputs that are not finite numbers of one shape.

    Notes
    -----
    JCGM 101:2008, 7.9.4: after each block, the averages over the blocks of estimate, standard
    uncertainty and both ends of the symmetric interval must have twice their standard deviation
    below the numerical tolerance of u (7.9.2: half a unit of its last digit).

    Examples
    --------
    >>> def two_dice(rng, m):
    ...     return rng.uniform(-1.0, 1.0, m) + rng.uniform(-1.0, 1.0, m)
    >>> found = propagate(two_dice)
    >>> round(float(found.u[0]), 2), found.settled
    (0.82, True)
    """
    block = _checked(digits, coverage, most, block)
    rng = np.random.default_rng(seed)
    blocks: list[Floats] = []
    looks: list[Floats] = []
    tolerance, settled = np.zeros(0), False
    while not settled and (len(blocks) < 2 or (len(blocks) + 1) * block <= most):
        blocks.append(_outputs(sample(rng, block), block, blocks))
        looks.append(_look(blocks[-1], coverage))
        if len(blocks) > 1:
            tolerance = _tolerance(np.std(np.concatenate(blocks), axis=0, ddof=1), digits)
            scatter = np.std(looks, axis=0, ddof=1) / math.sqrt(len(looks))
            settled = bool(np.all(2 * scatter <= tolerance))
    return _gathered(np.concatenate(blocks), coverage, tolerance, settled=settled)


def coverage_interval(values: npt.ArrayLike, coverage: float = 0.95) -> tuple[float, float]:
    """Probabilistically symmetric interval of some trials: as many below it as above.

    Parameters
    ----------
    values : (m,) array_like
        Outputs of the trials.
    coverage : float
        Coverage probability.

    Returns
    -------
    tuple of float

    Notes
    -----
    JCGM 101:2008, 7.7.2.

    Examples
    --------
    >>> coverage_interval(range(1, 101), 0.9)
    (5.0, 95.0)
    """
    ordered = np.sort(np.asarray(values, dtype=np.float64))
    within = _within(len(ordered), coverage)
    first = max((len(ordered) - within + 1) // 2, 1)
    return float(ordered[first - 1]), float(ordered[first - 1 + within])


def shortest_interval(values: npt.ArrayLike, coverage: float = 0.95) -> tuple[float, float]:
    """Shortest interval that holds the wanted share of some trials.

    Parameters
    ----------
    values : (m,) array_like
        Outputs of the trials.
    coverage : float
        Coverage probability.

    Returns
    -------
    tuple of float

    Notes
    -----
    JCGM 101:2008, 7.7.4.

    Examples
    --------
    >>> shortest_interval([0, 1, 2, 3, 4, 5, 6, 7, 8, 100], 0.8)
    (0.0, 8.0)
    """
    ordered = np.sort(np.asarray(values, dtype=np.float64))
    within = _within(len(ordered), coverage)
    lengths = ordered[within:] - ordered[: len(ordered) - within]
    first = int(np.argmin(lengths))
    return float(ordered[first]), float(ordered[first + within])


def _within(count: int, coverage: float) -> int:
    """Steps from one end of an interval to the other among ordered trials."""
    return min(math.floor(coverage * count + 0.5), count - 1)


def _checked(digits: int, coverage: float, most: int, block: int) -> int:
    """Trials of a block: at least a hundred beyond each end of the interval."""
    if digits < 1:
        raise InputError("argument 'digits'", repr(digits), "a whole number from 1 up")
    if not 0 < coverage < 1:
        raise InputError("argument 'coverage'", repr(coverage), "a probability between 0 and 1")
    if block < 2:
        raise InputError("argument 'block'", repr(block), "two trials or more")
    block = max(block, math.ceil(100 / (1 - coverage)))
    if most < 2 * block:
        expected = f"{2 * block} or more: two blocks"
        raise InputError("argument 'most'", repr(most), expected, "raise it or make blocks smaller")
    return block


def _outputs(drawn: npt.ArrayLike, count: int, before: list[Floats]) -> Floats:
    """One block of outputs, checked."""
    outputs = np.asarray(drawn, dtype=np.float64)
    outputs = outputs[:, None] if outputs.ndim == 1 else outputs
    shape = before[0].shape if before else (count, *outputs.shape[1:])
    if outputs.ndim != 2 or outputs.shape != shape or outputs.shape[1] == 0:
        expected = f"an array of {count} trials, one column for each output"
        raise InputError("argument 'sample'", f"an array of shape {outputs.shape}", expected)
    if not np.isfinite(outputs).all():
        remedy = "bound the inputs to where the model holds"
        raise InputError("argument 'sample'", "a trial that is no number", "finite numbers", remedy)
    return outputs


def _look(outputs: Floats, coverage: float) -> Floats:
    """Estimate, standard uncertainty and both ends for one block, a row each."""
    ends = np.array([coverage_interval(column, coverage) for column in outputs.T])
    return np.array([outputs.mean(axis=0), outputs.std(axis=0, ddof=1), ends[:, 0], ends[:, 1]])


def _tolerance(u: Floats, digits: int) -> Floats:
    """Half a unit of the last of so many significant digits."""
    found = np.zeros(len(u))
    for i, one in enumerate(u.tolist()):
        if one > 0:
            # as it would be printed: 0.0996 with two digits is 0.10, not 0.100
            place = int(f"{one:.{digits - 1}e}".partition("e")[2]) - digits + 1
            found[i] = 0.5 * 10.0**place
    return found


def _gathered(outputs: Floats, coverage: float, tolerance: Floats, *, settled: bool) -> Propagated:
    """All trials together."""
    return Propagated(
        value=outputs.mean(axis=0),
        u=outputs.std(axis=0, ddof=1),
        covariance=np.atleast_2d(np.cov(outputs, rowvar=False)),
        symmetric=np.array([coverage_interval(column, coverage) for column in outputs.T]),
        shortest=np.array([shortest_interval(column, coverage) for column in outputs.T]),
        coverage=coverage,
        tolerance=tolerance,
        trials=len(outputs),
        settled=settled,
    )
