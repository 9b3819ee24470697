"""What the readings alone say of the integrator's ranges and settings."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from fieldmap.estimate.corrected import integrator_scale
from fieldmap.estimate.findings.finding import Finding

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["range_findings"]


def range_findings(passes: Sequence[Pass]) -> list[Finding]:
    """Remarks on ranges and settings that the campaign file states.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes.

    Returns
    -------
    list of Finding
    """
    found = []
    for one in passes:
        full_scale = one.integrator.full_scale
        largest = float(np.abs(one.flux / integrator_scale(one)).max())
        if full_scale is not None and largest >= full_scale:
            found.append(
                Finding(
                    "full-scale-exceeded",
                    "warn",
                    one.name,
                    f"flux reaches {largest:.4g} V s, the integrator holds {full_scale:.4g} V s; "
                    "readings there are clipped: use a larger range or fewer turns.",
                )
            )
        found += _voltage(one)
        if one.integrator.leak_time is not None and one.integrator.kind == "digital":
            found.append(
                Finding(
                    "leak-time-ignored",
                    "note",
                    one.integrator.name,
                    "leak_time is stated for a digital integrator, which does not droop; it was "
                    'not applied: set kind = "analog" if it does.',
                )
            )
    return list(dict.fromkeys(found))


def _voltage(one: Pass) -> list[Finding]:
    """Input voltage above what the integrator takes."""
    limit = one.integrator.max_voltage
    step = np.diff(one.time)
    if limit is None or not np.any(step > 0):
        return []
    rise = np.diff(one.flux) / integrator_scale(one)
    rates = np.divide(rise, step, out=np.zeros_like(step), where=step > 0)
    largest = float(np.abs(rates).max())
    if largest < limit:
        return []
    return [
        Finding(
            "voltage-exceeded",
            "warn",
            one.name,
            f"the induced voltage reaches {largest:.4g} V, the integrator takes {limit:.4g} V; "
            "scan slower or use fewer turns.",
        )
    ]
