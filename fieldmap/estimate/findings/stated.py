"""What the campaign states beside what the readings make of it."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.findings.thresholds import beyond
from fieldmap.estimate.parameters import CORRECTED

if TYPE_CHECKING:
    from fieldmap.estimate.line_fit import LineFit
    from fieldmap.estimate.parameters import Nuisance

__all__ = ["contradicted", "departures", "trusted"]

Floats = npt.NDArray[np.float64]

LEAST_TOLD = 0.3  # of a prior variance: where the readings tell less, they contradict nothing


def departures(fit: LineFit) -> Floats:
    """How far the readings move each unknown from what is stated, as unit normals by chance.

    Parameters
    ----------
    fit : LineFit
        The line.

    Returns
    -------
    (m,) array
        In the order of the unknowns; zero where the readings tell next to nothing.
    """
    size = fit.spline.size
    sd, mean = (np.array([getattr(one, name) for one in fit.unknowns]) for name in ("sd", "mean"))
    told = sd**2 - np.diagonal(fit.covariance)[size:]
    known = told > LEAST_TOLD * sd**2
    off = (fit.values[size:] - mean) / np.sqrt(np.where(known, told, 1.0))
    return np.where(known, off, 0.0)


def contradicted(fit: LineFit) -> list[Finding]:
    """What the readings found of gains, drifts and positions, against what was stated."""
    found, rare = [], beyond(len(fit.unknowns))
    values = fit.values[fit.spline.size :].tolist()
    for unknown, value, off in zip(fit.unknowns, values, departures(fit).tolist(), strict=True):
        if abs(off) > rare and unknown.kind in CORRECTED:
            found += _correction_contradicted(unknown, value, off)
        elif abs(off) > rare:
            unit = "" if unknown.unit == "1" else f" {unknown.unit}"
            text = (
                f"the readings ask for a {unknown.kind} of {value:.3g}{unit}, where "
                f"{unknown.mean:.3g} with u = {unknown.sd:.2g}{unit} is stated: {abs(off):.1f} "
                "times what chance allows; check the stated value, its unit, and the passes that "
                "disagree."
            )
            found.append(Finding("stated-value-contradicted", "warn", unknown.where, text))
    return found


def _correction_contradicted(unknown: Nuisance, value: float, off: float) -> list[Finding]:
    """A correction of the user's that the other passes do not bear out; a step states no size."""
    if unknown.kind == "step":
        return []
    unit = "" if unknown.unit == "1" else f" {unknown.unit}"
    text = (
        f"the readings move the {unknown.kind.removeprefix('pass ')} that is switched on by "
        f"{value:.3g}{unit}, where it is said to be known within u = {unknown.sd:.2g}{unit}: "
        f"{abs(off):.1f} times what chance allows; widen that u in [[corrections]], or look for "
        "another fault of the pass."
    )
    return [Finding("correction-contradicted", "warn", unknown.where, text)]


def trusted(fit: LineFit) -> list[Finding]:
    """Name what the readings cannot check, so that it rests on the campaign file alone."""
    size = fit.spline.size
    sd = np.sqrt(np.diagonal(fit.covariance)[size:])
    kept = [
        f"{unknown.name} (u = {unknown.sd:.2g}{'' if unknown.unit == '1' else ' ' + unknown.unit})"
        for unknown, after in zip(fit.unknowns, sd.tolist(), strict=True)
        if unknown.kind not in ("drift", "step") and after > 0.9 * unknown.sd
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
