"""Random magnets for the calibration study, and what an engineer would know of each."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
from scipy.constants import mu_0

from fieldmap.bench.sources import EngeMagnet, Slot, Solenoid, Source, TanhMagnet
from fieldmap.readings import Axis, Magnet

if TYPE_CHECKING:
    from collections.abc import Callable

    from fieldmap.readings import Floats

DIPOLE_FRINGE: Final = np.array([0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111])


@dataclass(frozen=True)
class CoaxialLoops(Source):
    """Loops of one radius (m) on one axis at places (m) with currents (A), seen on the axis."""

    radius: float
    places: tuple[float, ...]
    currents: tuple[float, ...]

    @property
    def total(self) -> float:
        """Ampere's law, T m."""
        return mu_0 * sum(self.currents)

    def _field(self, s: Floats) -> Floats:
        pairs = zip(self.places, self.currents, strict=True)
        shape = sum(current * (self.radius**2 + (s - z) ** 2) ** -1.5 for z, current in pairs)
        return np.asarray(mu_0 / 2.0 * self.radius**2 * shape)

    def _integral(self, s: Floats) -> Floats:
        pairs = zip(self.places, self.currents, strict=True)
        shape = sum(current * (s - z) / np.hypot(self.radius, s - z) for z, current in pairs)
        return np.asarray(mu_0 / 2.0 * shape)


@dataclass(frozen=True)
class Drawn:
    """A true field, what the campaign file says of it, and coil windows that suit it (m)."""

    source: Source
    magnet: Magnet
    axis: Axis
    windows: tuple[float, float]

    @property
    def level(self) -> float:
        """Size of the field at the centre, T."""
        return abs(float(self.source.field(0.0)))


def draw_magnet(rng: np.random.Generator, *, small: bool) -> Drawn:
    """Draw a magnet: one of the families, with a slot of millimetres among them if `small`."""
    families: list[Callable[[np.random.Generator], Drawn]]
    families = [_tanh, _enge, _solenoid, _loops]
    if small:
        families.append(_slot)
    return families[rng.integers(len(families))](rng)


def log_uniform(rng: np.random.Generator, low: float, high: float) -> float:
    """Draw a number whose logarithm is evenly spread."""
    return float(np.exp(rng.uniform(np.log(low), np.log(high))))


def tidy(length: float, digits: int = 2) -> float:
    """Round a length as on a drawing: to so many digits."""
    return float(f"{length:.{digits}g}")


def _field_level(rng: np.random.Generator) -> float:
    """Between 0.01 and 1.5 T, of either sign."""
    return log_uniform(rng, 0.01, 1.5) * (1.0 if rng.random() < 0.8 else -1.0)


def _gap_magnet(rng: np.random.Generator, source: Source, gap: float, length: float) -> Drawn:
    """State gap, limits some gaps outside the iron, and a flat window well inside it."""
    inside = length / 2 - 1.2 * gap
    flat = tidy(inside * rng.uniform(0.3, 0.7))
    limit = tidy(length / 2 + gap * rng.uniform(4.0, 7.0), 3)
    iron = tidy(length - gap, 3)
    return Drawn(
        source,
        Magnet("dipole", "By", gap, iron_length=iron),
        Axis("z", (-limit, limit), (-flat, flat)),
        windows=(0.2 * gap, 0.9 * gap),
    )


def _tanh(rng: np.random.Generator) -> Drawn:
    gap = tidy(log_uniform(rng, 0.008, 0.1))
    length = gap * rng.uniform(4.0, 12.0)
    source = TanhMagnet(_field_level(rng), length, gap * rng.uniform(0.6, 1.2))
    return _gap_magnet(rng, source, gap, length)


def _enge(rng: np.random.Generator) -> Drawn:
    gap = tidy(log_uniform(rng, 0.008, 0.1))
    length = gap * rng.uniform(4.0, 12.0)
    ends = [tuple((DIPOLE_FRINGE * rng.uniform(0.95, 1.05, 6)).tolist()) for _ in range(2)]
    source = EngeMagnet(_field_level(rng), length, gap, *ends)
    return _gap_magnet(rng, source, gap, length)


def _solenoid(rng: np.random.Generator) -> Drawn:
    radius = log_uniform(rng, 0.012, 0.05)
    length = radius * rng.uniform(4.0, 12.0)
    unit = Solenoid(radius, length, turns=1.0, current=1.0)
    source = Solenoid(radius, length, 1.0, _field_level(rng) / float(unit.field(0.0)))
    return _wound(rng, source, radius, length / 2)


def _loops(rng: np.random.Generator) -> Drawn:
    """Some loops of one size, unevenly spaced and driven: no symmetry to lean on."""
    radius = log_uniform(rng, 0.012, 0.05)
    count = int(rng.integers(5, 9))
    places = radius * 0.8 * (np.arange(count) - (count - 1) / 2)
    places += radius * rng.uniform(-0.1, 0.1, count)
    currents = rng.uniform(0.9, 1.1, count)
    unit = CoaxialLoops(radius, tuple(places.tolist()), tuple(currents.tolist()))
    source = unit * (_field_level(rng) / float(unit.field(0.0)))
    return _wound(rng, source, radius, float(np.abs(places).max()))


def _wound(rng: np.random.Generator, source: Source, radius: float, end: float) -> Drawn:
    """State the bore, limits many radii outside, and a short window in the middle."""
    limit = tidy(end + radius * rng.uniform(8.0, 15.0), 3)
    flat = tidy(0.15 * end)
    bore = tidy(1.8 * radius)
    # the field bends all along a short coil: its window must be small beside the bore
    return Drawn(
        source,
        Magnet("solenoid", "Bz", bore),
        Axis("z", (-limit, limit), (-flat, flat)),
        windows=(0.05 * bore, 0.2 * bore),
    )


def _slot(rng: np.random.Generator) -> Drawn:
    gap = tidy(log_uniform(rng, 0.001, 0.005))
    length = gap * rng.uniform(4.0, 10.0)
    width, height = 0.01 * rng.uniform(1.0, 3.0, 2)
    source = Slot(float(rng.uniform(0.6, 1.3)), float(width), float(height), length, gap)
    limit = tidy(length / 2 + gap * rng.uniform(10.0, 20.0), 3)
    flat = tidy(length * rng.uniform(0.05, 0.15))
    axis = Axis("z", (-limit, limit), (-flat, flat))
    return Drawn(source, Magnet("other", "By", gap), axis, windows=(0.2 * gap, 0.9 * gap))
