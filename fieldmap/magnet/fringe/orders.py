"""Which order of the Enge curve the readings support: by its evidence.

The evidence of an order is the probability of the readings under it, with every coefficient taken
as normal about zero before the scan. Laplace's formula gives it from the best fit: a coefficient
that the readings hardly need costs more than it gains.

Where no curve explains the readings, the true field is taken to depart from the curve by a random
function of a size that makes up for the excess: then the curve runs through the middle of the
profile, and the uncertainties of the coefficients allow for the misfit.

Sources: D. J. C. MacKay, Neural Comput. 4, 415 (1992); the size of the departure is the one that
brings chi-square to its expectation: R. C. Paule & J. Mandel, J. Res. NBS 87, 377 (1982).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.magnet.fringe.fit import Solution, first_curve, fit_curves

if TYPE_CHECKING:
    from fieldmap.magnet.fringe.fit import Stretch
    from fieldmap.magnet.fringe.information import Whitened

__all__ = ["HIGHEST", "POOR", "TURNS", "Trial", "departures", "probability", "try_orders"]

Floats = npt.NDArray[np.float64]

HIGHEST: Final = 7
SPREAD: Final = 3.0  # of a coefficient before the scan: published ones are of this size
POOR: Final = 1e-4  # chance below which a curve does not explain the readings
REACH: Final = 0.5  # gaps over which a departure from the curve changes
ROUNDS: Final = 3  # that find its size
LOOSE: Final = 1e-2  # of the field inside: departures that a search for their size starts with
CLOSE: Final = 1e-4  # of the field inside: departures that a search without them starts with
HOPELESS: Final = 1e-12  # chance of chi-square with those, below which none without is looked for
TURNS: Final = "it does not fall from full field to none"


@dataclass(frozen=True, eq=False)
class Trial:
    """One order, tried.

    Parameters
    ----------
    order : int
        Highest power.
    chi_square : float
        Misfit of this end in excess of the free profile's.
    evidence : float
        Natural logarithm of the probability of the readings, up to a constant; -inf if the
        curve was discarded.
    remark : str
        Why it was discarded; empty if it was not.
    parameters : (order + 2,) array
        B0 in units of the stretch's level, then the coefficients about its origin.
    departure : float
        Standard deviation of the true field about the curve that was allowed for, T.
    """

    order: int
    chi_square: float
    evidence: float
    remark: str
    parameters: Floats
    departure: float = 0.0

    def as_dict(self) -> dict[str, float | int | str | None]:
        """The form used in results.json."""
        return {
            "order": self.order,
            "chi_square": self.chi_square,
            "evidence": None if self.remark else self.evidence,
            "remark": self.remark,
        }


def probability(chi_square: float, freedom: int) -> float:
    """Chance that a chi-square is at least so large."""
    from scipy.special import gammaincc

    return float(gammaincc(freedom / 2, chi_square / 2))


def departures(stretch: Stretch) -> Floats:
    """Correlation of departures from the curve between the coefficients of a stretch."""
    apart = np.abs(np.subtract.outer(stretch.indices, stretch.indices)) * stretch.spline.spacing
    return np.asarray(np.exp(-apart / (REACH * stretch.gap)))


def try_orders(
    information: Whitened, stretch: Stretch, factor: Floats, order: int | None
) -> tuple[Trial, ...]:
    """Fit the orders from 1 on to one end.

    Parameters
    ----------
    information : Whitened
        On the coefficients of the stretch.
    stretch : Stretch
        The end.
    factor : array
        What the other end multiplies the field by, at the stretch's points.
    order : int or None
        Last order, the one to be used; all if not given, until two more are no better.

    Returns
    -------
    tuple of Trial
        By order; as many as there are information for. With departures from the curve if no
        curve explains the readings.
    """
    freedom = len(information.target)
    trials = _Orders(information, stretch, factor, departs=False).run(order)
    chosen = trials[-1] if order else max(trials, key=lambda trial: trial.evidence)
    if probability(chosen.chi_square, freedom - len(chosen.parameters)) >= POOR:
        return trials
    return _Orders(information, stretch, factor, departs=True).run(order)


class _Orders:
    """Fits of growing order to one end, with or without departures from the curve."""

    def __init__(
        self, information: Whitened, stretch: Stretch, factor: Floats, *, departs: bool
    ) -> None:
        self.information, self.stretch, self.factor = information, stretch, factor
        self.departs = departs
        self.kernel = departures(stretch)
        slack = (LOOSE if departs else CLOSE) * stretch.level
        self.loosened = information.widened(slack**2 * self.kernel)
        if departs:
            spread = information.rows @ self.kernel @ information.rows.T
            self.spread, self.basis = np.linalg.eigh(spread)

    def run(self, order: int | None) -> tuple[Trial, ...]:
        """Try one order after the other."""
        trials: list[Trial] = []
        for number in range(1, (order or HIGHEST) + 1):
            if number + 2 >= len(self.information.target):
                break
            if self.departs and number % 2 == 0 and number != order:
                continue  # nearly all of these turn round inside the magnet
            trials.append(self._judged(*self._fitted(number)))
            if order is None and self._enough(trials):
                break
        return tuple(trials)

    def _enough(self, trials: list[Trial]) -> bool:
        """Whether the readings are explained and two more orders have been no better."""
        best = max(trials, key=lambda trial: trial.evidence)
        freedom = len(self.information.target) - len(best.parameters)
        explained = probability(best.chi_square, freedom) >= POOR
        return explained and len(trials) >= best.order + 2 and not best.remark

    def _fitted(self, order: int) -> tuple[Solution, float]:
        """The best curve of an order, and the variance of departures from it."""
        solution = self._fit(self.loosened, first_curve(self.stretch, order, self.factor))
        if not self.departs:
            # without departures the misfit is larger yet
            freedom = len(self.information.target) - order - 2
            if probability(solution.chi_square, freedom) > HOPELESS:
                solution = self._fit(self.information, solution.parameters[0])
            return solution, 0.0
        for _ in range(ROUNDS):
            variance = self._variance(solution)
            used = self.information.widened(variance * self.kernel)
            solution = self._fit(used, solution.parameters[0])
        return solution, variance

    def _fit(self, information: Whitened, start: Floats) -> Solution:
        return fit_curves(information, [self.stretch], [start], [self.factor])

    def _variance(self, solution: Solution) -> float:
        """Variance of the departures that brings chi-square to its expectation, T²."""
        residual = self.information.target - self.information.rows @ solution.values
        squares = (self.basis.T @ residual) ** 2
        freedom = len(residual) - len(solution.parameters[0])
        if squares.sum() <= freedom:
            return 0.0
        low, high = -30.0, 2.0 * np.log(abs(self.stretch.level))
        for _ in range(60):
            middle = 0.5 * (low + high)
            excess = (squares / (1 + np.exp(middle) * np.maximum(self.spread, 0))).sum() > freedom
            low, high = (middle, high) if excess else (low, middle)
        return float(np.exp(high))

    def _judged(self, solution: Solution, variance: float) -> Trial:
        remark = ""
        if not solution.converged:
            remark = "no best curve found"
        elif not solution.curve(0).is_fringe(*self.stretch.reach()):
            remark = TURNS
        evidence, chi_square = -np.inf, self.information.misfit(solution.values)
        if not remark:
            evidence = _log_evidence(solution)
            if self.departs:
                evidence -= 0.5 * float(np.log1p(variance * np.maximum(self.spread, 0)).sum())
            else:
                evidence -= 0.5 * (chi_square - solution.chi_square)
        return Trial(
            order=solution.curve(0).order,
            chi_square=chi_square,
            evidence=evidence,
            remark=remark,
            parameters=solution.parameters[0],
            departure=float(np.sqrt(variance)),
        )


def _log_evidence(solution: Solution) -> float:
    coefficients = solution.parameters[0][1:]
    prior = -0.5 * float(coefficients @ coefficients) / SPREAD**2
    prior -= len(coefficients) * np.log(SPREAD)
    # the factors of 2π of prior and posterior cancel
    return float(-0.5 * solution.chi_square + prior + 0.5 * _log_determinant(solution.covariance))


def _log_determinant(covariance: Floats) -> float:
    scale = np.sqrt(np.diagonal(covariance))
    values = np.linalg.eigvalsh(covariance / np.outer(scale, scale))
    tiny = np.finfo(float).tiny
    return float(2 * np.log(scale).sum() + np.log(np.maximum(values, tiny)).sum())
