"""Both ends of a line fitted at once: orders, curves, and what follows with its covariance."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final, NamedTuple

import numpy as np
import numpy.typing as npt
from scipy import linalg

from fieldmap.errors import RefusedError
from fieldmap.magnet.fringe.ends import End
from fieldmap.magnet.fringe.fit import Solution, first_curve, fit_curves, own_factor
from fieldmap.magnet.fringe.information import displacing, information_on
from fieldmap.magnet.fringe.orders import TURNS, Trial, departures, try_orders

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.estimate.evidence import Evidence
    from fieldmap.magnet.fringe.fit import Stretch
    from fieldmap.magnet.fringe.information import Whitened

__all__ = ["Canonicals", "JointFit", "fit_ends", "refit"]

Floats = npt.NDArray[np.float64]
Trials = dict[End, tuple[Trial, ...]]

MATTERS: Final = 1e-6  # share of the field by which the other end must change this one's


class Canonicals(NamedTuple):
    """What is told of one end or of all.

    Parameters
    ----------
    values : (n,) array
        Of each end: coefficients about the boundary, B0 (T), boundary (m), fringe integral.
    covariance : (n, n) array
        Their covariance.
    """

    values: Floats
    covariance: Floats


@dataclass(frozen=True, eq=False)
class JointFit:
    """Curves at one or both ends of a line.

    Parameters
    ----------
    ends : tuple of str
        Which ends, in the order of the solution.
    stretches : tuple of Stretch
        Of each end.
    information : Whitened
        On the coefficients of all stretches.
    own : tuple of Whitened
        On those of each stretch, whatever the other end is like.
    shift : (2, m) array
        True less recorded position, m, as in `Evidence`, for the nuisances that the
        information ends with.
    trials : dict of str to tuple of Trial
        Orders tried at each end.
    solution : Solution
        The curves.
    """

    ends: tuple[End, ...]
    stretches: tuple[Stretch, ...]
    information: Whitened
    own: tuple[Whitened, ...]
    shift: Floats
    trials: dict[End, tuple[Trial, ...]]
    solution: Solution

    def stretch(self, end: End) -> Stretch:
        """The stretch of one end."""
        return self.stretches[self.ends.index(end)]

    def coefficients(self, end: End) -> Floats:
        """Coefficients of B on the stretch of one end that follow, T."""
        index = self.ends.index(end)
        starts = np.cumsum([0, *(len(one.indices) for one in self.stretches)])
        return self.solution.values[starts[index] : starts[index + 1]]

    def chi_square(self, end: End) -> float:
        """Misfit at one end in excess of the free profile's."""
        return self.own[self.ends.index(end)].misfit(self.coefficients(end))

    def freedom(self, end: End) -> int:
        """Coefficients resolved at one end, less parameters of its curve."""
        index = self.ends.index(end)
        return len(self.own[index].target) - len(self.solution.parameters[index])

    def departure(self, end: End) -> float:
        """Rms distance of the true field from the curve of one end that was allowed for, T."""
        order = self.solution.curve(self.ends.index(end)).order
        return next(one.departure for one in self.trials[end] if one.order == order)

    def canonical(self, end: End) -> Canonicals:
        """Values and covariance of one end."""
        found = self.canonicals()
        starts = np.cumsum([0, *(len(one) + 2 for one in self.solution.parameters)])
        index = self.ends.index(end)
        part = slice(starts[index], starts[index + 1])
        return Canonicals(found.values[part], found.covariance[part, part])

    def canonicals(self) -> Canonicals:
        """Values and covariance of all ends, one after the other."""
        parts = [self._canonical(index) for index in range(len(self.ends))]
        jacobian = np.hstack(
            [
                linalg.block_diag(*(one for _, one, _ in parts)),
                np.vstack([moved for _, _, moved in parts]),
            ]
        )
        return Canonicals(
            np.concatenate([one for one, _, _ in parts]),
            jacobian @ self.solution.covariance @ jacobian.T,
        )

    def _canonical(self, index: int) -> tuple[Floats, Floats, Floats]:
        """Values of one end at true positions.

        With their derivatives with the parameters of its curve, and with the nuisances that
        displace the recorded frame.
        """
        stretch, parameters = self.stretches[index], self.solution.parameters[index]
        found = self.solution.curve(index).canonical()
        k, to_metres = len(found.coefficients), stretch.outward * stretch.gap
        offset, growth = self.shift @ self.solution.linear
        recorded = stretch.origin + to_metres * found.boundary
        longer, powers = 1 + growth, np.arange(k)
        shrunk = longer**-powers
        values = np.concatenate(
            [
                shrunk * found.coefficients,
                [
                    parameters[0] * stretch.level,
                    longer * recorded + offset,
                    longer * found.integral,
                ],
            ]
        )
        jacobian = np.zeros((k + 3, k + 1))
        jacobian[:k, 1:] = shrunk[:, None] * found.jacobian[:k]
        jacobian[k, 0] = stretch.level
        jacobian[k + 1, 1:] = longer * to_metres * found.jacobian[k]
        jacobian[k + 2, 1:] = longer * found.jacobian[k + 1]
        stretched = np.zeros(k + 3)
        stretched[:k] = -powers * shrunk * found.coefficients
        stretched[k + 1 :] = recorded, found.integral
        moved = np.outer(stretched, self.shift[1])
        moved[k + 1] += self.shift[0]
        return values, jacobian, moved


