"""What every source can do: field, running integral, total, and sums, multiples, shifts."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from numbers import Real
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError

if TYPE_CHECKING:
    from fieldmap.readings.passes import Floats

__all__ = ["Scaled", "Shifted", "Source", "Sum", "Uniform", "require_finite", "require_positive"]


class Source(ABC):
    """A field known in closed form along the scan line.

    A concrete source is a frozen dataclass that gives ``_field``, ``_integral`` and ``total``.

    Examples
    --------
    >>> source = Uniform(0.5) + Uniform(0.25).shifted(0.1)
    >>> float(source.field(0.0)), float(source.between(0.0, 2.0))
    (0.75, 1.5)
    """

    __array_ufunc__ = None  # so that numpy scalars leave ``factor * source`` to the source

    def field(self, s: npt.ArrayLike) -> Floats:
        """Flux density sensed along the scan line.

        Parameters
        ----------
        s : array_like
            Positions, m; any shape.

        Returns
        -------
        array of the same shape
            T.
        """
        return self._field(np.asarray(s, dtype=np.float64))

    def integral(self, s: npt.ArrayLike) -> Floats:
        """Integral of the field up to each position; its constant is fixed but arbitrary.

        Parameters
        ----------
        s : array_like
            Positions, m; any shape.

        Returns
        -------
        array of the same shape
            T m.
        """
        return self._integral(np.asarray(s, dtype=np.float64))

    def between(self, start: float, stop: float) -> float:
        """Integral of the field from start to stop (m): T m."""
        first, last = self.integral([start, stop])
        return float(last - first)

    @property
    @abstractmethod
    def total(self) -> float:
        """Integral over the whole line, T m; infinite where it diverges."""

    @property
    def centre(self) -> float:
        """Where the central field is taken, m."""
        return 0.0

    @property
    def effective_length(self) -> float:
        """Total divided by the field at the centre, m; infinite where the total diverges.

        Raises
        ------
        RefusedError
            If the field vanishes at the centre.
        """
        central = float(self.field(self.centre))
        if central == 0.0:
            raise RefusedError(
                "no-central-field",
                type(self).__name__,
                f"the field vanishes at the centre ({self.centre:g} m), so no length can be "
                "formed from it; divide the total by a field of your choice.",
            )
        return self.total / central

    def shifted(self, by: float) -> Source:
        """Return the same source moved by so much (m) along the line."""
        return Shifted(self, by)

    @abstractmethod
    def _field(self, s: Floats) -> Floats:
        """Field at an array of positions."""

    @abstractmethod
    def _integral(self, s: Floats) -> Floats:
        """Integral up to each of an array of positions."""

    def __add__(self, other: Source) -> Source:
        if not isinstance(other, Source):
            return NotImplemented
        return Sum((*_parts(self), *_parts(other)))

    def __radd__(self, other: object) -> Source:
        """Let ``sum(sources)`` start from its zero."""
        return self if isinstance(other, int) and other == 0 else NotImplemented

    def __sub__(self, other: Source) -> Source:
        return self + -other

    def __mul__(self, factor: float) -> Source:
        return Scaled(self, factor)

    __rmul__ = __mul__

    def __neg__(self) -> Source:
        return Scaled(self, -1.0)


@dataclass(frozen=True)
class Sum(Source):
    """Several sources at once; made by ``+``.

    Its central field is that of the common centre of its parts.
    """

    parts: tuple[Source, ...]

    @property
    def total(self) -> float:
        """Sum of the totals, T m; refused where infinite ones of both signs meet."""
        total = sum(part.total for part in self.parts)
        if math.isnan(total):
            raise RefusedError(
                "total-diverges",
                "Sum",
                "two parts of opposite sign diverge, so their sum has no total known in "
                "advance; integrate between finite limits instead.",
            )
        return total

    @property
    def centre(self) -> float:
        """The parts' common centre, m; refused where they differ."""
        centres = {part.centre for part in self.parts}
        if len(centres) > 1:
            raise RefusedError(
                "no-common-centre",
                "Sum",
                f"the parts are centred at different places, {sorted(centres)} m, so the sum "
                "has no central field; divide the total by a field of your choice.",
            )
        return centres.pop()

    def _field(self, s: Floats) -> Floats:
        return np.asarray(sum(part.field(s) for part in self.parts))

    def _integral(self, s: Floats) -> Floats:
        return np.asarray(sum(part.integral(s) for part in self.parts))


@dataclass(frozen=True)
class Scaled(Source):
    """A source multiplied by a number; made by ``*``."""

    source: Source
    factor: float

    def __post_init__(self) -> None:
        require_finite(self, "factor")

    @property
    def total(self) -> float:
        """Scaled total, T m."""
        return self.factor * self.source.total if self.factor else 0.0

    @property
    def centre(self) -> float:
        """Centre of the source, m."""
        return self.source.centre

    def _field(self, s: Floats) -> Floats:
        return self.factor * self.source.field(s)

    def _integral(self, s: Floats) -> Floats:
        return self.factor * self.source.integral(s)


@dataclass(frozen=True)
class Shifted(Source):
    """A source moved along the line; made by :meth:`Source.shifted`."""

    source: Source
    by: float

    def __post_init__(self) -> None:
        require_finite(self, "by")

    @property
    def total(self) -> float:
        """Total of the source, T m: a shift leaves it alone."""
        return self.source.total

    @property
    def centre(self) -> float:
        """Shifted centre, m."""
        return self.source.centre + self.by

    def _field(self, s: Floats) -> Floats:
        return self.source.field(s - self.by)

    def _integral(self, s: Floats) -> Floats:
        return self.source.integral(s - self.by)


@dataclass(frozen=True)
class Uniform(Source):
    """The same field B0 (T) everywhere, like that of the Earth.

    Examples
    --------
    >>> Uniform(50e-6).total
    inf
    """

    B0: float

    def __post_init__(self) -> None:
        require_finite(self, "B0")

    @property
    def total(self) -> float:
        """Infinite, unless the field is zero."""
        return math.copysign(math.inf, self.B0) if self.B0 else 0.0

    def _field(self, s: Floats) -> Floats:
        return np.full_like(s, self.B0)

    def _integral(self, s: Floats) -> Floats:
        return self.B0 * s


def _parts(source: Source) -> tuple[Source, ...]:
    """Summands of a source, so that sums of sums stay flat."""
    return source.parts if isinstance(source, Sum) else (source,)


def require_finite(source: Source, *names: str) -> None:
    """Refuse parameters of a source that are not finite numbers."""
    for name in names:
        value = getattr(source, name)
        if not isinstance(value, Real) or not math.isfinite(value):
            raise InputError(f"{type(source).__name__}.{name}", repr(value), "a finite number (SI)")


def require_positive(source: Source, *names: str) -> None:
    """Refuse parameters of a source that are not finite numbers above zero."""
    require_finite(source, *names)
    for name in names:
        value = getattr(source, name)
        if value <= 0:
            raise InputError(
                f"{type(source).__name__}.{name}", repr(value), "a number above zero (SI)"
            )
