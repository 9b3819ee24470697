"""Risks of an acceptance rule: how often it accepts what does not conform, and the reverse.

Source: JCGM 106:2012, clause 9: the specific risk of one value, and the global risks of a rule
for a process that makes the items and a measurement that judges them, both normal.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.magnet.verdict import conformity, guard_band

if TYPE_CHECKING:
    from fieldmap.readings.passes import Limit

__all__ = ["Risks", "risks", "specific_risk"]

Floats = npt.NDArray[np.float64]

_REACH: Final = 9.0  # standard deviations to either side; the rest is below 1e-18
_CELLS: Final = np.linspace(-_REACH, _REACH, 37)  # half a standard deviation each
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)


@dataclass(frozen=True)
class Risks:
    """Shares of all items that a rule judges.

    Parameters
    ----------
    consumer : float
        Items that do not conform and are accepted.
    producer : float
        Items that conform and are not accepted: rejected, or left undecided.
    rejected : float
        Items that conform and are rejected outright, beyond the guard band outside the limits.
    """

    consumer: float
    producer: float
    rejected: float


def specific_risk(limit: Limit, u: float, k: float = 2.0) -> float:
    """Largest probability that an accepted item does not conform: that of a value just accepted.

    Parameters
    ----------
    limit : Limit
        Lower and upper limit, guard band.
    u : float
        Standard uncertainty of the value, unit of the result.
    k : float
        Coverage factor, where the limit names none.

    Returns
    -------
    float
        Zero where nothing can be accepted or nothing is limited.

    Notes
    -----
    Source: JCGM 106:2012, 9.3.2.

    Examples
    --------
    >>> from fieldmap.readings.passes import Limit
    >>> round(specific_risk(Limit("magnetic_length", None, 0.3815), 1e-4), 4)
    0.0228
    """
    low, high = _accepted(limit, u, k)
    if low > high:
        return 0.0
    edges = [edge for edge in (low, high) if math.isfinite(edge)]
    return max((1.0 - conformity(edge, u, limit.lower, limit.upper) for edge in edges), default=0.0)


def risks(limit: Limit, u: float, process_mean: float, process_sd: float, k: float = 2.0) -> Risks:
    """Global risks of a limit's rule.

    Parameters
    ----------
    limit : Limit
        Lower and upper limit, guard band.
    u : float
        Standard uncertainty of a measured value, unit of the result.
    process_mean, process_sd : float
        Mean and standard deviation of the true values that are made, same unit.
    k : float
        Coverage factor, where the limit names none.

    Returns
    -------
    Risks

    Raises
    ------
    InputError
        A process that does not vary, or an uncertainty below zero.

    Notes
    -----
    Source: JCGM 106:2012, 9.5: with the density g0 of true values η, the consumer's risk is
    ∫ g0(η)·P(accepted | η) dη over the η outside the limits, the producer's risk
    ∫ g0(η)·P(not accepted | η) dη over those within. Gauss-Legendre quadrature in cells that end
    at the limits and grow fine where acceptance turns over.

    Examples
    --------
    >>> from fieldmap.readings.passes import Limit
    >>> found = risks(Limit("magnetic_length", 0.3805, 0.3815), 1e-4, 0.381, 3e-4)
    >>> f"{found.consumer:.5f} {found.producer:.3f}"
    '0.00047 0.248'
    """
    _check(u, "u", zero=True)
    _check(process_sd, "process_sd", zero=False)
    lower = -math.inf if limit.lower is None else limit.lower
    upper = math.inf if limit.upper is None else limit.upper
    low, high = _accepted(limit, u, k)
    band = guard_band(limit, u, k)
    turns = [lower, upper, low, high, lower - band, upper + band]
    finite = [turn for turn in turns if math.isfinite(turn)]
    eta, weight = _nodes(finite, u, process_mean, process_sd)
    weight = weight * _density(eta, process_mean, process_sd)
    conforms = (lower <= eta) & (eta <= upper)
    accepted = _between(eta, u, low, high)
    kept = _between(eta, u, lower - band, upper + band)
    return Risks(
        consumer=float(weight[~conforms] @ accepted[~conforms]),
        producer=float(weight[conforms] @ (1.0 - accepted[conforms])),
        rejected=float(weight[conforms] @ (1.0 - kept[conforms])),
    )


def _accepted(limit: Limit, u: float, k: float) -> tuple[float, float]:
    """Ends of the acceptance interval; the lower one above where nothing is accepted."""
    band = guard_band(limit, u, k)
    return (
        -math.inf if limit.lower is None else limit.lower + band,
        math.inf if limit.upper is None else limit.upper - band,
    )


def _nodes(turns: list[float], u: float, mean: float, sd: float) -> tuple[Floats, Floats]:
    """Nodes and weights of the quadrature over all true values that are made."""
    first, last = mean - _REACH * sd, mean + _REACH * sd
    around = [turn + u * _CELLS for turn in turns]
    borders = np.concatenate([mean + sd * _CELLS, turns, *around])
    borders = np.unique(np.clip(borders, first, last))
    half, middle = np.diff(borders) / 2, (borders[1:] + borders[:-1]) / 2
    eta = middle[:, None] + half[:, None] * _NODES
    return eta.ravel(), (half[:, None] * _WEIGHTS).ravel()


def _density(eta: Floats, mean: float, sd: float) -> Floats:
    return np.asarray(np.exp(-0.5 * ((eta - mean) / sd) ** 2) / (sd * math.sqrt(2 * math.pi)))


def _between(eta: Floats, u: float, low: float, high: float) -> Floats:
    """Probability that the measured value of each true one lies from low to high."""
    from scipy.special import ndtr

    if low > high:
        return np.zeros_like(eta)
    if u == 0:
        return ((low <= eta) & (eta <= high)).astype(np.float64)
    return np.asarray(ndtr((high - eta) / u) - ndtr((low - eta) / u))


def _check(value: float, name: str, *, zero: bool) -> None:
    if not (math.isfinite(value) and (value > 0 or (zero and value == 0))):
        expected = "a finite number, zero or above" if zero else "a finite number above zero"
        raise InputError(f"argument {name!r}", repr(value), expected)
