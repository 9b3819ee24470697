"""Gross faults: a pass so wrong that the joint estimate means nothing, and which pass that is.

The linear tests of `scan` compare each pass with a field that all passes made. Where one pass has
the wrong sign or a wrong power of ten, that field is spoilt and so is everything found in it. So
each pass is left out in turn; where the others then agree among themselves, the one left out is
compared with what they say.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Literal, NamedTuple

import numpy as np
import numpy.typing as npt
from scipy import linalg

from fieldmap.errors import FieldmapError
from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.scan.leftover import excess
from fieldmap.estimate.findings.scan.scores import Scores
from fieldmap.estimate.findings.scan.signatures import field_steps
from fieldmap.estimate.findings.scan.suspects import Suspect
from fieldmap.estimate.findings.scan.words import suspect_finding
from fieldmap.estimate.findings.stated import departures
from fieldmap.estimate.findings.thresholds import beyond_chance, rarity
from fieldmap.estimate.model import PassModel
from fieldmap.estimate.noise import total
from fieldmap.estimate.parameters import drift_sd

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from fieldmap.estimate.line_fit import LineFit
    from fieldmap.estimate.variance import NoiseLevel
    from fieldmap.readings.passes import Pass

__all__ = ["blamed", "grossly_wrong"]

Floats = npt.NDArray[np.float64]

ABSURD = 30.0  # standard uncertainties that no stated value is off by, with readings that are right
CLEAR = 12.0  # … and that a factor of a pass must show with
LARGE = 0.1  # how far a factor must be from one to be gross
WELL = 2.0  # mean square of the residuals up to which a fault explains a pass …
NEARLY = 1e-3  # … or what it may leave of all the disagreement
STEPS = 12  # towards the factor or the shift that fits
TRIED = 8  # passes that are left out in turn
PLACES = 41  # that the search for a shift starts from
AGREE = 6.0  # standard uncertainties within which passes agree among themselves


def grossly_wrong(fit: LineFit) -> bool:
    """Whether a fit is spoilt by a gross fault, so that finer knots would only follow it.

    Parameters
    ----------
    fit : LineFit
        The line.

    Returns
    -------
    bool
    """
    if fit.solved is None:
        return False
    if np.abs(departures(fit)).max(initial=0.0) > ABSURD:
        return True
    scores = Scores(fit.solved)
    for number in range(len(fit.passes)):
        column = field_steps(fit.solved, number, fit.solved.state.b)[:, None]
        score = scores.test(number, column)
        if abs(score.normal[0]) > CLEAR and abs(score.amount[0]) > LARGE:
            return True
    return False


class _Without(NamedTuple):
    """The others without one pass, and how far they are from agreeing."""

    unease: float
    fit: LineFit


def blamed(
    passes: Sequence[Pass],
    refit: Callable[[list[Pass]], LineFit],
    spoilt: LineFit | None = None,
) -> list[Finding]:
    """The pass without which all others agree, if there is one.

    Parameters
    ----------
    passes : sequence of Pass
        Of the line.
    refit : callable
        Fits the line from some of its passes.
    spoilt : LineFit, optional
        The line with all its passes, where it could be solved; those that fit worst are tried.

    Returns
    -------
    list of Finding
        What is wrong with that pass; empty where none can be named.
    """
    worst = list(range(len(passes)))
    if spoilt is not None:
        misfit = [p.square / max(p.freedom, 1.0) for p in spoilt.passes]
        worst = np.argsort(misfit)[::-1].tolist()
    tried = {number: _without(passes, number, refit) for number in worst[:TRIED]}
    told = {number: one for number, one in tried.items() if one is not None}
    odd = min(told, key=lambda number: told[number].unease, default=None)
    if odd is None or told[odd].unease > AGREE:
        return []
    return _odd_one(passes, odd, _Compared(told[odd].fit, passes[odd]))


def _odd_one(passes: Sequence[Pass], number: int, compared: _Compared) -> list[Finding]:
    """What is wrong with a pass that all others agree without; empty if it agrees as well."""
    outcomes: dict[Literal["factor", "shift"], _Outcome] = {"factor": compared.factor()}
    if outcomes["factor"].left > compared.explained:
        outcomes["shift"] = compared.shift()
    kind, best = min(outcomes.items(), key=lambda one: one[1].left)
    suspect = Suspect(kind, (number,), best.amount, best.u, best.amount / best.u, CLEAR)
    if best.left <= compared.explained:
        return [suspect_finding(suspect, passes)] if abs(suspect.normal) > CLEAR else []
    text = (
        "it disagrees with all other passes "
        f"({beyond_chance(compared.disagreement, CLEAR)}), which agree among themselves without "
        "it; look for another magnet, line or probe, or a fault within it, and take it out or "
        "again."
    )
    return [Finding("overlaps-disagree", "warn", passes[number].name, text)]


def _without(
    passes: Sequence[Pass], number: int, refit: Callable[[list[Pass]], LineFit]
) -> _Without | None:
    """Leave one pass out; None where the others do not determine the line."""
    others = [one for i, one in enumerate(passes) if i != number]
    if not others:
        return None
    try:
        fit = refit(others)
    except (FieldmapError, np.linalg.LinAlgError):
        return None
    sizes = [excess(p.square, max(p.freedom, 1.0)) for p in fit.passes]
    unease = max(float(np.abs(departures(fit)).max(initial=0.0)), *sizes)
    return _Without(unease, fit)


class _Outcome(NamedTuple):
    """Size of a fault, its standard uncertainty, and the χ² that it leaves."""

    amount: float
    u: float
    left: float


class _Compared:
    """A pass against a field that it had no part in, its own drift left open."""

    def __init__(self, fit: LineFit, one: Pass) -> None:
        assert fit.solved is not None
        self.fit, self.solved, self.one = fit, fit.solved, one
        self.spread, self.noise = self._spreads()
        _, off = self._made_and_off(self._model())
        whole = self._outcome(np.zeros_like(off), off).left
        self.explained = max(WELL * len(off), NEARLY * whole)
        self.disagreement = rarity(whole, len(off))

    def factor(self) -> _Outcome:
        """As if its flux were some times what it should be, followed to where it fits."""
        best, times = _Outcome(0.0, np.inf, np.inf), 1.0
        for _ in range(STEPS):
            made, off = self._made_and_off(self._model(divisor=times))
            step = self._outcome(made, off, max(1.0, 1 / abs(times)))
            if step.left >= best.left or not np.isfinite(step.u):
                break
            best = _Outcome(times * (1 + step.amount) - 1, abs(times) * step.u, step.left)
            times *= 1 + step.amount
            if abs(step.amount) < step.u or not times:
                break
        return best

    def shift(self) -> _Outcome:
        """As if its positions were too small by a length, followed to where it fits."""
        reach = float(np.ptp(self.one.position)) / 4
        tried = np.linspace(-reach, reach, PLACES)
        placed = float(tried[np.argmin([self._shifted(by).left for by in tried.tolist()])])
        best = _Outcome(0.0, np.inf, np.inf)
        for _ in range(STEPS):
            step = self._shifted(placed)
            if step.left >= best.left:
                break
            placed += step.amount
            best = _Outcome(placed, step.u, step.left)
        return best

    def _shifted(self, shift: float) -> _Outcome:
        """What is still to be added to a shift."""
        model = self._model(shift=shift)
        _, off = self._made_and_off(model)
        swing = model.gain(self.solved.state) * (model.slope @ self.solved.state.b)
        return self._outcome(np.diff(swing), off)

    def _model(self, *, shift: float = 0.0, divisor: float = 1.0) -> PassModel:
        """The pass otherwise placed or sized, in the bins that it has as it was read."""
        spline, one = self.fit.spline, self.one
        beyond = one.probe.extent / 2 + spline.spacing
        placed = np.clip(one.position + shift, spline.start + beyond, spline.stop - beyond)
        applied = placed - one.position
        moved = replace(one, flux=one.flux / divisor)
        model = PassModel(moved, spline, self.solved.models[0].nominal_current, applied)
        model.applied = np.zeros_like(model.applied)  # a fault, no correction to be undone
        return model

    def _made_and_off(self, model: PassModel) -> tuple[Floats, Floats]:
        """Increments that the field makes, and what was read beyond all that is known."""
        rows = model.rows(self.solved.state, self.solved.frame)
        made = rows.design[:, : self.fit.spline.size] @ self.solved.state.b
        return np.asarray(made), np.asarray(rows.target - rows.design @ self.solved.values)

    def _outcome(self, column: Floats, off: Floats, louder: float = 1.0) -> _Outcome:
        """Size of one signature, for noise so many times louder than that of the others.

        Noise that was read before a wrong unit grew with it; so it is never taken as quieter.
        """
        try:
            factored = linalg.cho_factor(self.spread + louder**2 * self.noise)
        except np.linalg.LinAlgError:
            return _Outcome(0.0, np.inf, np.inf)
        weighed = linalg.cho_solve(factored, np.column_stack([column, off]))
        information, pushed = column @ weighed
        square = float(off @ weighed[:, 1])
        if not information > 0:
            return _Outcome(0.0, np.inf, square)
        amount = float(pushed / information)
        return _Outcome(amount, float(information) ** -0.5, square - amount * float(pushed))

    def _spreads(self) -> tuple[Floats, Floats]:
        """Covariance of the increments by the field, and by noise and any drift of the pass."""
        solved, model = self.solved, self._model()
        rows = model.rows(solved.state, solved.frame)
        half = solved.half_spread(rows.design.toarray().T)
        drift = drift_sd(self.one) * np.diff(model.bins.time)
        level = _level(self.fit, self.one)
        noise = total(model.noise(solved.state, level.walk, level.read, solved.jitter))
        return half.T @ half, np.asarray(noise @ np.eye(len(drift)) + np.outer(drift, drift))


def _level(fit: LineFit, one: Pass) -> NoiseLevel:
    """Noise of the pass as the others of its integrator show it."""
    like = [p.level for p in fit.passes if p.one.integrator == one.integrator]
    return (like or [p.level for p in fit.passes])[0]
