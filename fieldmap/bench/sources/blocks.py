"""Fields of permanent magnets: a block, and the slot between two of them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import product
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.bench.sources.algebra import Source, require_finite, require_positive
from fieldmap.errors import InputError

if TYPE_CHECKING:
    from fieldmap.readings.passes import Floats

__all__ = ["Block", "Slot"]


@dataclass(frozen=True)
class Block(Source):
    """Block polarised along y; the probe senses By along a line parallel to z beside it.

    Two charged faces make the field: each corner contributes ``atan(X Z / (Y R))``, whose
    integral over Z is elementary too. Both are written as a step that is exact plus a rest
    that fades with the distance, so that nothing cancels far from the block.

    Parameters
    ----------
    polarisation : float
        J, T.
    width, height, length : float
        Sides along x, y and z, m.
    y : float
        Distance of the scan line from the middle of the block, m: beyond height/2.
    x : float
        Sideways offset of the scan line, m.

    Examples
    --------
    >>> block = Block(1.2, width=0.04, height=0.02, length=0.1, y=0.02)
    >>> round(block.total, 12)
    0.019829920865
    """

    polarisation: float
    width: float
    height: float
    length: float
    y: float
    x: float = 0.0

    def __post_init__(self) -> None:
        require_finite(self, "polarisation", "x", "y")
        require_positive(self, "width", "height", "length")
        if abs(self.y) <= self.height / 2:
            raise InputError(
                "Block.y",
                f"{self.y} m",
                f"a line above or below the block, beyond {self.height / 2} m",
            )

    @property
    def total(self) -> float:
        """(J c / 2 pi) times the sum over the four long edges of atan(X/Y), T m."""
        angles = math.fsum(sign * math.atan(X / Y) for sign, X, Y in self._edges())
        return self.polarisation * self.length / (2.0 * math.pi) * angles

    def _edges(self) -> list[tuple[int, float, float]]:
        """Sign and transverse distances of the four edges along the travel."""
        return [
            (i * j, self.x + i * self.width / 2, self.y - j * self.height / 2)
            for i, j in product((1, -1), repeat=2)
        ]

    def _field(self, s: Floats) -> Floats:
        front, back = s + self.length / 2, s - self.length / 2
        step = np.sign(front) - np.sign(back)
        angle = np.zeros_like(s)
        for sign, X, Y in self._edges():
            rest = np.sign(front) * _fading(X, Y, front) - np.sign(back) * _fading(X, Y, back)
            angle += sign * (step * math.atan(X / Y) - rest)
        return self.polarisation / (4.0 * math.pi) * angle

    def _integral(self, s: Floats) -> Floats:
        front, back = s + self.length / 2, s - self.length / 2
        path = np.clip(2.0 * s, -self.length, self.length)
        area = np.zeros_like(s)
        for sign, X, Y in self._edges():
            rest = _fading_integral(X, Y, front) - _fading_integral(X, Y, back)
            area += sign * (path * math.atan(X / Y) + rest)
        return self.polarisation / (4.0 * math.pi) * area


@dataclass(frozen=True)
class Slot(Source):
    """Narrow slot between two equal blocks polarised across it; the probe travels midway.

    With a gap of about a millimetre this is the sharpest profile a bench is asked to map.

    Parameters
    ----------
    polarisation : float
        J of both blocks, T.
    width, height, length : float
        Sides of each block along x, y (across the slot) and z (the travel), m.
    gap : float
        Clear height of the slot, m.

    Examples
    --------
    >>> slot = Slot(1.2, width=0.01, height=0.01, length=0.008, gap=0.0012)
    >>> round(float(slot.field(0.0)), 6)
    0.938892
    """

    polarisation: float
    width: float
    height: float
    length: float
    gap: float

    def __post_init__(self) -> None:
        require_finite(self, "polarisation")
        require_positive(self, "width", "height", "length", "gap")

    @property
    def total(self) -> float:
        """Twice the total of one block, T m."""
        return 2.0 * self._block().total

    def _block(self) -> Block:
        """One of the two blocks, seen from the middle of the slot."""
        middle = (self.gap + self.height) / 2
        return Block(self.polarisation, self.width, self.height, self.length, y=middle)

    def _field(self, s: Floats) -> Floats:
        return 2.0 * self._block().field(s)

    def _integral(self, s: Floats) -> Floats:
        return 2.0 * self._block().integral(s)


def _fading(X: float, Y: float, Z: Floats) -> Floats:
    """Return ``atan(X/Y) - atan(X |Z| / (Y R))``, without cancellation."""
    R = np.sqrt(X**2 + Y**2 + Z**2)
    missing = (X**2 + Y**2) / (R * (R + np.abs(Z)))  # 1 - |Z|/R
    return np.asarray(np.arctan(X * Y * missing / (Y**2 + X**2 * np.abs(Z) / R)))


def _fading_integral(X: float, Y: float, Z: Floats) -> Floats:
    """Return the integral of ``atan(X Z / (Y R))`` over Z, less its asymptote."""
    corner: Floats = Y * np.arcsinh(X / np.hypot(Y, Z))
    return corner - np.abs(Z) * _fading(X, Y, Z)
