"""What is known of a pass from elsewhere, beside what one of its dwells tells."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from fieldmap.estimate.corrected import scale_of
from fieldmap.estimate.dwell import dwell_of
from fieldmap.estimate.dwell_noise import dwell_noise, jitter_seen
from fieldmap.estimate.map import map_lines, map_passes
from fieldmap.estimate.provenance import (
    map_corrections,
    map_joint,
    map_stage,
    map_unknowns,
)

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.dwell import Dwell
    from fieldmap.estimate.dwell_noise import DwellNoise
    from fieldmap.readings.passes import Pass

__all__ = ["WITH_JITTER", "Heard", "Level", "hear", "mains_words", "pass_index"]

MAINS: Final = (50.0, 60.0)  # Hz
HARMONICS: Final = 5
WITH_JITTER: Final = ", with jitter"


@dataclass(frozen=True)
class Level:
    """A walk (V s per root second) and a read noise (V s), and whose they are."""

    name: str
    walk: float
    read: float


@dataclass(frozen=True, eq=False)
class Heard:
    """One dwell of a pass, with the noise levels to compare.

    Parameters
    ----------
    one : Pass
        The pass.
    dwell : Dwell
        The dwell.
    noise : DwellNoise
        What it tells.
    levels : tuple of Level
        That of the dwell first, then what is stated or was used.
    jitter : float
        Noise of a reading that the stated jitter of the position makes there, V s; zero where
        no map tells the field.
    """

    one: Pass
    dwell: Dwell
    noise: DwellNoise
    levels: tuple[Level, ...]
    jitter: float
    drift: tuple[float, float] | None = None


def hear(one: Pass, number: int = 1, fmap: xr.Dataset | None = None) -> Heard:
    """A dwell of a pass beside what is known of the integrator from elsewhere.

    Parameters
    ----------
    one : Pass
        The pass.
    number : int
        Its dwell, counted from 1.
    fmap : xarray.Dataset, optional
        A map that the pass is in: it tells the noise that was used, and the field there.

    Returns
    -------
    Heard

    Raises
    ------
    InputError
        No such dwell, or readings that are not evenly spaced.

    Examples
    --------
    >>> from fieldmap.readings import load
    >>> from fieldmap.shipped import demo_folder
    >>> heard = hear(load(demo_folder() / "slot").passes[0])
    >>> [level.name for level in heard.levels]
    ['this dwell', 'stated']
    """
    dwell = dwell_of(one, number)
    noise = dwell_noise(dwell)
    levels = [Level("this dwell", noise.walk, noise.read or 0.0), *_stated(one)]
    index = None if fmap is None else pass_index(fmap, one)
    if fmap is None or index is None:
        return Heard(one, dwell, noise, tuple(levels), 0.0)
    facts = map_passes(fmap)[index]
    levels.append(Level("found by the map", facts["walk_noise"], facts["read_noise"]))
    place = [(line.x, line.y) for line in map_lines(fmap)].index((facts["x"], facts["y"]))
    line = map_lines(fmap)[place]
    at = min(max(dwell.at, line.low), line.high)
    jitter = jitter_seen(line, one.probe, at, map_stage(fmap).u_position)
    used = levels if facts["walk_stated"] and facts["read_stated"] else [levels[0], levels[-1]]
    shown = [used[0], _jittery(used[1], jitter)]
    return Heard(one, dwell, noise, tuple(shown), jitter, _drift(fmap, place, one.name))


def _stated(one: Pass) -> list[Level]:
    """What the campaign states of both noises, the rounding of the readings included."""
    stated = one.integrator
    if one.record == "voltage":  # samples have no noise beside the walk of their integral
        read: float | None = 0.0
    elif stated.read_noise is None:
        read = None
    else:
        read = math.hypot(stated.read_noise, stated.resolution / math.sqrt(12))
    if stated.walk_noise is None or read is None:
        return []
    return [Level("stated", stated.walk_noise, read)]


def _jittery(level: Level, jitter: float) -> Level:
    """A level with the noise that the jitter of the position adds, if there is any."""
    if not jitter > 0:
        return level
    return Level(f"{level.name}{WITH_JITTER}", level.walk, math.hypot(level.read, jitter))


def _drift(fmap: xr.Dataset, line: int, name: str) -> tuple[float, float] | None:
    """Drift of a pass as the map found it; None where it is stated to be certain."""
    unknowns, joint = map_unknowns(fmap, line), map_joint(fmap, line)
    # the map has the drift of the flux as corrected, the dwell that of the readings
    scale = scale_of([each.correction for each in map_corrections(fmap)], name)
    for i, unknown in enumerate(unknowns, start=len(joint.values) - len(unknowns)):
        if (unknown.kind, unknown.where) == ("drift", name):
            u = math.sqrt(float(joint.covariance[i, i]))
            unit = unknown.sd / scale
            return float(joint.values[i]) * unit, u * abs(unit)
    return None


def pass_index(fmap: xr.Dataset, one: Pass) -> int | None:
    """Index of a pass in `map_passes`; None where the map does not have it."""
    for index, facts in enumerate(map_passes(fmap)):
        if (facts["name"], facts["x"], facts["y"]) == (one.name, one.x, one.y):
            return index
    return None


def mains_words(frequency: float, rate: float, width: float) -> str:
    """Which harmonic of the mains a line may be, folded by the rate of the readings or not.

    Parameters
    ----------
    frequency : float
        Hz.
    rate : float
        Readings per second, Hz.
    width : float
        How far off a line may be, Hz.

    Returns
    -------
    str
        Empty where it is none.

    Examples
    --------
    >>> mains_words(50.02, 1000.0, 0.1), mains_words(10.0, 40.0, 0.1)
    ('mains, 50 Hz', 'mains, 50 Hz seen at 10 Hz')
    """
    for base in MAINS:
        for order in range(1, HARMONICS + 1):
            true = order * base
            seen = abs(true - rate * round(true / rate))
            if abs(seen - frequency) <= width:
                folded = "" if seen == true else f" seen at {seen:g} Hz"
                return f"mains, {true:g} Hz{folded}"
    return ""
