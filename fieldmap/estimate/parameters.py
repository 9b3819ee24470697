"""The unknowns beside the field: drift, gain, position errors, each with its prior."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass
    from fieldmap.readings.probe import Probe, Stage

__all__ = ["Kind", "Nuisance", "nuisances"]

Kind = Literal["drift", "gain", "scale", "offset", "lag", "backlash"]

UNITS: dict[Kind, str] = {
    "drift": "V s/s",
    "gain": "1",
    "scale": "1",
    "offset": "m",
    "lag": "s",
    "backlash": "m",
}


@dataclass(frozen=True)
class Nuisance:
    """One unknown that is not the field.

    Parameters
    ----------
    kind : str
        What it is.
    where : str
        The pass or probe it belongs to; empty where all passes share it.
    mean : float
        What is expected, SI.
    sd : float
        Its standard uncertainty before the scan.
    """

    kind: Kind
    where: str
    mean: float
    sd: float

    @property
    def name(self) -> str:
        """Kind and place, for tables and findings."""
        return f"{self.kind} {self.where}".strip()

    @property
    def unit(self) -> str:
        """SI unit as text."""
        return UNITS[self.kind]


def nuisances(passes: Sequence[Pass], probes: Sequence[Probe], stage: Stage) -> list[Nuisance]:
    """All unknowns beside the field, in a fixed order.

    A drift belongs to a pass; a gain to a probe (so it cancels in what one probe measured);
    scale, offset, lag and backlash to the stage. What is stated to be certain is no unknown.

    Parameters
    ----------
    passes : sequence of Pass
        The passes of one line.
    probes : sequence of Wire or Coil
        The probes of the passes and of the flip references.
    stage : Stage
        Position uncertainties.

    Returns
    -------
    list of Nuisance
    """
    found: list[Nuisance] = []
    for one in passes:
        known = one.integrator.u_drift
        sd = _any_drift(one) if known is None else known
        if sd > 0:
            found.append(Nuisance("drift", one.name, one.integrator.drift, sd))
    found += [
        Nuisance("gain", probe.name, 0.0, probe.u_gain)
        for probe in {probe.name: probe for probe in probes}.values()
        if probe.u_gain > 0
    ]
    shared: list[tuple[Kind, float]] = [
        ("scale", stage.u_scale),
        ("offset", stage.u_offset),
        ("lag", stage.u_lag),
        ("backlash", stage.u_backlash),
    ]
    found += [Nuisance(kind, "", 0.0, sd) for kind, sd in shared if sd > 0]
    return found


def _any_drift(one: Pass) -> float:
    """Where no drift is stated: one that could have made all the flux of the pass, V s/s."""
    duration = float(one.time[-1] - one.time[0])
    return max(float(np.ptp(one.flux)), 1e-15) / duration
