"""Pairs of maps of one magnet, or of one that changed, from the simulated bench."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np

from fieldmap.bench.bench_errors import draw_errors
from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate import stitch
from tests.shop import MAGNET, measured, out_and_back, plan

SOFT = TanhMagnet(0.5, length=0.3, lam=0.02)  # its fringe is a few knots long
WIDE = replace(MAGNET, gap=0.06)
KNOTS = 0.006
BUMP = TanhMagnet(4e-4, length=0.03, lam=0.012).shifted(0.07)


def errors_of(seed):
    """The bench's errors for one campaign."""
    return draw_errors(plan(out_and_back(rate=20.0)), np.random.default_rng(seed))


def map_of(source, seed, bench=None, knots=KNOTS):
    """A map with drawn errors; gain and stage scale of another bench if one is given."""
    errors = errors_of(seed)
    if bench is not None:
        errors = replace(errors, gain=bench.gain, scale=bench.scale)
    campaign = measured(
        out_and_back(rate=20.0), seed=seed + 10**6, source=source, errors=errors, magnet=WIDE
    )
    return stitch(campaign, knot_spacing=knots)


@cache
def plain_map(seed=1):
    """The same map for tests that only look."""
    return map_of(SOFT, seed)
