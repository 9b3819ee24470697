"""What trials of the whole chain say of a stated uncertainty."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.magnet.monte_carlo import coverage_interval

if TYPE_CHECKING:
    from fieldmap.magnet.quantity import Quantity

__all__ = ["CHANCE", "Confirmation", "Confirmed", "confirmed"]

Floats = npt.NDArray[np.float64]

CHANCE: Final = 1e-3  # of a right figure being called wrong
K: Final = 2.0


@dataclass(frozen=True)
class Confirmed:
    """One result: the linear figure and what the trials came to, SI.

    Parameters
    ----------
    key : str
        Key of the result.
    line : int
        Index of the line.
    value, u : float
        The linear estimate and its standard uncertainty.
    unit : str
        SI unit as text.
    trials : int
        Trials that gave this result.
    bias : float
        Mean error of the trials.
    sd : float
        Their standard deviation.
    interval : tuple of float
        Ends of the 95 % interval of the trials' errors.
    covered : float
        Share of the trials that err by less than 2 u.
    """

    key: str
    line: int
    value: float
    u: float
    unit: str
    trials: int
    bias: float
    sd: float
    interval: tuple[float, float]
    covered: float

    @property
    def mean(self) -> float:
        """Mean of the trials, carried to the estimate."""
        return self.value + self.bias

    @property
    def ratio(self) -> float:
        """Spread of the trials over u."""
        if self.u == 0:
            return 1.0 if self.sd == 0 else math.inf
        return self.sd / self.u

    @property
    def allowed_ratio(self) -> tuple[float, float]:
        """Ratios that chance allows for so many trials if u is right."""
        from scipy.stats import chi2

        free = self.trials - 1
        low, high = (float(chi2.ppf(p, free)) / free for p in (CHANCE / 2, 1 - CHANCE / 2))
        return math.sqrt(low), math.sqrt(high)

    @property
    def allowed_bias(self) -> float:
        """Mean error that chance allows for so many trials if there is none."""
        from scipy.stats import t

        return float(t.ppf(1 - CHANCE / 2, self.trials - 1)) * self.sd / math.sqrt(self.trials)

    @property
    def unbiased(self) -> bool:
        """Whether the mean error is one that chance allows."""
        return abs(self.bias) <= self.allowed_bias

    @property
    def linear_holds(self) -> bool:
        """Whether spread and mean of the trials are those that the linear figure says."""
        low, high = self.allowed_ratio
        return low <= self.ratio <= high and self.unbiased

    @property
    def good_enough(self) -> bool:
        """Whether u is not too small: the linear figure holds, or lies on the safe side."""
        return self.ratio <= self.allowed_ratio[1] and self.unbiased

    @property
    def proposed_u(self) -> float:
        """What to use for u: the linear one where that is good enough."""
        _, high = self.allowed_ratio
        spread = self.u if self.ratio <= high else self.sd
        return spread if self.unbiased else math.hypot(spread, self.bias)

    @property
    def sentence(self) -> str:
        """The comparison in words."""
        low, high = self.allowed_ratio
        told = f"{self.trials} trials spread {self.ratio:.2f} times u"
        chance = f"where chance allows {low:.2f} to {high:.2f}"
        if not self.unbiased:
            off, allowed = self._figure(self.bias), f"{self.allowed_bias:.2g}"
            return (
                f"not good enough: {told} and lie {off} off in the mean, where chance allows "
                f"{allowed}; correct for it or use u = {self._figure(self.proposed_u)} instead."
            )
        if self.ratio > high:
            instead = self._figure(self.proposed_u)
            return f"not good enough: {told}, {chance}; use u = {instead} instead."
        if self.ratio < low:
            return (
                f"the linear figure is on the safe side: {told}, {chance}; u may stay, since it "
                "may hold what no trial shows, such as the law of a tail."
            )
        return f"the linear figure holds: {told}, {chance}."

    def _figure(self, value: float) -> str:
        return f"{value:.2g}" if self.unit == "1" else f"{value:.2g} {self.unit}"


@dataclass(frozen=True)
class Confirmation:
    """What trials of the whole chain say of all results.

    Parameters
    ----------
    campaign : str
        Name of the campaign.
    trials : int
        Trials asked for.
    refusals : tuple of str
        Why some of them gave no result, a sentence each.
    results : tuple of Confirmed
        By line, in the order of the results.

    Notes
    -----
    ``confirmation["magnetic_length"]`` is a short cut to the first line.
    """

    campaign: str
    trials: int
    refusals: tuple[str, ...]
    results: tuple[Confirmed, ...]

    def __getitem__(self, key: str) -> Confirmed:
        for one in self.results:
            if one.key == key:
                return one
        raise KeyError(key)

    @property
    def linear_holds(self) -> bool:
        """Whether the linear figure of every result holds."""
        return all(one.linear_holds for one in self.results)

    @property
    def good_enough(self) -> bool:
        """Whether the u of every result is not too small."""
        return all(one.good_enough for one in self.results)

    @property
    def refused(self) -> str:
        """How many trials gave nothing, and why the first of them did, in words."""
        if not self.refusals:
            return f"{self.trials} trials, none refused."
        return (
            f"{self.trials} trials, {len(self.refusals)} of them refused and left out, the first "
            f"with: {self.refusals[0]}"
        )


def confirmed(key: str, line: int, stated: Quantity, errors: Floats) -> Confirmed:
    """Compare the trials' errors of one result with what is stated.

    Parameters
    ----------
    key : str
        Key of the result.
    line : int
        Index of the line.
    stated : Quantity
        The linear figure.
    errors : (n,) array
        Result of each trial less the true one, SI.

    Returns
    -------
    Confirmed

    Examples
    --------
    >>> from fieldmap.magnet.quantity import Quantity
    >>> errors = 2e-4 * np.random.default_rng(1).standard_normal(100)
    >>> confirmed("magnetic_length", 0, Quantity(0.4, 1e-4, "m"), errors).linear_holds
    False
    """
    return Confirmed(
        key=key,
        line=line,
        value=stated.value,
        u=stated.u,
        unit=stated.unit,
        trials=len(errors),
        bias=float(errors.mean()),
        sd=float(errors.std(ddof=1)),
        interval=coverage_interval(errors),
        covered=float(np.mean(np.abs(errors) <= K * stated.u)),
    )
