"""Gap magnets and their fringes: tanh, Enge, and the exact field of semi-infinite plates."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.polynomial import polynomial
from scipy.special import expit, wrightomega

from fieldmap.bench.sources.algebra import Source, require_finite, require_positive
from fieldmap.bench.sources.quadrature import RunningQuadrature
from fieldmap.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Floats

__all__ = ["EngeMagnet", "Plates", "TanhMagnet", "TwoTermEnge"]

_SATURATED = 50.0  # beyond this exponent an Enge function is 0 or 1 to 2e-22
_CELLS = 64  # first subdivision of a fringe; the quadrature refines it where needed


@dataclass(frozen=True)
class TanhMagnet(Source):
    """``B0/2 [tanh((s + L/2)/lam) - tanh((s - L/2)/lam)]``.

    Parameters
    ----------
    B0 : float
        Field well inside a long magnet, T.
    length : float
        L, m; the total is B0 L exactly.
    lam : float
        Length of the fringes, m.

    Examples
    --------
    >>> magnet = TanhMagnet(0.5, length=0.4, lam=0.02)
    >>> magnet.total, round(magnet.effective_length, 12)
    (0.2, 0.400000001649)
    """

    B0: float
    length: float
    lam: float

    def __post_init__(self) -> None:
        require_finite(self, "B0")
        require_positive(self, "length", "lam")

    @property
    def total(self) -> float:
        """B0 L, T m."""
        return self.B0 * self.length

    @property
    def effective_length(self) -> float:
        """L / tanh(L / 2 lam), m."""
        return self.length / math.tanh(self.length / (2.0 * self.lam))

    def _field(self, s: Floats) -> Floats:
        rising, falling = (
            2.0 * (s + self.length / 2) / self.lam,
            2.0 * (s - self.length / 2) / self.lam,
        )
        joint = -math.expm1(-2.0 * self.length / self.lam)
        return np.asarray(self.B0 * joint * expit(rising) * expit(-falling))

    def _integral(self, s: Floats) -> Floats:
        rising, falling = np.abs(s + self.length / 2), np.abs(s - self.length / 2)
        path = np.clip(2.0 * s, -self.length, self.length)  # rising - falling, exactly
        fringe = _softplus(-2.0 * rising / self.lam) - _softplus(-2.0 * falling / self.lam)
        return np.asarray(self.B0 / 2.0 * (path + self.lam * fringe))


@dataclass(frozen=True)
class TwoTermEnge(Source):
    """Single edge ``B0 / (1 + exp(c0 + c1 s/g))``: iron at negative s, nothing at positive s.

    Parameters
    ----------
    B0 : float
        Field inside, T.
    gap : float
        Full gap g, m.
    c0, c1 : float
        Enge coefficients; c1 above zero.

    Examples
    --------
    >>> edge = TwoTermEnge(0.5, gap=0.03, c0=0.4, c1=2.0)
    >>> edge.boundary, edge.fringe_integral
    (-0.006, 0.5)
    """

    B0: float
    gap: float
    c0: float
    c1: float

    def __post_init__(self) -> None:
        require_finite(self, "B0", "c0")
        require_positive(self, "gap", "c1")

    @property
    def total(self) -> float:
        """Infinite: the iron has one end only."""
        return math.copysign(math.inf, self.B0) if self.B0 else 0.0

    @property
    def boundary(self) -> float:
        """Where a sharp edge with the same integral would stand, m."""
        return -self.c0 * self.gap / self.c1

    @property
    def fringe_integral(self) -> float:
        """Return ``integral of B (B0 - B) ds / (g B0^2)``."""
        return 1.0 / self.c1

    def _exponent(self, s: Floats) -> Floats:
        return self.c0 + self.c1 * s / self.gap

    def _field(self, s: Floats) -> Floats:
        return np.asarray(self.B0 * expit(-self._exponent(s)))

    def _integral(self, s: Floats) -> Floats:
        return -self.B0 * self.gap / self.c1 * _softplus(-self._exponent(s))


@dataclass(frozen=True)
class EngeMagnet(Source):
    """Magnet with an Enge fringe at either end: ``B0 E_in(-s) E_out(s)``.

    ``E = 1 / (1 + exp(sum c_i x^i))`` with ``x`` the distance outwards from the end in units
    of the full gap (H. A. Enge, in Focusing of Charged Particles, ed. Septier, 1967). The
    running integral is a refined Gauss-Legendre quadrature, good to about 1e-14 of the total.

    Parameters
    ----------
    B0 : float
        Field well inside a long magnet, T.
    length : float
        Distance between the origins of the two Enge functions, m; published coefficients
        have their field boundary there.
    gap : float
        Full gap (or bore diameter), m.
    coefficients_in : sequence of float
        c0, c1, ... at the negative end; the highest order odd, its coefficient positive.
    coefficients_out : sequence of float, optional
        The same at the positive end; equal to the other end if left out.

    Examples
    --------
    >>> magnet = EngeMagnet(0.5, length=0.4, gap=0.03, coefficients_in=(0.0, 2.0))
    >>> round(magnet.total, 6)
    0.2
    """

    B0: float
    length: float
    gap: float
    coefficients_in: Sequence[float]
    coefficients_out: Sequence[float] = ()

    def __post_init__(self) -> None:
        require_finite(self, "B0")
        require_positive(self, "length", "gap")
        if np.size(self.coefficients_out) == 0:
            object.__setattr__(self, "coefficients_out", self.coefficients_in)
        for name in ("coefficients_in", "coefficients_out"):
            object.__setattr__(self, name, _enge_coefficients(name, getattr(self, name)))

    @property
    def total(self) -> float:
        """Integral over both fringes, T m, by quadrature."""
        return self.B0 * self._running.total

    @cached_property
    def _running(self) -> RunningQuadrature:
        """Quadrature of the field of unit height."""
        half = self.length / 2
        fringe_in = -(half + self.gap * _fringe_cells(self.coefficients_in))
        fringe_out = half + self.gap * _fringe_cells(self.coefficients_out)
        return RunningQuadrature(self._shape, np.concatenate([fringe_in, fringe_out]))

    def _shape(self, s: Floats) -> Floats:
        """Field of unit height."""
        half = self.length / 2
        enter = _enge(self.coefficients_in, (-s - half) / self.gap)
        leave = _enge(self.coefficients_out, (s - half) / self.gap)
        return enter * leave

    def _field(self, s: Floats) -> Floats:
        return self.B0 * self._shape(s)

    def _integral(self, s: Floats) -> Floats:
        return self.B0 * self._running(s)


@dataclass(frozen=True)
class Plates(Source):
    """Edge of two semi-infinite plates of infinite permeability; they fill negative s.

    ``B/B0 = 1/(1 + W(e^a))`` on the mid-plane with ``a = 2 pi s/g - 1`` and Lambert's W
    (conformal map of the plate condenser, Maxwell 1873). Far outside the field falls as
    1/s only: its total diverges.

    Parameters
    ----------
    B0 : float
        Field deep between the plates, T.
    gap : float
        Full gap g, m.

    Examples
    --------
    >>> edge = Plates(1.0, gap=0.03)
    >>> round(float(edge.field(0.0)), 5), edge.total
    (0.78219, inf)
    """

    B0: float
    gap: float

    def __post_init__(self) -> None:
        require_finite(self, "B0")
        require_positive(self, "gap")

    @property
    def total(self) -> float:
        """Infinite on both sides."""
        return math.copysign(math.inf, self.B0) if self.B0 else 0.0

    def _field(self, s: Floats) -> Floats:
        return np.asarray(self.B0 / (1.0 + _lambert_of_exp(self._argument(s))))

    def _integral(self, s: Floats) -> Floats:
        a = self._argument(s)
        W = _lambert_of_exp(a)
        # w = a - W = ln W: each form keeps its digits where the other loses them
        w = np.where(a > 1.0, np.log(np.maximum(W, 1.0)), a - W)
        return self.B0 * self.gap / (2.0 * math.pi) * w

    def _argument(self, s: Floats) -> Floats:
        return 2.0 * math.pi * s / self.gap - 1.0


def _softplus(x: Floats) -> Floats:
    """Return ln(1 + e^x), without overflow."""
    return np.asarray(np.maximum(x, 0.0) + np.log1p(np.exp(-np.abs(x))))


def _lambert_of_exp(a: Floats) -> Floats:
    """Return W(e^a) for real a of any size: the Wright omega function never forms e^a."""
    return np.asarray(wrightomega(a), dtype=np.float64)


def _enge(coefficients: Sequence[float], x: Floats) -> Floats:
    """Enge function; a polynomial that overflows means 0 or 1."""
    with np.errstate(over="ignore"):
        return np.asarray(expit(-polynomial.polyval(x, np.asarray(coefficients))))


def _enge_coefficients(name: str, coefficients: Sequence[float]) -> tuple[float, ...]:
    """Coefficients as a tuple, refused unless the function goes from 1 inside to 0 outside."""
    where, wanted = f"EngeMagnet.{name}", "at least two finite numbers, not all but c0 zero"
    try:
        values = np.trim_zeros(np.asarray(coefficients, dtype=np.float64), "b")
    except (TypeError, ValueError):
        raise InputError(where, repr(coefficients), wanted) from None
    if values.ndim != 1 or values.size < 2 or not np.all(np.isfinite(values)):
        raise InputError(where, repr(coefficients), wanted)
    if values.size % 2 or values[-1] <= 0:
        raise InputError(
            where,
            f"{values.tolist()}, of highest order {values.size - 1}",
            "an odd highest order with a positive coefficient, or the field would not go "
            "from full inside to zero outside",
            "add or drop a term",
        )
    return tuple(float(value) for value in values)


def _fringe_cells(coefficients: Sequence[float]) -> Floats:
    """Cell borders, in gaps, from where the Enge function is 1 to where it is 0 for good."""

    def crossings(level: float) -> Floats:
        roots = polynomial.polyroots([coefficients[0] - level, *coefficients[1:]])
        return np.asarray(roots[np.abs(roots.imag) < 1e-6 * (1.0 + np.abs(roots))].real)

    inside, outside = crossings(-_SATURATED).min(), crossings(_SATURATED).max()
    return np.linspace(inside, outside, _CELLS + 1)
