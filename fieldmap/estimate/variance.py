"""Noise levels that the campaign file leaves open, by restricted maximum likelihood.

Sources: H. D. Patterson & R. Thompson, Biometrika 58, 545 (1971); A. R. Gilmour, R. Thompson
& B. R. Cullis, Biometrics 51, 1440 (1995) for the average-information step.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.model import dense_columns
from fieldmap.estimate.noise import Tridiagonal, read_part
from fieldmap.estimate.resolution import counted_step

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.model import PassModel, Rows

__all__ = ["NoiseLevel", "improve_levels", "initial_level"]

Floats = npt.NDArray[np.float64]

LONGEST_STEP = 1.5  # of the logarithm of a variance, in one round
TINY = 1e-30  # of a curvature: where no pass tells of a level, it stays
NOTHING = 1e-15  # V s: stands for the rounding of readings that are all alike
QUIETEST = 1e-3  # a level this small beside its start no longer matters


@dataclass(frozen=True)
class NoiseLevel:
    """Noise of one integrator in one kind of record.

    Parameters
    ----------
    walk : float
        V s per root second.
    read : float
        V s.
    walk_known, read_known : bool
        Whether the campaign file states it.
    quietest : float
        Least read noise that rounding lets one tell, V s.
    """

    walk: float
    read: float
    walk_known: bool
    read_known: bool
    quietest: float = 0.0

    @property
    def open(self) -> bool:
        """Whether anything is left to estimate."""
        return not (self.walk_known and self.read_known)

    def close_to(self, other: NoiseLevel) -> bool:
        """Whether both levels agree to a hundredth."""
        return math.isclose(self.walk, other.walk, rel_tol=0.01) and math.isclose(
            self.read, other.read, rel_tol=0.01
        )


@dataclass(frozen=True, eq=False)
class Fitted:
    """One pass at the present solution: its rows, covariance and residuals."""

    model: PassModel
    rows: Rows
    covariance: Tridiagonal
    residual: Floats


def initial_level(models: Sequence[PassModel]) -> NoiseLevel:
    """Stated levels, or a first guess from the third differences of the bin means.

    Parameters
    ----------
    models : sequence of PassModel
        Passes of one integrator and one kind of record.

    Returns
    -------
    NoiseLevel
    """
    integrator, record = models[0].one.integrator, models[0].one.record
    rough, quietest = _roughness(models)
    pace = sum(float(np.ptp(m.bins.time)) for m in models) / sum(len(m.bins.time) for m in models)
    count = float(np.mean(np.concatenate([m.bins.count for m in models])))
    found = max(counted_step(model.one) / model.scale for model in models)
    steps = max(integrator.resolution, found) / np.sqrt(12)
    walk, read = integrator.walk_noise, integrator.read_noise
    if record == "voltage":
        read = 0.0  # the samples' noise is white voltage: a walk of the integral
    return NoiseLevel(
        walk=rough / np.sqrt(pace) if walk is None else float(walk),
        read=rough * np.sqrt(count) if read is None else math.hypot(read, steps, quietest / 10),
        walk_known=walk is not None,
        read_known=read is not None,
        quietest=quietest,
    )


def _roughness(models: Sequence[PassModel]) -> tuple[float, float]:
    """Noise of a bin mean by its third differences, and the least noise that can be told (V s).

    Exact readings have digits too: below a part in 1e8 of the flux, a fit sees rounding.
    """
    span = max(float(np.ptp(model.bins.flux)) / model.scale for model in models)
    quietest = 1e-8 * span or NOTHING
    bends = np.concatenate([np.diff(model.bins.flux, 3) / model.scale for model in models])
    typical = float(np.median(np.abs(bends))) if len(bends) else 0.0
    return max(typical / np.sqrt(20) / 0.6745, quietest), quietest


def improve_levels(
    level: NoiseLevel, start: NoiseLevel, fitted: Sequence[Fitted], covariance: Floats
) -> NoiseLevel:
    """One average-information step on the open noise levels.

    Parameters
    ----------
    level, start : NoiseLevel
        Present levels, and those of the first round.
    fitted : sequence of Fitted
        The passes that share the levels.
    covariance : (p, p) array
        Covariance of all unknowns.

    Returns
    -------
    NoiseLevel
    """
    names = [
        n for n, known in (("walk", level.walk_known), ("read", level.read_known)) if not known
    ]
    score, curvature = np.zeros(len(names)), np.zeros((len(names), len(names)))
    for one in fitted:
        parts = [_part(one.model, name, getattr(level, name)) for name in names]
        gained, information = _score(one, parts, covariance)
        score += gained
        curvature += information
    curvature += 1e-6 * np.trace(curvature) * np.eye(len(names)) + TINY * np.eye(len(names))
    step = np.clip(np.linalg.solve(curvature, score), -LONGEST_STEP, LONGEST_STEP)
    changed = {
        name: max(getattr(level, name) * np.exp(d / 2), QUIETEST * getattr(start, name))
        for name, d in zip(names, step.tolist(), strict=True)
    }
    changed["read"] = max(changed.get("read", level.read), level.quietest / 10)
    if not level.read_known:
        changed["read"] = max(changed["read"], level.quietest)
    return replace(level, **changed)


def _part(model: PassModel, name: str, value: float) -> Tridiagonal:
    """Share of one noise level in the covariance: its derivative by the log of the variance."""
    if name == "walk":
        return value**2 * model.walk
    return read_part(model.bins, np.full(len(model.bins.count), (model.scale * value) ** 2))


def _score(one: Fitted, parts: Sequence[Tridiagonal], covariance: Floats) -> tuple[Floats, Floats]:
    """Gradient and average information of the restricted likelihood of one pass."""
    used, design = dense_columns(one.rows.design)
    block = covariance[np.ix_(used, used)]
    solved = one.covariance.solve(np.column_stack([design, one.residual]))
    design_solved, weighed = solved[:, :-1], solved[:, -1]
    main, off = one.covariance.inverse_bands()
    spread = design_solved @ block
    score = np.empty(len(parts))
    pushes = np.empty((len(one.residual), len(parts)))
    for k, part in enumerate(parts):
        trace = float(main @ part.diagonal + 2 * off @ part.off)
        shared = float(np.vdot(spread, part @ design_solved))
        pushes[:, k] = part @ weighed
        score[k] = 0.5 * (float(weighed @ pushes[:, k]) - trace + shared)
    pulled = one.covariance.solve(pushes)
    inner = design.T @ pulled
    return score, 0.5 * (pushes.T @ pulled - inner.T @ block @ inner)
