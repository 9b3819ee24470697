"""The unknowns beside the field: drift, gain, position errors, each with its prior."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from fieldmap.estimate.corrected import integrator_scale, step_times
from fieldmap.readings.probe import Coil

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.corrections import CorrectionKind
    from fieldmap.readings.passes import Pass
    from fieldmap.readings.probe import Probe, Stage

__all__ = ["CORRECTED", "GAINS", "Kind", "Nuisance", "drift_sd", "nuisances"]

Kind = Literal[
    "drift",
    "gain",
    "tilt",
    "temperature",
    "window",
    "scale",
    "offset",
    "lag",
    "backlash",
    "pass factor",
    "pass lag",
    "pass shift",
    "step",
]

GAINS: tuple[Kind, ...] = ("gain", "tilt", "temperature")
"""What changes the readings of a probe in proportion."""

CORRECTED: tuple[Kind, ...] = ("pass factor", "pass lag", "pass shift", "step")
"""What is uncertain of the corrections of a pass that the user switched on."""

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
    "pass factor": "1",
    "pass lag": "s",
    "pass shift": "m",
    "step": "V s",
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
    be certain is no unknown. A correction that the user switched on leaves what is uncertain of
    it: the rest of a factor, a lag or a shift, and a step as large as the flux of the pass.

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
        sd = drift_sd(one)
        if sd > 0:
            mean = one.integrator.drift * integrator_scale(one)
            found.append(Nuisance("drift", one.name, mean, sd))
    for probe in {probe.name: probe for probe in probes}.values():
        found += _of_probe(probe)
    shared: list[tuple[Kind, float]] = [
        ("scale", stage.u_scale),
        ("offset", stage.u_offset),
        ("lag", stage.u_lag),
        ("backlash", stage.u_backlash),
    ]
    found += [Nuisance(kind, "", 0.0, sd) for kind, sd in shared if sd > 0]
    return found + [unknown for one in passes for unknown in _of_corrections(one)]


def _of_corrections(one: Pass) -> list[Nuisance]:
    """What is uncertain of the corrections of one pass."""
    left: dict[CorrectionKind, Kind] = {
        "factor": "pass factor",
        "lag": "pass lag",
        "shift": "pass shift",
    }
    found = [
        Nuisance(left[each.kind], one.name, 0.0, each.u)
        for each in one.corrections
        if each.kind in left and each.u > 0
    ]
    span = float(np.ptp(one.flux)) or 1e-15
    return found + [Nuisance("step", where, 0.0, span) for where in step_times(one)]


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


def drift_sd(one: Pass) -> float:
    """Standard uncertainty of the drift of a pass before the scan, V s/s.

    Where none is stated: a drift that could have made all its flux.
    """
    if one.integrator.u_drift is not None:
        return one.integrator.u_drift * abs(integrator_scale(one))
    duration = float(one.time[-1] - one.time[0])
    return (float(np.ptp(one.flux)) or 1e-15) / duration