def fit_ends(
    evidence: Evidence,
    free: Floats,
    stretches: Mapping[End, Stretch],
    orders: Mapping[End, int],
) -> tuple[JointFit | None, dict[End, RefusedError]]:
    """Choose the orders and fit the curves.

    Parameters
    ----------
    evidence : Evidence
        Of the line.
    free : (size + m,) array
        Its unknowns in the recorded frame as the map has them, without curves.
    stretches : mapping of str to Stretch
        By the end.
    orders : mapping of str to int
        Orders by the end; by the evidence where none is given.

    Returns
    -------
    fit : JointFit or None
        Of the ends that a curve was found for.
    failed : dict of str to RefusedError
        ``fringe-not-falling`` at the others, which the fit leaves free, or
        ``fringe-not-determined``.
    """
    left = dict(stretches)
    failed: dict[End, RefusedError] = {}
    while left:
        try:
            problem = _problem(evidence, free, left)
            return _fitted(problem, _tried(problem, orders), orders), failed
        except _NoCurveError as error:
            failed[error.end] = RefusedError(
                "fringe-not-falling", f"fringe_{error.end}", error.text
            )
            del left[error.end]
        except np.linalg.LinAlgError:
            return None, failed | {end: _undetermined(end) for end in left}
    return None, failed


def refit(joint: JointFit, order: int) -> JointFit:
    """The same ends with curves of one order.

    Raises
    ------
    RefusedError
        ``fringe-not-falling``: no curve of that order falls at both ends.
    """
    orders = dict.fromkeys(joint.ends, order)
    try:
        return _fitted(joint, _tried(joint, orders), orders)
    except _NoCurveError as error:
        raise RefusedError("fringe-not-falling", f"fringe_{error.end}", error.text) from error


def _undetermined(end: End) -> RefusedError:
    return RefusedError(
        "fringe-not-determined",
        f"fringe_{end}",
        "the readings do not determine the field on the fringe well enough for a curve; scan it "
        "again, with more readings for each gap travelled.",
    )


class _NoCurveError(Exception):
    """No curve was found at one end."""

    def __init__(self, end: End, order: int | None, remark: str) -> None:
        self.end = end
        which = "the best Enge curve" if order is None else f"the Enge curve of order {order}"
        self.text = (
            f"{which} that agrees with the readings is no fringe: {remark}; scan the fringe more "
            "finely, or choose a lower order."
        )


