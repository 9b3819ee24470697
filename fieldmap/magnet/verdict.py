"""Decision of a result against its limits, after JCGM 106:2012."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    from fieldmap.magnet.quantity import Quantity
    from fieldmap.readings.passes import Limit

__all__ = ["Verdict", "conformity", "decide", "guard_band"]

Decision = Literal["accept", "reject", "undecided"]


@dataclass(frozen=True)
class Verdict:
    """One decision.

    Parameters
    ----------
    result : str
        Key of the result.
    line : int
        Index of the line.
    decision : {"accept", "reject", "undecided"}
        Accept when the value keeps a guard band's distance from the limits within them, reject
        when it does so outside them, otherwise undecided.
    probability : float
        Probability that the true value conforms.
    band : float, optional
        Width of the guard band at each limit, SI.
    """

    result: str
    line: int
    decision: Decision
    probability: float
    band: float | None = None

    def as_dict(self) -> dict[str, Any]:
        """The form used in results.json."""
        return {
            "result": self.result,
            "line": self.line,
            "decision": self.decision,
            "probability": self.probability,
        }


def conformity(value: float, u: float, lower: float | None, upper: float | None) -> float:
    """Probability that a normally distributed value lies within the limits.

    Parameters
    ----------
    value, u : float
        Estimate and its standard uncertainty.
    lower, upper : float or None
        Limits, None for an open side; same unit.

    Returns
    -------
    float

    Examples
    --------
    >>> round(conformity(-5.47, 0.05, None, -5.40), 3)
    0.919

    Notes
    -----
    Source: JCGM 106:2012, 7.2 to 7.4.
    """
    if u == 0:
        low, high = -math.inf if lower is None else lower, math.inf if upper is None else upper
        return float(low <= value <= high)
    return _below(value, u, upper, always=1.0) - _below(value, u, lower, always=0.0)


def _below(value: float, u: float, limit: float | None, always: float) -> float:
    """Probability of lying below a limit; `always` where there is none."""
    if limit is None:
        return always
    return 0.5 * math.erfc((value - limit) / (u * math.sqrt(2)))


def decide(limit: Limit, quantity: Quantity, line: int = 0, k: float = 2.0) -> Verdict:
    """Decide one result against its limit.

    Parameters
    ----------
    limit : Limit
        Lower and upper limit, guard band.
    quantity : Quantity
        The result.
    line : int
        Index of the line, kept in the verdict.
    k : float
        Coverage factor, where the limit names none.

    Returns
    -------
    Verdict

    Notes
    -----
    Source: JCGM 106:2012, 8.3: a guard band w = guard·k·u shrinks the limits to the acceptance
    interval; the same band outside the limits is where nothing is rejected yet. With guard 1 the
    whole interval value ± k·u lies within the limits, or outside them; with guard 0 the value
    alone decides, and nothing is undecided.

    Examples
    --------
    >>> from fieldmap.magnet.quantity import Quantity
    >>> from fieldmap.readings.passes import Limit
    >>> length = Quantity(0.38055, 5e-5, "m")
    >>> decide(Limit("magnetic_length", 0.3805, 0.3815), length).decision
    'undecided'
    >>> decide(Limit("magnetic_length", 0.3805, 0.3815, guard=0.0), length).decision
    'accept'
    """
    band = guard_band(limit, quantity.u, k)
    low, high = quantity.value - band, quantity.value + band
    lower = -math.inf if limit.lower is None else limit.lower
    upper = math.inf if limit.upper is None else limit.upper
    decision: Decision = "undecided"
    if lower <= low and high <= upper:
        decision = "accept"
    elif high < lower or low > upper:
        decision = "reject"
    chance = conformity(quantity.value, quantity.u, limit.lower, limit.upper)
    return Verdict(limit.result, line, decision, chance, band)


def guard_band(limit: Limit, u: float, k: float = 2.0) -> float:
    """Width of the guard band at a limit, for a standard uncertainty of the result.

    Parameters
    ----------
    limit : Limit
        Names the band in units of U, and k where it is a special one.
    u : float
        Standard uncertainty, unit of the result.
    k : float
        Coverage factor, where the limit names none.

    Returns
    -------
    float
        guard·k·u.

    Examples
    --------
    >>> from fieldmap.readings.passes import Limit
    >>> round(guard_band(Limit("magnetic_length", 0.3805, None, k=3, guard=0.5), 2e-4), 9)
    0.0003
    """
    return limit.guard * (k if limit.k is None else limit.k) * u
