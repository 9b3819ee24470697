"""Solved lines for the tests of what is said of readings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldmap.bench.bench_errors import Errors, Noise
from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate.fit import fit_line
from fieldmap.estimate.knots import knots_for
from fieldmap.readings import Axis
from tests.shop import MAIN, WIRE, measured, planned

SHORT = TanhMagnet(0.5, length=0.1, lam=0.03 / np.pi)
LINE = Axis("z", (-0.18, 0.18), (-0.02, 0.02))
NOISE = {"main": Noise(200e-9, 50e-9)}
GAP = 0.03
TRAVELS = ((-0.2, 0.2), (0.2, -0.2), (-0.2, 0.2), (0.2, -0.2))


def four_passes(*, probes=(WIRE,) * 4, integrator=MAIN, seed=0, errors=None, **more):
    """Four passes over a short magnet, there and back."""
    passes = [
        one
        for travel, probe in zip(TRAVELS, probes, strict=True)
        for one in planned(travel, probe=probe, integrator=integrator, rate=50.0)
    ]
    errors = errors or Errors(noise=NOISE)
    return measured(passes, source=SHORT, axis=LINE, seed=seed, errors=errors, **more)


def with_fault(campaign, change, number=1):
    """The campaign with one pass changed."""
    passes = list(campaign.passes)
    passes[number] = change(passes[number])
    return replace(campaign, passes=tuple(passes))


def fitted(campaign, passes=None, spacing=0.004):
    """Fit of its only line on given knots."""
    knots = knots_for(campaign.passes, -0.2, 0.2, spacing)
    chosen = campaign.passes if passes is None else passes
    return fit_line(chosen, campaign.references, campaign.stage, knots, GAP)
