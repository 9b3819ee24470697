"""One fault after the other: which single fault explains the readings best, and what is left then.

A big fault spoils the joint field that the passes are compared with; so once anything shows, each
pass is compared with the field that the others give.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.scan.left_out import field_without
from fieldmap.estimate.findings.scan.scores import Scores
from fieldmap.estimate.findings.scan.shared import Shared, shared_signatures
from fieldmap.estimate.findings.scan.signatures import FaultKind, pass_signatures, step_within
from fieldmap.estimate.findings.thresholds import beyond, beyond_chance

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from fieldmap.estimate.findings.scan.scores import Score
    from fieldmap.estimate.line_fit import LineFit

__all__ = ["Suspect", "faulty", "suspects"]

Floats = npt.NDArray[np.float64]

SuspectKind = FaultKind | Literal["step", "lag", "backlash", "window", "gain"]

MOST = 3  # faults that are looked for in a line: more are most often one of another kind
ALMOST = 0.995  # of the χ² of the most telling: a plainer fault explains as much …
BY_CHANCE = 30.0  # … also where it lacks so much of it
LESS_PLAIN = (
    ("backlash",),  # beside a lag, which is the same but on the ramps
    ("factor drifts", "drift bends", "drift follows temperature"),
    ("factor changes", "position slips"),
)
GROSS = 12.0  # standard uncertainties from which on the passes are compared one with the others


@dataclass(frozen=True, eq=False)
class Suspect:
    """One fault that explains the readings better than chance.

    Parameters
    ----------
    kind : str
        What is wrong.
    passes : tuple of int
        Passes concerned.
    amount, u : float
        Its size and standard uncertainty: relative, m, s or V s by the kind.
    normal : float
        Size over standard uncertainty; a unit normal by chance.
    allowed : float
        The largest that chance is taken to explain.
    reading : int
        First reading that is wrong; 0 where all are.
    """

    kind: SuspectKind
    passes: tuple[int, ...]
    amount: float
    u: float
    normal: float
    allowed: float
    reading: int = 0

    @property
    def rareness(self) -> str:
        """What triggered it, in words."""
        return beyond_chance(self.normal, self.allowed)


@dataclass(frozen=True, eq=False)
class _Trial:
    """The strongest of the signatures of one kind in one place."""

    suspect: Suspect
    columns: Mapping[int, Floats]


def suspects(scores: Scores) -> list[Suspect]:
    """Find single faults in turn, each with those before it taken in as unknowns.

    Parameters
    ----------
    scores : Scores
        Of the line; what is found is accepted into it.

    Returns
    -------
    list of Suspect
        The most telling first; empty for a clean line but once in some thousand.
    """
    found: list[Suspect] = []
    fields = [scores.solved.state.b] * len(scores.solved.models)
    shared = list(shared_signatures(scores.solved))
    for _ in range(MOST):
        best = _best(scores, fields, shared)
        if best is None:
            break
        if abs(best.suspect.normal) > GROSS and not found:
            fields = [field_without(scores.solved, n) for n in range(len(fields))]
            best = _best(scores, fields, shared) or best
        found.append(best.suspect)
        scores.accept(dict(best.columns))
    return found


def faulty(fit: LineFit) -> bool:
    """Whether a fit shows a single fault that is far beyond chance.

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
    scores = Scores(fit.solved)
    fields = [fit.solved.state.b] * len(fit.solved.models)
    best = _best(scores, fields, list(shared_signatures(fit.solved)))
    return best is not None and abs(best.suspect.normal) > GROSS


def _best(scores: Scores, fields: list[Floats], shared: list[Shared]) -> _Trial | None:
    """The most telling fault beyond its threshold; of nearly equal ones the plainest."""
    telling = [
        t for t in _trials(scores, fields, shared) if abs(t.suspect.normal) > t.suspect.allowed
    ]
    most = max((abs(trial.suspect.normal) for trial in telling), default=0.0)
    enough = ALMOST * most**2 - BY_CHANCE
    near = [trial for trial in telling if trial.suspect.normal**2 >= enough]
    return min(near, key=_plainness, default=None)


def _plainness(trial: _Trial) -> tuple[int, float]:
    """Order of preference: what holds throughout before what changes somewhere."""
    kind = trial.suspect.kind
    rank = next((i for i, kinds in enumerate(LESS_PLAIN, start=1) if kind in kinds), 0)
    return rank, -abs(trial.suspect.normal)


def _trials(scores: Scores, fields: list[Floats], shared: list[Shared]) -> Iterator[_Trial]:
    solved = scores.solved
    count = len(solved.models)
    bins = sum(len(model.bins.time) for model in solved.models)
    for number in range(count):
        steps = scores.test_steps(number)
        first = int(np.argmax(np.abs(steps.normal)))
        yield _step(scores, number, first, beyond(2 * bins))
        for signatures in pass_signatures(solved, number, fields[number]):
            if not signatures.columns.shape[1]:
                continue
            score = scores.test(number, signatures.columns)
            best = int(np.argmax(np.abs(score.normal)))
            columns = {number: signatures.columns[:, best : best + 1]}
            start = int(signatures.bins[best])
            reading = int(solved.models[number].bins.starts[start])
            threshold = beyond(count * len(score.normal))
            yield _trial(signatures.kind, (number,), score, best, threshold, columns, reading)
    for kind, columns in shared:
        score = scores.test_all(columns)
        yield _trial(kind, tuple(columns), score, 0, beyond(4), columns, 0)


def _step(scores: Scores, number: int, first: int, threshold: float) -> _Trial:
    """The step between two bins, put between the two readings where it fits best."""
    columns, readings = step_within(scores.solved, number, first)
    score = scores.test(number, columns)
    best = int(np.argmax(np.abs(score.normal)))
    chosen = {number: columns[:, best : best + 1]}
    return _trial("step", (number,), score, best, threshold, chosen, int(readings[best]))


def _trial(
    kind: SuspectKind,
    passes: tuple[int, ...],
    score: Score,
    best: int,
    threshold: float,
    columns: Mapping[int, Floats],
    reading: int,
) -> _Trial:
    amount, u, normal = (float(v[best]) for v in (score.amount, score.u, score.normal))
    return _Trial(Suspect(kind, passes, amount, u, normal, threshold, reading), columns)
