"""The unknowns beside the field: drift, gain, position errors, each with its prior."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from fieldmap.readings.probe import Coil

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass
    from fieldmap.readings.probe import Probe, Stage

__all__ = ["GAINS", "Kind", "Nuisance", "nuisances"]

Kind = Literal[
    "drift", "gain", "tilt", "temperature", "window", "scale", "offset", "lag", "backlash"
]

GAINS: tuple[Kind, ...] = ("gain", "tilt", "temperature")
"""What changes the readings of a probe in proportion."""

UNITS: dict[Kind, str] = {
    "drift": "V s/s",
    "gain": "1",
    "tilt": "1",
    "temperature": "1",
    "window": "1",
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

    A drift belongs to a pass; gain, tilt, temperature and window to a probe (so a gain cancels
    in what one probe measured); scale, offset, lag and backlash to the stage. What is stated to
    be certain is no unknown.

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
    for probe in {probe.name: probe for probe in probes}.values():
        found += _of_probe(probe)
    shared: list[tuple[Kind, float]] = [
        ("scale", stage.u_scale),
        ("offset", stage.u_offset),
        ("lag", stage.u_lag),
        ("backlash", stage.u_backlash),
    ]
    found += [Nuisance(kind, "", 0.0, sd) for kind, sd in shared if sd > 0]
    return found


def _of_probe(probe: Probe) -> list[Nuisance]:
    """Relative errors of one probe's gain and window.

    A probe at an angle t to the field reads cos t of it, always less: for a normal angle of
    standard uncertainty u that is u²/2 on the mean, with a standard deviation of u²/√2.
    """
    square = probe.u_tilt**2
    drifted = abs(probe.temperature_coefficient) * probe.u_temperature
    window = probe.u_window / probe.window if isinstance(probe, Coil) and probe.window else 0.0
    found: list[tuple[Kind, float, float]] = [
        ("gain", 0.0, probe.u_gain),
        ("tilt", -square / 2, square / np.sqrt(2)),
        ("temperature", 0.0, drifted),
        ("window", 0.0, window),
    ]
    return [Nuisance(kind, probe.name, mean, float(sd)) for kind, mean, sd in found if sd > 0]


def _any_drift(one: Pass) -> float:
    """Where no drift is stated: one that could have made all the flux of the pass, V s/s."""
    duration = float(one.time[-1] - one.time[0])
    return max(float(np.ptp(one.flux)), 1e-15) / duration
