"""Faults of the stage: where the probe was read and where the table says it was."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.faults.kind import FaultKind

if TYPE_CHECKING:
    from fieldmap.bench.faults.setting import Faulty, Setting
    from fieldmap.bench.faults.table import Ints, Table
    from fieldmap.readings.passes import Floats

__all__ = ["POSITION_FAULTS"]

_SLIPS: Final = 8
_RELATIVE: Final = (1e-5, 1e-4, 1e-3, 1e-2, 0.1)
_OF_GAP: Final = (1e-4, 1e-3, 1e-2, 0.1, 0.5)


def _slip(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """One jump of the encoder."""
    index = setting.pick(rng)
    jump = size * setting.gap * rng.choice([-1.0, 1.0])
    return _slipped(setting, index, np.array([setting.instant(index, rng)]), jump)


def _lost_counts(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Several slips against the travel."""
    index = setting.pick(rng)
    rows = np.array([setting.instant(index, rng) for _ in range(_SLIPS)])
    position = setting.campaign.passes[index].position
    forward = 1.0 if position[-1] >= position[0] else -1.0
    return _slipped(setting, index, rows, -forward * size * setting.gap / _SLIPS)


def _slipped(setting: Setting, index: int, rows: Ints, jump: float) -> Faulty:
    """The encoder shows `jump` more from each of some rows on."""
    table = setting.whole().table(index)
    count = (np.arange(len(table.position))[:, None] >= rows).sum(axis=1)
    return setting.whole().with_table(index, replace(table, position=table.position + jump * count))


def _encoder_scale(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The encoder of one pass counts too much, from where the pass began."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    start = table.position[0]
    position = start + (table.position - start) * (1.0 + size * rng.choice([-1.0, 1.0]))
    return setting.whole().with_table(index, replace(table, position=position))


def _moved(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The setup moved before one pass."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    position = table.position + size * setting.gap * rng.choice([-1.0, 1.0])
    return setting.whole().with_table(index, replace(table, position=position))


def _scale_everywhere(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Every position is too large by the same share."""
    factor = 1.0 + size * rng.choice([-1.0, 1.0])
    return setting.whole().with_tables(
        lambda _, table: replace(table, position=table.position * factor)
    )


def _position_unit(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Positions of one pass in a wrong unit."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    factor = size ** rng.choice([-1.0, 1.0])
    return setting.whole().with_table(index, replace(table, position=table.position * factor))


def _lag(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """One pass was read late, or early."""
    index = setting.pick(rng)
    stated = max(setting.campaign.stage.u_lag, 1e-4)
    late = size * stated * rng.choice([-1.0, 1.0])
    one = setting.campaign.passes[index]
    return _read_elsewhere(setting, index, np.interp(one.time + late, one.time, one.position))


def _backlash(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The play of the stage is far larger than stated, in every pass."""
    half = 0.5 * size * setting.gap * rng.choice([-1.0, 1.0])
    made = setting.whole()
    for index, one in enumerate(setting.campaign.passes):
        sense = np.sign(one.position[-1] - one.position[0])
        made = made.with_table(index, _elsewhere(setting, index, one.position + half * sense))
    return made


def _read_elsewhere(setting: Setting, index: int, position: Floats) -> Faulty:
    return setting.whole().with_table(index, _elsewhere(setting, index, position))


def _elsewhere(setting: Setting, index: int, position: Floats) -> Table:
    """The table of a pass whose probe truly was elsewhere."""
    added = setting.linked(index, position=position) - setting.linked(index)
    return setting.whole().table(index).with_flux(added - added[0])


POSITION_FAULTS: Final = (
    FaultKind(
        "encoder-slip",
        "the encoder of one pass jumps once",
        _OF_GAP,
        "gaps",
        _slip,
        "overlap",
        "a pass over the same stretch has its fringe elsewhere, or the jump shows in the speed",
    ),
    FaultKind(
        "lost-counts",
        "the encoder of one pass loses counts several times",
        _OF_GAP,
        "gaps in all",
        _lost_counts,
        "overlap",
        "a pass over the same stretch has its fringe elsewhere",
    ),
    FaultKind(
        "encoder-scale",
        "the encoder scale of one pass is wrong",
        _RELATIVE,
        "relative",
        _encoder_scale,
        "overlap",
        "the fringe of another pass lies elsewhere; a wire's flux tells its travel as well",
    ),
    FaultKind(
        "setup-moved",
        "the setup moved before one pass",
        _OF_GAP,
        "gaps",
        _moved,
        "overlap",
        "the fringe of another pass lies elsewhere",
    ),
    FaultKind(
        "position-unit",
        "positions of one pass are off by a power of ten",
        (10.0, 100.0, 1e3, 1e6, 1e9),
        "factor or divisor",
        _position_unit,
        "overlap",
        "the pass covers another stretch than the others, at another speed",
    ),
    FaultKind(
        "position-scale-everywhere",
        "all positions are too large by one factor",
        _RELATIVE,
        "relative",
        _scale_everywhere,
        "nothing",
        "every pass and every result in metres stretches alike: only another length standard "
        "tells (a wire and a coil together tell it weakly)",
    ),
    FaultKind(
        "lag",
        "one pass was read late or early",
        (1.0, 5.0, 30.0, 200.0, 2000.0),
        "u of the stated lag, 0.1 ms at least",
        _lag,
        "overlap",
        "the fringe of another pass lies elsewhere, most of all of one in the other direction",
    ),
    FaultKind(
        "backlash",
        "the play of the stage is far larger than stated",
        _OF_GAP,
        "gaps",
        _backlash,
        "overlap",
        "passes in both directions disagree; in one direction it is an offset of the stage",
    ),
)
