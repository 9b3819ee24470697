"""Fields of currents: a circular loop, on its axis or beside it, and a thin solenoid."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy.constants import mu_0
from scipy.special import elliprd, elliprf, elliprj, hyp2f1

from fieldmap.bench.sources.algebra import Source, require_finite, require_positive
from fieldmap.errors import InputError

if TYPE_CHECKING:
    from fieldmap.readings.passes import Floats

__all__ = ["Loop", "Solenoid", "loop_field"]


def loop_field(
    radius: float, current: float, rho: npt.ArrayLike, z: npt.ArrayLike
) -> tuple[Floats, Floats]:
    """Radial and axial field of a circular current loop, anywhere but on the wire.

    The textbook form with the complete elliptic integrals K and E (Smythe, Static and Dynamic
    Electricity, 7.10) loses digits near the axis, near the wire and far away, where they
    cancel. Here ``D = (K - E)/m`` is Carlson's R_D, and the combination that cancels worst,
    ``((2 - m) E - 2 (1 - m) K)/m``, is a hypergeometric function: both components keep
    their digits.

    Parameters
    ----------
    radius : float
        Radius of the loop, m.
    current : float
        Ampere-turns of the loop, A.
    rho : array_like
        Distance from the axis, m.
    z : array_like
        Distance from the plane of the loop, m; broadcast with `rho`.

    Returns
    -------
    radial, axial : arrays of the broadcast shape
        T.

    Examples
    --------
    >>> radial, axial = loop_field(0.1, 1000.0, rho=[0.0, 0.05], z=0.0)
    >>> [round(float(b), 9) for b in axial]
    [0.006283185, 0.007826465]
    """
    rho, z = np.broadcast_arrays(np.asarray(rho, float), np.asarray(z, float))
    near2 = (radius - rho) ** 2 + z**2
    far2 = (radius + rho) ** 2 + z**2
    m = 4.0 * radius * rho / far2
    q = near2 / far2  # 1 - m
    h = 3.0 / 16.0 * m * hyp2f1(0.5, 1.5, 3.0, m)
    D = elliprd(0.0, q, 1.0) / (3.0 * math.pi)
    strength = mu_0 * current * radius / (np.sqrt(far2) * near2)
    radial = strength * z * h
    axial = strength * ((radius - rho) * h + 2.0 * radius * q * D)
    return radial, axial


@dataclass(frozen=True)
class Loop(Source):
    """Circular loop; the probe senses the axial component along a line parallel to the axis.

    The running integral is that of a semi-infinite current sheet, whose field Derby & Olbert
    (American Journal of Physics 78, 229, 2010) give by one complete elliptic integral.

    Parameters
    ----------
    radius : float
        m.
    current : float
        Ampere-turns, A.
    offset : float
        Distance of the scan line from the axis, m; not equal to the radius.

    Examples
    --------
    >>> loop = Loop(radius=0.1, current=1000.0)
    >>> round(loop.effective_length, 12)
    0.2
    """

    radius: float
    current: float
    offset: float = 0.0

    def __post_init__(self) -> None:
        require_positive(self, "radius")
        require_finite(self, "current", "offset")
        if abs(self.offset) == self.radius:
            raise InputError(
                "Loop.offset",
                f"{self.offset} m, the radius itself",
                "a scan line that misses the wire",
            )

    @property
    def total(self) -> float:
        """Ampere's law: mu0 I for a line through the loop, zero for one outside, T m."""
        return mu_0 * self.current if abs(self.offset) < self.radius else 0.0

    def _field(self, s: Floats) -> Floats:
        return loop_field(self.radius, self.current, abs(self.offset), s)[1]

    def _integral(self, s: Floats) -> Floats:
        inner, outer = self.radius - abs(self.offset), self.radius + abs(self.offset)
        gamma = inner / outer
        far = np.hypot(outer, s)
        q = (inner**2 + s**2) / far**2
        sheet = elliprf(0.0, q, 1.0) + gamma * (1 - gamma) / 3 * elliprj(0.0, q, 1.0, gamma**2)
        return np.asarray(mu_0 * self.current * self.radius / (math.pi * outer) * s / far * sheet)


@dataclass(frozen=True)
class Solenoid(Source):
    """Thin cylindrical current sheet; the probe senses the axial component on the axis.

    Parameters
    ----------
    radius, length : float
        m.
    turns : float
        Turns over the whole length.
    current : float
        A.

    Examples
    --------
    >>> solenoid = Solenoid(radius=0.1, length=0.4, turns=500, current=10.0)
    >>> round(solenoid.effective_length, 7)
    0.4472136
    """

    radius: float
    length: float
    turns: float
    current: float

    def __post_init__(self) -> None:
        require_positive(self, "radius", "length")
        require_finite(self, "turns", "current")

    @property
    def total(self) -> float:
        """Ampere's law: mu0 N I, T m."""
        return mu_0 * self.turns * self.current

    @property
    def effective_length(self) -> float:
        """Total over central field: sqrt(L^2 + 4 R^2), m."""
        return math.hypot(self.length, 2.0 * self.radius)

    def _ends(self, s: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """Distances along the axis and in space from the far and the near end."""
        far, near = np.abs(s) + self.length / 2, np.abs(s) - self.length / 2
        return far, near, np.hypot(self.radius, far), np.hypot(self.radius, near)

    def _field(self, s: Floats) -> Floats:
        far, near, r_far, r_near = self._ends(s)
        inside = far / r_far - near / r_near
        # the same difference, without the cancellation that grows with the distance
        reach = np.where(near > 0, far * r_near + near * r_far, 1.0)
        outside = self.radius**2 * 2.0 * np.abs(s) * self.length / (reach * r_far * r_near)
        return self.total / (2.0 * self.length) * np.where(near > 0, outside, inside)

    def _integral(self, s: Floats) -> Floats:
        _, _, r_far, r_near = self._ends(s)
        return self.total * s / (r_far + r_near)
