"""Window, tilt and temperature of a probe: is what they add to the uncertainty true?

Simulated campaigns in which only these are uncertain; errors are counted in the stated u.
"""

from __future__ import annotations

import os
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import chi2

import fieldmap
from fieldmap.bench.bench_errors import draw_errors
from fieldmap.bench.twin import record
from fieldmap.readings import PointReference
from tests.shop import AXIS, DIPOLE, MAIN, RECT, ROUND, STAGE, WIRE, plan, planned, truth

SAMPLE = os.environ.get("FIELDMAP_STUDY", "whole") == "sample"
COUNT = 20 if SAMPLE else 60
# bounds of the root of a mean square of COUNT normal deviates, one in a thousand to either side
LOW, HIGH = np.sqrt(chi2.ppf([0.001, 0.999], COUNT) / COUNT)
CASES = {
    "window of a rectangular coil": (replace(RECT, u_window=1e-4), {}),
    "window of a round coil": (replace(ROUND, u_window=1e-4), {}),
    "tilt of a wire": (replace(WIRE, u_active_length=0.0, u_tilt=0.03), {}),
    "temperature of a wire": (
        replace(WIRE, u_active_length=0.0, temperature_coefficient=2e-5, u_temperature=20.0),
        {"temperature": lambda time: 25.0 + 0.3 * time},
    ),
}


@pytest.mark.slow
@pytest.mark.parametrize("case", CASES)
def test_error_over_u(case):
    probe, how = CASES[case]
    quiet = replace(MAIN, walk_noise=2e-8, read_noise=1e-8, u_drift=1e-9)
    integrator = quiet if probe.senses_level else MAIN
    still = replace(STAGE, u_lag=0.0, u_offset=0.0, u_scale=0.0, u_position=0.0)
    passes = planned((-0.4, 0.4), (0.4, -0.4), probe=probe, integrator=integrator)
    references = () if probe.senses_level else (PointReference(0.0, 0.5, 1e-6),)
    scan = plan(passes, references, stage=still)
    known = truth(DIPOLE, AXIS)
    errors = []
    for seed in range(COUNT):
        rng = np.random.default_rng([7, seed])
        measured = record(scan, DIPOLE, rng, draw_errors(scan, rng), **how)
        results = fieldmap.evaluate(fieldmap.stitch(measured, knot_spacing=0.003), fringe=False)
        errors.append([(results[key].value - known[key]) / results[key].u for key in known])
    rms = np.sqrt(np.mean(np.square(errors), axis=0))
    # the square of a normal angle is no normal deviate: a tilt strays further
    low, high = (LOW - 0.3, HIGH + 0.5) if "tilt" in case else (LOW, HIGH)
    worst = rms[0] if "tilt" in case or "temperature" in case else rms[2]
    assert low < worst < high, rms
    assert np.all(rms < high), rms