@dataclass(frozen=True, eq=False)
class _Problem:
    """Ends with what is known of them."""

    ends: tuple[End, ...]
    stretches: tuple[Stretch, ...]
    information: Whitened
    own: tuple[Whitened, ...]
    shift: Floats


def _problem(evidence: Evidence, free: Floats, stretches: Mapping[End, Stretch]) -> _Problem:
    information = information_on(evidence, [one.indices for one in stretches.values()], free)
    own, first = [], 0
    for one in stretches.values():
        last = first + len(one.indices)
        own.append(information.on(slice(first, last)))
        first = last
    shift = evidence.shift[:, displacing(evidence)]
    return _Problem(tuple(stretches), tuple(stretches.values()), information, tuple(own), shift)


def _tried(problem: _Problem | JointFit, orders: Mapping[End, int]) -> Trials:
    """All orders at every end; anew with better curves of the other end where those matter."""
    curves = [first_curve(stretch, order=1) for stretch in problem.stretches]
    trials: Trials = {}
    for index in (0, 1, 0, 1)[: 4 if len(curves) > 1 else 1]:
        end, stretch = problem.ends[index], problem.stretches[index]
        factor = np.ones(len(stretch.points()))
        for other, values in zip(problem.stretches, curves, strict=True):
            if other is not stretch:
                factor *= own_factor(other, values[1:], stretch.points())[0]
        if end not in trials or factor.min() < 1 - MATTERS:
            trials[end] = try_orders(problem.own[index], stretch, factor, orders.get(end))
            curves[index] = max(trials[end], key=lambda trial: trial.evidence).parameters
    return trials


def _fitted(problem: _Problem | JointFit, trials: Trials, orders: Mapping[End, int]) -> JointFit:
    """The joint fit with the given orders, or those of largest evidence that lead to fringes."""
    trials = dict(trials)
    while True:
        chosen = [_choice(trials[end], end, orders.get(end)) for end in problem.ends]
        excess = [
            trial.departure**2 * departures(stretch)
            for trial, stretch in zip(chosen, problem.stretches, strict=True)
        ]
        displaced = problem.shift.shape[1]
        information = problem.information.widened(
            linalg.block_diag(*excess, np.zeros((displaced, displaced)))
        )
        start = [trial.parameters for trial in chosen]
        solution = fit_curves(information, problem.stretches, start)
        wrong = _no_fringe(problem, solution)
        if wrong is None:
            return JointFit(
                ends=problem.ends,
                stretches=problem.stretches,
                information=problem.information,
                own=problem.own,
                shift=problem.shift,
                trials=trials,
                solution=solution,
            )
        index, remark = wrong
        end = problem.ends[index]
        trials[end] = _without(trials[end], chosen[index], remark)


def _no_fringe(problem: _Problem | JointFit, solution: Solution) -> tuple[int, str] | None:
    """The first stretch whose curve is no fringe, or of highest order if none is the best."""
    for index, stretch in enumerate(problem.stretches):
        if not solution.curve(index).is_fringe(*stretch.reach()):
            return index, TURNS
    if solution.converged:
        return None
    counts = [len(values) for values in solution.parameters]
    return int(np.argmax(counts)), "no best curve found together with the other end's"


def _choice(trials: Sequence[Trial], end: End, order: int | None) -> Trial:
    allowed = [trial for trial in trials if order in {None, trial.order}]
    if not allowed:
        raise _NoCurveError(end, order, "there are too few readings for so many coefficients")
    best = max(allowed, key=lambda trial: trial.evidence)
    if best.remark:
        raise _NoCurveError(end, order, best.remark)
    return best


def _without(trials: Sequence[Trial], wrong: Trial, remark: str) -> tuple[Trial, ...]:
    """The trials with one of them discarded."""
    discarded = replace(wrong, evidence=-np.inf, remark=remark)
    return tuple(discarded if trial is wrong else trial for trial in trials)
