"""Pairs of simulated maps: are shift and scale as uncertain as stated, is equal found equal?

Maps of one bench share one drawn gain and stage scale; those of two benches draw their own.
Each campaign draws its drifts, its offset and its lag.
"""

from __future__ import annotations

import os
from dataclasses import dataclass

import numpy as np
import pytest

from fieldmap.magnet.comparison.compare import compare
from tests.pairs import BUMP, SOFT, errors_of, map_of

SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
PAIRS = 24 if SAMPLE else 100
NEAR_ONE = 3 / np.sqrt(2 * PAIRS)  # three standard deviations of an rms
CLAIMED = 0.05 + 3 * np.sqrt(0.05 * 0.95 / PAIRS)  # 5 % meant, three standard deviations above


@dataclass(frozen=True)
class Outcome:
    """Errors in units of u, and whether a difference was claimed."""

    shift: float
    scale: float
    equal_before: bool
    equal_after: bool
    results: tuple[float, ...]
    found: bool


def outcome(index, *, same_bench):
    rng = np.random.default_rng(index + 555)
    shift, scale = rng.uniform(-2e-3, 2e-3), rng.uniform(-3e-3, 3e-3)
    seed = 3 * index
    bench = errors_of(seed) if same_bench else None
    first = map_of(SOFT, seed, bench)
    moved = map_of((1 + scale) * SOFT.shifted(shift), seed + 1, bench)
    again = map_of(SOFT, seed + 2, bench)
    found = compare(moved, first, same_bench=same_bench)
    equal = compare(again, first, same_bench=same_bench)
    bumped = compare(map_of(SOFT + 2.5 * BUMP, seed + 2, bench), first, same_bench=same_bench)
    return Outcome(
        (found.shift.value - shift) / found.shift.u,
        (found.scale.value - scale) / found.scale.u,
        bool(equal.before.stretches),
        bool(equal.after.stretches),
        tuple(one.difference.value / one.difference.u for one in equal.results.values()),
        any(one.start < 0.07 < one.stop for one in bumped.stretches),
    )


@pytest.mark.slow
@pytest.mark.parametrize("same_bench", [True, False])
def test_pairs(same_bench):
    found = [outcome(i, same_bench=same_bench) for i in range(PAIRS)]
    shift, scale = (
        np.sqrt(np.mean([getattr(one, name) ** 2 for one in found])) for name in ("shift", "scale")
    )
    results = np.sqrt(np.mean([np.square(one.results) for one in found], axis=0))
    claimed = [
        np.mean([getattr(one, f"equal_{when}") for one in found]) for when in ("before", "after")
    ]
    power = np.mean([one.found for one in found])
    print(
        f"\n{PAIRS} pairs, same_bench={same_bench}: rms of error/u: shift {shift:.2f}, scale "
        f"{scale:.2f}, results {results.round(2)}; equal magnets called different: as they stand "
        f"{claimed[0]:.1%}, aligned {claimed[1]:.1%}; a bump of 0.85 mT found in {power:.0%}"
    )
    assert abs(shift - 1) < NEAR_ONE
    assert abs(scale - 1) < NEAR_ONE
    assert np.all(np.abs(results - 1) < NEAR_ONE + 0.04)
    assert max(claimed) <= CLAIMED
    assert power > 0.9
