"""What a fit says about the readings it was made from, in sentences with numbers."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fieldmap.estimate.findings.finding import Finding

if TYPE_CHECKING:
    from fieldmap.estimate.fit import LineFit, PassFit
    from fieldmap.readings.passes import Pass
    from fieldmap.readings.probe import Stage

__all__ = ["line_findings"]

SHARE_WORTH_A_WORD = 0.75  # of the variance of the level
LEAST_TOLD = 0.02  # of a prior variance: where the readings tell less, they contradict nothing
RARE = 4.0  # standard deviations: about 1 clean pass in 30 000


def line_findings(fit: LineFit, low: float, high: float, stage: Stage, gap: float) -> list[Finding]:
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

    Returns
    -------
    list of Finding
    """
    found = [finding for one in fit.passes for finding in _noise(one)]
    found += [finding for one in fit.passes for finding in _sampling(one.one, gap)]
    found += _drift(fit, low, high)
    found += _contradicted(fit)
    found += _trusted(fit)
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


def _noise(one: PassFit) -> list[Finding]:
    """Residuals against the noise: stated levels are checked, estimated ones must be white."""
    square = float(one.residual @ one.residual)
    freedom = max(one.freedom, 1.0)
    # Wilson-Hilferty: the cube root of a chi-square over its freedom is close to normal
    excess = (np.cbrt(square / freedom) - (1 - 2 / (9 * freedom))) / np.sqrt(2 / (9 * freedom))
    stated = one.level.walk_known or one.level.read_known
    if excess > RARE:
        cause = "than stated" if stated else "than one noise level for all passes explains"
        return [
            Finding(
                "residuals-too-large",
                "warn",
                one.one.name,
                f"residuals are {np.sqrt(square / freedom):.2f} times larger {cause}; look for "
                "spikes, jumps, a wrong probe or a pass that disagrees with its neighbours.",
            )
        ]
    if excess < -RARE and stated:
        return [
            Finding(
                "residuals-too-small",
                "note",
                one.one.name,
                f"residuals are only {np.sqrt(square / freedom):.2f} of what the stated noise "
                "gives; the stated noise levels may be too large, and so the uncertainties.",
            )
        ]
    return []


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


def _contradicted(fit: LineFit) -> list[Finding]:
    """What the readings found of gains, drifts and positions, against what was stated."""
    size = fit.spline.size
    variances = np.diagonal(fit.covariance)[size:].tolist()
    found = []
    for unknown, value, variance in zip(
        fit.unknowns, fit.values[size:].tolist(), variances, strict=True
    ):
        told = unknown.sd**2 - variance  # variance of how far the readings may move it
        if told < LEAST_TOLD * unknown.sd**2:
            continue
        off = (value - unknown.mean) / np.sqrt(told)
        if abs(off) > RARE:
            unit = "" if unknown.unit == "1" else f" {unknown.unit}"
            text = (
                f"the readings ask for a {unknown.kind} of {value:.3g}{unit}, where "
                f"{unknown.mean:.3g} with u = {unknown.sd:.2g}{unit} is stated: {abs(off):.1f} "
                "times what chance allows; check the stated value, its unit, and the passes that "
                "disagree."
            )
            found.append(Finding("stated-value-contradicted", "warn", unknown.where, text))
    return found


def _trusted(fit: LineFit) -> list[Finding]:
    """Name what the readings cannot check, so that it rests on the campaign file alone."""
    size = fit.spline.size
    sd = np.sqrt(np.diagonal(fit.covariance)[size:])
    kept = [
        f"{unknown.name} (u = {unknown.sd:.2g}{'' if unknown.unit == '1' else ' ' + unknown.unit})"
        for unknown, after in zip(fit.unknowns, sd.tolist(), strict=True)
        if unknown.kind != "drift" and after > 0.9 * unknown.sd
    ]
    if not kept:
        return []
    return [
        Finding(
            "taken-on-trust",
            "note",
            "",
            f"the readings cannot check {', '.join(kept)}: results rest on the stated "
            "uncertainties; a second probe or an absolute reference checks a gain, a pass back "
            "checks a lag, and only another length standard checks scale and offset.",
        )
    ]
