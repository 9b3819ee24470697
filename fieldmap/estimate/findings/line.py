"""What a fit says about the readings it was made from, in sentences with numbers."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.scan import scan_findings
from fieldmap.estimate.findings.stated import contradicted, trusted

if TYPE_CHECKING:
    from fieldmap.estimate.line_fit import LineFit
    from fieldmap.readings.passes import Pass
    from fieldmap.readings.probe import Stage

__all__ = ["line_findings"]

SHARE_WORTH_A_WORD = 0.75  # of the variance of the level


def line_findings(
    fit: LineFit,
    low: float,
    high: float,
    stage: Stage,
    gap: float,
    *,
    scanned: bool = True,
    finer: LineFit | None = None,
) -> list[Finding]:
    """Remarks on one fitted line.

    Parameters
    ----------
    fit : LineFit
        The fit.
    low, high : float
        Ends of the mapped range, m.
    stage : Stage
        Position uncertainties as stated.
    gap : float
        Full gap or bore diameter, m.
    scanned : bool
        Look for what is wrong with the readings; not where one gross fault explains it all.
    finer : LineFit, optional
        The same on finer knots, where that was solved: what only the coarser one shows is no
        fault of the readings.

    Returns
    -------
    list of Finding
    """
    found = _wrong(fit, gap) if scanned else []
    if found and finer is not None:
        found = _wrong(finer, gap)
    found += [finding for one in fit.passes for finding in _sampling(one.one, gap)]
    found += _drift(fit, low, high)
    found += trusted(fit)
    if fit.passes and stage.u_lag == 0 and stage.u_position == 0:
        found.append(
            Finding(
                "stage-certain",
                "note",
                "[stage]",
                "no lag and no position jitter is stated, so positions are taken as exact; "
                "state u_position and u_lag if they are not.",
            )
        )
    return found


def _wrong(fit: LineFit, gap: float) -> list[Finding]:
    """What the readings show to be wrong with themselves or with what is stated."""
    return [*scan_findings(fit, gap), *contradicted(fit)]


def _sampling(one: Pass, gap: float) -> list[Finding]:
    """Readings too far apart for the fringe, and a window too long for it."""
    found = []
    apart = float(np.abs(np.diff(one.position)).max())
    if apart > gap / 3:
        text = (
            f"readings lie up to {apart * 1e3:.3g} mm apart, more than a third of the gap "
            f"({gap * 1e3:.3g} mm): the fringe between them is guessed; scan slower or record "
            "at a higher rate."
        )
        found.append(Finding("sampling-too-coarse", "warn", one.name, text))
    if one.probe.extent > 1.5 * gap:
        text = (
            f"the window of {one.probe.extent * 1e3:.3g} mm is longer than 1.5 gaps "
            f"({gap * 1e3:.3g} mm): the fringe is smeared; use a shorter coil there."
        )
        found.append(Finding("window-too-long", "warn", one.name, text))
    return found


def _drift(fit: LineFit, low: float, high: float) -> list[Finding]:
    """Whether the mean field rests on drifts that the readings cannot tell."""
    size = fit.spline.size
    drifts = [size + i for i, u in enumerate(fit.unknowns) if u.kind == "drift"]
    if not drifts:
        return []
    row = fit.spline.integral_row(low, high)
    spread = fit.covariance[:size, :size] @ row
    variance = float(row @ spread)
    shared = fit.covariance[np.ix_(drifts, range(size))] @ row
    block = fit.covariance[np.ix_(drifts, drifts)]
    share = float(shared @ np.linalg.solve(block, shared)) / variance
    if share < SHARE_WORTH_A_WORD:
        return []
    u = np.sqrt(variance) / (high - low)
    return [
        Finding(
            "drift-not-separated",
            "warn",
            "",
            f"{share:.0%} of the variance of the mean field (u = {u:.2g} T) comes from integrator "
            "drift; a dwell at each end, a pass back or an absolute reference would separate them.",
        )
    ]
