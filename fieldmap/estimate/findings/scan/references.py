"""Whether each absolute reference agrees with the passes and the other references."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.scan.scores import LEAST_LEFT
from fieldmap.estimate.findings.thresholds import beyond, beyond_chance
from fieldmap.readings.passes import FlipReference, PointReference

if TYPE_CHECKING:
    from fieldmap.estimate.solved import Solved
    from fieldmap.readings.passes import Reference

__all__ = ["contradictions", "reference_findings"]

ALIKE = 1.01
Floats = npt.NDArray[np.float64]


def contradictions(solved: Solved) -> Floats:
    """What each reference is off by, in standard uncertainties of that: unit normals by chance.

    Parameters
    ----------
    solved : Solved
        The line.

    Returns
    -------
    (k,) array
        Zero for a reference that nothing else checks.
    """
    rows = solved.linearised.references
    if not len(rows.target):
        return np.zeros(0)
    off = rows.target - rows.design @ solved.values
    left = 1 - np.square(solved.half_spread(rows.design.toarray().T)).sum(axis=0)
    told = left > LEAST_LEFT
    return np.where(told, off / np.sqrt(np.where(told, left, 1.0)), 0.0)


def reference_findings(solved: Solved, known: float) -> list[Finding]:
    """A warning for the reference that is farthest from what the rest says.

    Parameters
    ----------
    solved : Solved
        The line.
    known : float
        Standard uncertainties that the worst of the stated values is off by. Where only that and
        the reference disagree, both are off alike, and the stated value is named.

    Returns
    -------
    list of Finding
        One at most: the others are pulled by it.
    """
    off = contradictions(solved)
    if not len(off):
        return []
    worst = int(np.argmax(np.abs(off)))
    allowed = beyond(len(off))
    if abs(off[worst]) <= max(allowed, ALIKE * known):
        return []
    text = (
        "it is not what the passes and the other references give "
        f"({beyond_chance(float(off[worst]), allowed)}); check its value, position and unit, and "
        "the probes' sizes."
    )
    return [Finding("reference-contradicted", "warn", _named(solved.references[worst]), text)]


def _named(reference: Reference) -> str:
    """Kind and place of a reference."""
    if isinstance(reference, PointReference):
        return f"point reference at {reference.at * 1e3:.6g} mm"
    if isinstance(reference, FlipReference):
        return f"flip reference at {reference.at * 1e3:.6g} mm"
    return f"zero reference from {reference.start * 1e3:.6g} to {reference.stop * 1e3:.6g} mm"
