"""Probes, integrators and the stage: what the readings were taken with, in SI units."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

__all__ = ["Coil", "Integrator", "Probe", "Stage", "Wire"]


@dataclass(frozen=True)
class Wire:
    """A wire (or a bundle of turns) that cuts the field with its active length.

    The flux it collects is ``turns * active_length * F(s)``, with ``F`` the running integral
    of the flux density along the travel.

    Parameters
    ----------
    name : str
        Name of the probe in the campaign.
    turns : float
        Number of wires in the bundle.
    active_length : float
        Length across the travel, m.
    u_active_length : float
        Its standard uncertainty, m.
    width : float
        Width of the bundle along the travel, m.
    polarity : int
        +1 or -1; -1 turns the sign of every reading.
    u_tilt : float
        Standard uncertainty of the angle between the probe and the field component, rad.
    temperature_coefficient : float
        Relative change of the gain per kelvin, 1/K.
    reference_temperature : float
        Temperature at which the stated size holds, degC.
    u_temperature : float
        Standard uncertainty of the probe's temperature, K.
    """

    name: str
    turns: float
    active_length: float
    u_active_length: float = 0.0
    width: float = 0.0
    polarity: int = 1
    u_tilt: float = 0.0
    temperature_coefficient: float = 0.0
    reference_temperature: float = 20.0
    u_temperature: float = 0.0

    @property
    def gain(self) -> float:
        """Signed factor between running integral (T m) and flux (V s): m."""
        return self.polarity * self.turns * self.active_length

    @property
    def u_gain(self) -> float:
        """Relative standard uncertainty of the gain."""
        return self.u_active_length / self.active_length

    @property
    def extent(self) -> float:
        """Extent of the probe along the travel, m."""
        return self.width

    @property
    def senses_level(self) -> bool:
        """A moving wire collects flux in a uniform field too."""
        return True


@dataclass(frozen=True)
class Coil:
    """A search coil that reads the field averaged over its window.

    Parameters
    ----------
    name : str
        Name of the probe in the campaign.
    shape : {"rectangular", "round"}
        Shape of the window.
    effective_area : float
        Turns times area, m^2.
    u_effective_area : float
        Its standard uncertainty, m^2.
    window : float
        Extent along the travel, m; the diameter of a round coil.
    polarity : int
        +1 or -1; -1 turns the sign of every reading.
    u_window : float
        Standard uncertainty of the window, m.
    u_tilt : float
        Standard uncertainty of the angle between the probe and the field component, rad.
    temperature_coefficient : float
        Relative change of the gain per kelvin, 1/K.
    reference_temperature : float
        Temperature at which the stated size holds, degC.
    u_temperature : float
        Standard uncertainty of the probe's temperature, K.
    """

    name: str
    shape: Literal["rectangular", "round"]
    effective_area: float
    u_effective_area: float = 0.0
    window: float = 0.0
    polarity: int = 1
    u_window: float = 0.0
    u_tilt: float = 0.0
    temperature_coefficient: float = 0.0
    reference_temperature: float = 20.0
    u_temperature: float = 0.0

    @property
    def gain(self) -> float:
        """Signed factor between mean flux density (T) and flux (V s): m^2."""
        return self.polarity * self.effective_area

    @property
    def u_gain(self) -> float:
        """Relative standard uncertainty of the gain."""
        return self.u_effective_area / self.effective_area

    @property
    def extent(self) -> float:
        """Extent of the probe along the travel, m."""
        return self.window

    @property
    def senses_level(self) -> bool:
        """A coil moved through a uniform field collects nothing: it tells differences only."""
        return False


Probe = Wire | Coil


@dataclass(frozen=True)
class Integrator:
    """A voltage integrator and what is known of its noise; None means "not stated".

    Parameters
    ----------
    name : str
        Name of the integrator in the campaign.
    kind : {"digital", "analog"}
        Analog ones may droop.
    read_noise : float, optional
        Independent noise of each reading, V s.
    walk_noise : float, optional
        Random walk of the integral: V s per root second.
    drift : float
        Expected drift rate, V s/s.
    u_drift : float, optional
        Standard uncertainty of the drift rate, V s/s.
    resolution : float
        Step of the displayed number, V s.
    full_scale : float, optional
        Largest flux it can hold, V s.
    leak_time : float, optional
        Time constant of the droop, s (analog only).
    max_voltage : float, optional
        Largest input voltage, V.
    """

    name: str
    kind: Literal["digital", "analog"] = "digital"
    read_noise: float | None = None
    walk_noise: float | None = None
    drift: float = 0.0
    u_drift: float | None = None
    resolution: float = 0.0
    full_scale: float | None = None
    leak_time: float | None = None
    max_voltage: float | None = None


@dataclass(frozen=True)
class Stage:
    """The stage that carries the probe: standard uncertainties of its positions.

    True position = (1 + scale error) * recorded position + offset + speed * lag
    + half the backlash with the sign of the motion.

    Parameters
    ----------
    u_scale : float
        Relative scale of the position readings, 1.
    u_position : float
        Jitter of a single reading, m.
    u_offset : float
        Where zero is, m.
    u_lag : float
        Trigger to reading, s.
    u_backlash : float
        Difference between the two directions of travel, m.
    """

    u_scale: float = 0.0
    u_position: float = 0.0
    u_offset: float = 0.0
    u_lag: float = 0.0
    u_backlash: float = 0.0
