"""Run the tests of one line and say what they found."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.scan.leftover import leftovers
from fieldmap.estimate.findings.scan.references import reference_findings
from fieldmap.estimate.findings.scan.scores import Scores
from fieldmap.estimate.findings.scan.suspects import suspects
from fieldmap.estimate.findings.scan.words import suspect_finding
from fieldmap.estimate.findings.stated import departures
from fieldmap.estimate.findings.thresholds import beyond, beyond_chance

if TYPE_CHECKING:
    from fieldmap.estimate.findings.scan.leftover import Leftover
    from fieldmap.estimate.line_fit import LineFit, PassFit

__all__ = ["scan_findings"]


def scan_findings(fit: LineFit, gap: float) -> list[Finding]:
    """Warnings of a fitted line, at most one clean line in some thousand.

    Parameters
    ----------
    fit : LineFit
        The line, with what it was solved from.
    gap : float
        Full gap or bore, m.

    Returns
    -------
    list of Finding
        Single faults in the order of their weight, then what is left pass by pass.
    """
    if fit.solved is None:
        return []
    scores = Scores(fit.solved)
    passes = [one.one for one in fit.passes]
    found = [suspect_finding(suspect, passes) for suspect in suspects(scores)]
    if found:
        return found  # what they leave over follows from them as often as not
    left = leftovers(fit, scores, gap)
    for one, leftover in zip(fit.passes, left, strict=True):
        found += _left(one, leftover, beyond(len(left)))
    known = float(np.abs(departures(fit)).max(initial=0.0))
    return found + reference_findings(fit.solved, known)


def _left(one: PassFit, leftover: Leftover, threshold: float) -> list[Finding]:
    """What is said of the residuals of one pass: the gravest only."""
    name = one.one.name
    if leftover.shape > threshold:
        text = (
            "its field has a shape of its own beside the other passes "
            f"({beyond_chance(leftover.shape, threshold)}); look for another magnet, current, "
            "probe or line, and compare it with its neighbours in the figure of overlaps."
        )
        return [Finding("overlaps-disagree", "warn", name, text)]
    if leftover.size > threshold:
        cause = "than one noise level for all passes explains" if one.level.open else "than stated"
        text = (
            f"residuals are {leftover.factor:.2f} times larger {cause} "
            f"({beyond_chance(leftover.size, threshold)}); look for spikes, jumps, pick-up, a "
            "wrong probe or a pass that disagrees with its neighbours."
        )
        return [Finding("residuals-too-large", "warn", name, text)]
    if abs(leftover.correlation) > threshold:
        text = (
            "neighbouring residuals hang together "
            f"({beyond_chance(leftover.correlation, threshold)}): they are no noise; look for "
            "pick-up, jumps, positions that come late, or a gap in [magnet] that is too large for "
            "the knots."
        )
        return [Finding("residuals-not-white", "warn", name, text)]
    if leftover.size < -threshold and not one.level.open:
        text = (
            f"residuals are only {leftover.factor:.2f} of what the stated noise gives; the stated "
            "noise levels may be too large, and so the uncertainties."
        )
        return [Finding("residuals-too-small", "note", name, text)]
    return []
