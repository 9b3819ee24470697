"""Faults of the logger: rows that are lost, repeated, out of order or timed wrongly."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.faults.kind import FaultKind

if TYPE_CHECKING:
    from fieldmap.bench.faults.setting import Faulty, Setting
    from fieldmap.bench.faults.table import Ints

__all__ = ["ROW_FAULTS"]

_FEW: Final = 0.01  # of the rows: more of them are lost in one stretch


def _missed(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Rows lost: some here and there, or a whole stretch."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    lost = _rows(setting, index, size, rng)
    return setting.whole().with_table(
        index, table.taken(np.setdiff1d(np.arange(len(table.time)), lost))
    )


def _repeated(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """Rows written twice."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    twice = np.zeros(len(table.time), dtype=np.intp)
    twice[_rows(setting, index, size, rng)] = 1
    rows = np.repeat(np.arange(len(table.time)), 1 + twice)
    return setting.whole().with_table(index, table.taken(rows), structural=True)


def _rows(setting: Setting, index: int, size: float, rng: np.random.Generator) -> Ints:
    """So many rows of a pass while it travels: a share of it below one, else a number."""
    length = len(setting.campaign.passes[index].time)
    count = max(1, min(round(size if size >= 1 else size * length), length - 4))
    if count <= max(3, _FEW * length):
        return np.array([setting.instant(index, rng) for _ in range(count)])
    start = int(np.clip(setting.instant(index, rng) - count // 2, 1, length - 1 - count))
    return np.arange(start, start + count)


def _reordered(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """A stretch of rows written the wrong way round, under times that go on."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    length = len(table.time)
    count = min(round(size), length - 2)
    start = int(np.clip(setting.instant(index, rng), 1, length - 1 - count))
    rows = np.arange(length)
    rows[start : start + count] = rows[start : start + count][::-1]
    changed = replace(table.taken(rows), time=table.time)
    return setting.whole().with_table(index, changed)


def _clock_jump(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The clock of one pass jumps ahead."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    row = setting.instant(index, rng)
    time = table.time + size * (np.arange(len(table.time)) >= row)
    return setting.whole().with_table(index, replace(table, time=time))


def _clock_rate(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The clock of one pass runs fast or slow."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    time = table.time[0] + (table.time - table.time[0]) * (1.0 + size) ** rng.choice([-1.0, 1.0])
    return setting.whole().with_table(index, replace(table, time=time))


def _truncated(setting: Setting, size: float, rng: np.random.Generator) -> Faulty:
    """The file of one pass ends early."""
    index = setting.pick(rng)
    table = setting.whole().table(index)
    kept = max(3, round((1.0 - size) * len(table.time)))
    return setting.whole().with_table(index, table.taken(np.arange(kept)))


ROW_FAULTS: Final = (
    FaultKind(
        "missed-triggers",
        "rows of one pass are lost",
        (1.0, 3.0, 10.0, 0.1, 0.4),
        "rows, or a share of them",
        _missed,
        "overlap",
        "cumulative flux loses nothing with a row; lost increments are a step that another pass "
        "does not have, and leave a hole in time and position",
    ),
    FaultKind(
        "repeated-rows",
        "rows of one pass stand twice",
        (1.0, 3.0, 10.0, 0.1, 0.5),
        "rows, or a share of them",
        _repeated,
        "file",
        "the same time stands twice",
    ),
    FaultKind(
        "reordered-rows",
        "some rows of one pass stand in the wrong order",
        (2.0, 3.0, 10.0, 50.0, 200.0),
        "rows",
        _reordered,
        "smoothness",
        "the position runs back and forth within the travel",
    ),
    FaultKind(
        "clock-jump",
        "the clock of one pass jumps ahead",
        (1e-3, 0.1, 1.0, 10.0, 100.0),
        "s",
        _clock_jump,
        "overlap",
        "a voltage that is integrated over time that never was is a step that another pass does "
        "not have; of other records the noise is judged wrongly, no more",
    ),
    FaultKind(
        "clock-rate",
        "the clock of one pass runs fast or slow",
        (1e-5, 1e-3, 1e-2, 0.1, 1.0),
        "relative",
        _clock_rate,
        "overlap",
        "a voltage integrated over wrong time is a wrong gain of that pass alone; of other "
        "records the noise is judged wrongly, no more",
    ),
    FaultKind(
        "truncated-file",
        "the file of one pass ends early",
        (0.02, 0.1, 0.3, 0.6, 0.9),
        "share lost",
        _truncated,
        "file",
        "what is left is right; a stretch that no other pass covers is missed",
    ),
)
