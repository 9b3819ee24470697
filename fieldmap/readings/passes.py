"""Passes, references and limits: one campaign's readings as plain, immutable records."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.readings.probe import Integrator, Probe, Stage

if TYPE_CHECKING:
    from pathlib import Path

    from fieldmap.readings.corrections import Correction

__all__ = [
    "Axis",
    "Campaign",
    "FlipReference",
    "Floats",
    "Limit",
    "Magnet",
    "Pass",
    "PlannedPass",
    "PointReference",
    "Record",
    "Reference",
    "ZeroReference",
]

Floats = npt.NDArray[np.float64]
Record = Literal["cumulative", "increments", "voltage"]


@dataclass(frozen=True, eq=False)
class Pass:
    """One travel of one probe: time, recorded position and cumulative flux of each reading.

    Parameters
    ----------
    name : str
        How the pass is named in findings: its file name.
    probe : Wire or Coil
        What moved.
    integrator : Integrator
        What recorded it.
    time : (n,) array
        s, never decreasing.
    position : (n,) array
        Recorded position along the travel, m.
    flux : (n,) array
        Cumulative partial integral, V s, up to an unknown constant.
    x, y : float
        Transverse position of the line, m.
    record : {"cumulative", "increments", "voltage"}
        How the flux was recorded; it decides the noise model.
    temperature : (n,) array, optional
        degC.
    current : (n,) array, optional
        The supply's reading, A.
    source : Path, optional
        The file.
    sha256 : str
        Hash of the file.
    corrections : tuple of Correction
        Those that the arrays contain already; what is uncertain of them is estimated. They are
        switched on by ``Campaign.corrections``.
    """

    name: str
    probe: Probe
    integrator: Integrator
    time: Floats
    position: Floats
    flux: Floats
    x: float = 0.0
    y: float = 0.0
    record: Record = "cumulative"
    temperature: Floats | None = None
    current: Floats | None = None
    source: Path | None = None
    sha256: str = ""
    corrections: tuple[Correction, ...] = ()

    def only(self, rows: npt.NDArray[np.bool_]) -> Pass:
        """The pass with some of its readings, as if it had no others."""
        return replace(
            self,
            time=self.time[rows],
            position=self.position[rows],
            flux=self.flux[rows],
            temperature=None if self.temperature is None else self.temperature[rows],
            current=None if self.current is None else self.current[rows],
        )


@dataclass(frozen=True)
class PlannedPass:
    """A pass not measured yet (lengths in m, m/s, Hz, s)."""

    name: str
    probe: Probe
    integrator: Integrator
    start: float
    stop: float
    speed: float
    rate: float
    dwell: float = 0.0
    x: float = 0.0
    y: float = 0.0
    record: Record = "cumulative"


@dataclass(frozen=True)
class PointReference:
    """A reading of another magnetometer: B(at) = field, standard uncertainty u (m, T)."""

    at: float
    field: float
    u: float
    x: float | None = None
    y: float | None = None


@dataclass(frozen=True)
class ZeroReference:
    """The field vanishes between start and stop, within the standard uncertainty u (m, T)."""

    start: float
    stop: float
    u: float
    x: float | None = None
    y: float | None = None


@dataclass(frozen=True)
class FlipReference:
    """A coil turned over at a point: its flux changes by twice what it links (m, V s)."""

    probe: Probe
    at: float
    flux_change: float
    u_flux_change: float
    x: float | None = None
    y: float | None = None


Reference = PointReference | ZeroReference | FlipReference


@dataclass(frozen=True)
class Limit:
    """Lower and upper limit of one result, and how strictly it is judged.

    Parameters
    ----------
    result : str
        Key of the result.
    lower, upper : float or None
        SI; None leaves that side open.
    k : float, optional
        Coverage factor of the expanded uncertainty U = k·u; that of the evaluation if None.
    guard : float
        Guard band in units of U, to either side of a limit; 0 is simple acceptance.
    """

    result: str
    lower: float | None
    upper: float | None
    k: float | None = None
    guard: float = 1.0


@dataclass(frozen=True)
class Magnet:
    """What the campaign file says of the magnet (m, A)."""

    kind: Literal["dipole", "quadrupole", "solenoid", "other"]
    component: str
    gap: float
    iron_length: float | None = None
    current: float | None = None


@dataclass(frozen=True)
class Axis:
    """The mapped line, and where results are taken on it.

    Parameters
    ----------
    travel : str
        Direction of travel.
    integrate, flat : (float, float)
        Limits of the integral and flat window, m.
    tail_in, tail_out : float, optional
        Integral beyond the lower and the upper limit where it is known otherwise, T m.
    u_tail_in, u_tail_out : float, optional
        Their standard uncertainties, T m.
    """

    travel: str
    integrate: tuple[float, float]
    flat: tuple[float, float]
    tail_in: float | None = None
    u_tail_in: float | None = None
    tail_out: float | None = None
    u_tail_out: float | None = None

    def moved(
        self,
        integrate: tuple[float, float] | None = None,
        flat: tuple[float, float] | None = None,
    ) -> Axis:
        """The same line with other limits or another flat window (m).

        A tail that is known beyond a limit is not known beyond another one, so it is dropped
        where its limit moves.
        """
        start, stop = integrate or self.integrate
        stays = [
            math.isclose(new, old, rel_tol=0, abs_tol=1e-9)
            for new, old in zip((start, stop), self.integrate, strict=True)
        ]
        return Axis(
            self.travel,
            (start, stop),
            flat or self.flat,
            *((self.tail_in, self.u_tail_in) if stays[0] else (None, None)),
            *((self.tail_out, self.u_tail_out) if stays[1] else (None, None)),
        )


@dataclass(frozen=True, eq=False)
class Campaign:
    """Everything one campaign file says, with the readings of its passes.

    Parameters
    ----------
    name : str
        Title of the campaign.
    magnet : Magnet
        The magnet.
    axis : Axis
        Where results are taken; can be changed with :func:`dataclasses.replace`.
    stage : Stage
        Position uncertainties.
    passes : tuple of Pass
        The measured passes.
    planned : tuple of PlannedPass
        Passes not measured yet.
    references : tuple
        Absolute references.
    limits : tuple of Limit
        Tolerances to judge against.
    path : Path, optional
        The campaign file.
    sha256 : str
        Its hash.
    corrections : tuple of Correction
        What undoes faults of its passes, switched on by the user.
    """

    name: str
    magnet: Magnet
    axis: Axis
    stage: Stage = field(default_factory=Stage)
    passes: tuple[Pass, ...] = ()
    planned: tuple[PlannedPass, ...] = ()
    references: tuple[Reference, ...] = ()
    limits: tuple[Limit, ...] = ()
    path: Path | None = None
    sha256: str = ""
    corrections: tuple[Correction, ...] = ()
