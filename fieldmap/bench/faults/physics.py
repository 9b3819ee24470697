"""Faults of the probe, the magnet and its surroundings during one pass."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.faults.kind import FaultKind

if TYPE_CHECKING:
    from fieldmap.bench.faults.setting import Faulty, Setting
    from fieldmap.readings.passes import Floats

__all__ = ["PHYSICAL_FAULTS"]

_RELATIVE: Final = (1e-5, 1e-4, 1e-3, 1e-2, 0.1)


def _strength(setting: Setting, index: int, excess: Floats | float) -> Faulty:
    """One pass linked more flux by a share, reading by reading."""
    added = setting.linked(index) * excess
    table = setting.whole().table(index).with_flux(added - added[0])
    return setting.whole().with_table(index, table)


def _share(setting: Setting, index: int) -> Floats:
    """Share of the duration of a pass that has passed."""
    time = setting.campaign.passes[index].time
    return np.asarray((time - time[0]) / (time[-1] - time[0]))


def _warming_coil(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The gain grows as the probe warms up."""
    index = setting.pick(rng)
    return _strength(setting, index, size * rng.choice([-1.0, 1.0]) * _share(setting, index))


def _current_drift(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The supply wanders and nobody wrote it down."""
    index = setting.pick(rng)
    turns = _share(setting, index) / rng.uniform(0.6, 2.0) + rng.random()
    return _strength(setting, index, size * np.sin(2.0 * np.pi * turns))


def _tilt(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The probe leans in one pass."""
    return _strength(setting, setting.pick(rng), np.cos(size) - 1.0)


def _other_level(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The field is another one in one pass."""
    return _strength(setting, setting.pick(rng), size * rng.choice([-1.0, 1.0]))


def _turns(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """One pass was taken with more or fewer turns than the campaign says."""
    return _strength(setting, setting.pick(rng), (1.0 + size) ** rng.choice([-1.0, 1.0]) - 1.0)


def _stray(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """A uniform field stands over one pass; only wires sense it."""
    index = setting.pick(rng)
    one = setting.campaign.passes[index]
    added = np.zeros(len(one.time))
    if one.probe.senses_level:
        stray = size * setting.level(index) * rng.choice([-1.0, 1.0])
        added = one.probe.gain * stray * (one.position - one.position[0])
    return setting.whole().with_table(index, setting.whole().table(index).with_flux(added))


def _other_magnet(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """One pass was taken on another magnet: stronger by a share, and longer by it."""
    index = setting.pick(rng)
    stretch = (1.0 + size) ** rng.choice([-1.0, 1.0])
    one = setting.campaign.passes[index]
    there = setting.linked(index, position=one.position / stretch)
    added = (stretch**2 if one.probe.senses_level else stretch) * there - setting.linked(index)
    table = setting.whole().table(index).with_flux(added - added[0])
    return setting.whole().with_table(index, table)


PHYSICAL_FAULTS: Final = (
    FaultKind(
        "coil-warms",
        "the gain of the probe drifts during one pass",
        _RELATIVE,
        "relative",
        _warming_coil,
        "overlap",
        "the pass disagrees with others over the same stretch",
    ),
    FaultKind(
        "current-drifts",
        "the current wanders during one pass and is not recorded",
        _RELATIVE,
        "relative",
        _current_drift,
        "overlap",
        "the pass disagrees with others over the same stretch",
    ),
    FaultKind(
        "tilt",
        "the probe leans in one pass",
        (0.003, 0.01, 0.03, 0.1, 0.5),
        "rad",
        _tilt,
        "overlap",
        "the gain of the pass disagrees with all others",
    ),
    FaultKind(
        "field-changed",
        "the field is another one in one pass",
        _RELATIVE,
        "relative",
        _other_level,
        "overlap",
        "the gain of the pass disagrees with all others",
    ),
    FaultKind(
        "turns-one-pass",
        "one pass was taken with other turns than stated",
        (1e-4, 1e-3, 1e-2, 0.1, 1.0),
        "relative",
        _turns,
        "overlap",
        "the gain of the pass disagrees with all others",
    ),
    FaultKind(
        "stray-field",
        "a uniform stray field stands over one pass",
        (1e-6, 1e-5, 1e-4, 1e-3, 1e-2),
        "of the largest field",
        _stray,
        "overlap",
        "a wire's pass disagrees with others; it is like a drift, which a dwell tells apart",
    ),
    FaultKind(
        "other-magnet",
        "the file of one pass is that of another magnet",
        (1e-5, 1e-4, 1e-3, 1e-2, 0.3),
        "relative, of level and length",
        _other_magnet,
        "overlap",
        "the pass disagrees with others over the same stretch",
    ),
)
