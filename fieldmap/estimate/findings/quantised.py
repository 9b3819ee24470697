"""Numbers that were recorded too coarsely for their noise."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.estimate.findings.finding import Finding
from fieldmap.estimate.resolution import counted_step, flux_step

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["quantised_findings"]

COARSE: Final = 3.0  # times the noise: beyond, rounding errors follow each other
MATTERS: Final = 100.0  # times the noise: results erred beyond 2U at 1000, and at 100 not yet
SHARE: Final = 1e-4  # of the range of the flux, where the noise is not known: likewise
FEWEST: Final = 16  # readings


def quantised_findings(passes: Sequence[Pass]) -> list[Finding]:
    """Name passes whose numbers move in steps that are coarse against the noise.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes.

    Returns
    -------
    list of Finding
    """
    return [finding for one in passes for finding in _quantised(one)]


def _quantised(one: Pass) -> list[Finding]:
    step = flux_step(one)
    if step == 0 or len(one.flux) < FEWEST:
        return []
    noise = _noise(one, step)
    if step <= COARSE * noise:
        return []
    stated = one.integrator.resolution >= 0.5 * step
    matters = step > MATTERS * noise or step > SHARE * float(np.ptp(one.flux))
    text = (
        f"flux is recorded in steps of {step:.3g} V s, where the noise of a reading is about "
        f"{noise:.2g} V s: {_counted(one)} does not average out where the flux changes slowly, so "
        "that uncertainties do not quite hold there; record more digits"
    )
    text += "." if stated else f", and state resolution (it says {one.integrator.resolution:.2g})."
    return [Finding("quantised", "warn" if matters else "note", one.name, text)]


def _counted(one: Pass) -> str:
    step = counted_step(one)
    if step == 0:
        return "the rounding"
    return f"the rounding is counted as read noise, {step / math.sqrt(12):.2g} V s, yet"


def _noise(one: Pass, step: float) -> float:
    """Noise of a reading without its rounding, V s: as stated, or from the third differences."""
    if one.integrator.read_noise is not None:
        return one.integrator.read_noise
    bends = np.diff(one.flux, 3)
    spread = 1.4826 * float(np.median(np.abs(bends))) / math.sqrt(20)
    # less than this is not told from rounding, which is about a third of a step by itself
    return math.sqrt(max(spread**2 - step**2 / 12, (step / 100) ** 2))
