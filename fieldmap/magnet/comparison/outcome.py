"""What a comparison of two profiles found."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

if TYPE_CHECKING:
    from fieldmap.magnet.quantity import Quantity

__all__ = ["ComparedResult", "Comparison", "DifferenceProfile", "Stretch"]

Floats = npt.NDArray[np.float64]

K = 2.0  # a difference of two results beyond K times its u is significant


@dataclass(frozen=True)
class Stretch:
    """Part of the line on which two profiles differ significantly.

    Parameters
    ----------
    start, stop : float
        First and last point outside the band, m.
    at : float
        Where the difference is largest, m.
    difference : float
        There, T.
    half_width : float
        Half width of the simultaneous 95 % band there, T.
    """

    start: float
    stop: float
    at: float
    difference: float
    half_width: float


@dataclass(frozen=True, eq=False)
class DifferenceProfile:
    """Difference of two profiles with its band.

    Parameters
    ----------
    s : (n,) array
        Positions, m, increasing.
    difference : (n,) array
        First less second, T.
    u : (n,) array
        Standard uncertainty of each point, T.
    k : float
        Factor of the simultaneous band: with 95 % probability two equal profiles differ by
        no more than k u at any of the points.

    Examples
    --------
    >>> s = np.array([0.0, 0.1, 0.2])
    >>> one = DifferenceProfile(s, np.array([0.0, 5e-5, 1e-5]), np.full(3, 1e-5), 2.6)
    >>> [(found.start, found.stop, found.difference) for found in one.stretches]
    [(0.1, 0.1, 5e-05)]
    """

    s: Floats
    difference: Floats
    u: Floats
    k: float

    @property
    def half_width(self) -> Floats:
        """Half width of the simultaneous 95 % band, T."""
        return np.asarray(self.k * self.u)

    @property
    def stretches(self) -> tuple[Stretch, ...]:
        """Where the difference leaves the band, in the order of position."""
        side = np.where(np.abs(self.difference) > self.half_width, np.sign(self.difference), 0.0)
        edges = np.flatnonzero(np.diff(side)) + 1
        runs = np.split(np.arange(len(side)), edges)
        return tuple(self._stretch(run) for run in runs if len(run) and side[run[0]] != 0)

    def _stretch(self, run: npt.NDArray[np.intp]) -> Stretch:
        top = int(run[np.abs(self.difference[run]).argmax()])
        return Stretch(
            float(self.s[run[0]]),
            float(self.s[run[-1]]),
            float(self.s[top]),
            float(self.difference[top]),
            float(self.half_width[top]),
        )


@dataclass(frozen=True)
class ComparedResult:
    """One result of both profiles, and their difference, as they stand before alignment."""

    first: Quantity
    second: Quantity
    difference: Quantity

    @property
    def significant(self) -> bool:
        """Whether the difference exceeds twice its standard uncertainty."""
        return abs(self.difference.value) > K * self.difference.u


@dataclass(frozen=True, eq=False)
class Comparison:
    """A map beside another map or a design.

    Parameters
    ----------
    names : tuple of str
        What was compared: first, second.
    component, travel : str
        Component of the field, name of the position axis.
    same_bench : bool
        Whether errors of common probes and stage were taken as common.
    first, second : (n,) array
        Both profiles at ``before.s``, T, as they stand.
    shift : Quantity or None
        By how much the second profile is moved along the line to fit the first, m; None
        where nothing was aligned.
    scale : Quantity or None
        The share by which it is enlarged.
    correlation : float
        Of shift and scale.
    before : DifferenceProfile
        First less second as they stand.
    after : DifferenceProfile or None
        First less the second as moved and enlarged.
    results : dict of str to ComparedResult
        ``integrated_field``, ``central_field``, ``magnetic_length`` where both profiles
        reach far enough.
    remarks : tuple of str
        Sentences on what limits the comparison.
    """

    names: tuple[str, str]
    component: str
    travel: str
    same_bench: bool
    first: Floats
    second: Floats
    shift: Quantity | None
    scale: Quantity | None
    correlation: float
    before: DifferenceProfile
    after: DifferenceProfile | None
    results: dict[str, ComparedResult]
    remarks: tuple[str, ...]

    @property
    def judged(self) -> DifferenceProfile:
        """The difference that counts: after alignment if there was one."""
        return self.before if self.after is None else self.after

    @property
    def stretches(self) -> tuple[Stretch, ...]:
        """Where the judged difference leaves its simultaneous band."""
        return self.judged.stretches
