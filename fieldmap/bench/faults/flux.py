"""Faults of the integrator and of its leads: what it shows and what came in."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.faults.kind import FaultKind

if TYPE_CHECKING:
    from fieldmap.bench.faults.setting import Faulty, Setting

__all__ = ["FLUX_FAULTS"]

_NOISES: Final = (3.0, 10.0, 30.0, 100.0, 1000.0)
_MAINS: Final = (50.0, 60.0)  # Hz
_SPIKES: Final = 3
_ROOM: Final = 20.0  # degC


def _step(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The flux jumps once."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    jump = size * setting.walked(index, setting.gap_time(index)) * rng.choice([-1.0, 1.0])
    after = np.arange(len(table.time)) >= setting.instant(index, rng)
    return setting.whole().with_table(index, table.with_flux(jump * after))


def _saturation(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """What is shown stops at a level that nobody stated."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    most = (1.0 - size) * float(np.abs(table.samples).max())
    clipped = np.clip(table.samples, -most, most)
    return setting.whole().with_table(index, replace(table, samples=clipped))


def _range_change(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """From an instant on the flux counts too much, or too little."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    factor = (1.0 + size) ** rng.choice([-1.0, 1.0])
    after = np.arange(len(table.time)) >= setting.instant(index, rng)
    return setting.whole().with_table(index, table.with_factor(np.where(after, factor, 1.0)))


def _bent_drift(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The drift settles as the integrator warms up, or grows."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    time = table.time - table.time[0]
    share = time / time[-1]
    shape = share**2 if rng.random() < 0.5 else 1.0 - np.exp(-3.0 * share)
    size *= setting.walked(index, float(time[-1])) * rng.choice([-1.0, 1.0])
    return setting.whole().with_table(index, table.with_flux(size * shape))


def _warm_drift(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The drift of every pass follows the room's temperature, which is recorded."""
    period, phase = rng.uniform(0.7, 2.5), rng.uniform(0.0, 2.0 * np.pi)
    made = setting.whole()
    for index, one in enumerate(setting.campaign.passes):
        table = made.table(index)
        share = (one.time - one.time[0]) / (one.time[-1] - one.time[0])
        warmer = np.sin(2.0 * np.pi * share / period + phase + index)
        drifted = np.cumsum(np.diff(share, prepend=0.0) * warmer)
        size_here = size * setting.walked(index, float(one.time[-1] - one.time[0]))
        table = replace(table.with_flux(size_here * drifted), temperature=_ROOM + warmer)
        made = made.with_table(index, table)
    return made


def _polarity(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The leads are turned round for the last part of a pass, or for all of it."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    length = len(table.time)
    turned = np.arange(length) >= round((1.0 - size) * length)
    return setting.whole().with_table(index, table.with_factor(np.where(turned, -1.0, 1.0)))


def _mains(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The mains come in."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    turns = rng.choice(_MAINS) * (1.0 + rng.uniform(-2e-3, 2e-3)) * table.time + rng.random()
    hum = size * setting.sample_noise(index) * np.sin(2.0 * np.pi * turns)
    return setting.whole().with_table(index, replace(table, samples=table.samples + hum))


def _spikes(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """A few samples are far off."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    samples = table.samples.copy()
    for _ in range(_SPIKES):
        off = size * setting.sample_noise(index) * rng.choice([-1.0, 1.0])
        samples[setting.instant(index, rng)] += off
    return setting.whole().with_table(index, replace(table, samples=samples))


def _coarse(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The samples are rounded to steps that nobody stated."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    step = size * setting.sample_noise(index)
    rounded = np.round(table.samples / step) * step
    return setting.whole().with_table(index, replace(table, samples=rounded))


FLUX_FAULTS: Final = (
    FaultKind(
        "integrator-step",
        "the flux of one pass jumps once",
        _NOISES,
        "times the noise over a gap's travel",
        _step,
        "overlap",
        "another pass over the same stretch has no such step, and no field has",
    ),
    FaultKind(
        "saturation",
        "what the integrator of one pass shows is clipped at a level not stated",
        (0.001, 0.01, 0.05, 0.2, 0.5),
        "share of the largest sample cut",
        _saturation,
        "overlap",
        "samples stand at their largest value; another pass over the stretch goes on",
    ),
    FaultKind(
        "range-change",
        "the range of the integrator changes during one pass",
        (1e-4, 1e-3, 1e-2, 0.1, 9.0),
        "relative",
        _range_change,
        "overlap",
        "the gain of one part of a pass disagrees with all others",
    ),
    FaultKind(
        "drift-bends",
        "the drift of one pass is no constant rate",
        _NOISES,
        "times the noise of the whole pass",
        _bent_drift,
        "overlap",
        "dwells at both ends drift differently, and another pass disagrees",
    ),
    FaultKind(
        "drift-with-temperature",
        "the drift follows a recorded temperature",
        _NOISES,
        "times the noise of the whole pass",
        _warm_drift,
        "overlap",
        "passes disagree in proportion to the recorded temperature",
    ),
    FaultKind(
        "polarity",
        "the leads are turned round during one pass, or for all of it",
        (0.003, 0.03, 0.1, 0.3, 1.0),
        "share of the pass",
        _polarity,
        "overlap",
        "the pass has the opposite sign of all others",
    ),
    FaultKind(
        "mains",
        "the mains come into one pass",
        (1.0, 5.0, 30.0, 200.0, 3000.0),
        "times the noise of a sample",
        _mains,
        "smoothness",
        "a line in the spectrum of the residuals",
    ),
    FaultKind(
        "spikes",
        "three samples of one pass are far off",
        (5.0, 30.0, 200.0, 2000.0, 10000.0),
        "times the noise of a sample",
        _spikes,
        "smoothness",
        "a single reading far from its neighbours; of increments or voltage a step of the flux",
    ),
    FaultKind(
        "quantisation",
        "samples of one pass are rounded to coarse steps not stated",
        (1.0, 5.0, 30.0, 200.0, 2000.0),
        "times the noise of a sample",
        _coarse,
        "smoothness",
        "few distinct values stand in the column",
    ),
)
