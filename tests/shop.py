"""Campaigns of an invented magnet shop for the tests: plans, simulated readings, true results."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldmap.bench.bench_errors import Errors
from fieldmap.bench.sources import TanhMagnet
from fieldmap.bench.twin import record
from fieldmap.readings import Axis, Campaign, Coil, Integrator, Magnet, Stage, Wire
from fieldmap.readings.passes import PlannedPass

WIRE = Wire("wire", turns=20, active_length=0.05, u_active_length=2e-5, width=0.4e-3)
RECT = Coil("coil", "rectangular", effective_area=0.3, u_effective_area=6e-5, window=0.01)
ROUND = Coil("round", "round", effective_area=0.3, u_effective_area=6e-5, window=0.01)
PROBES = {"wire": WIRE, "rect": RECT, "round": ROUND}
MAIN = Integrator("main", read_noise=50e-9, walk_noise=200e-9, u_drift=1e-6, resolution=1e-9)
STAGE = Stage(u_scale=20e-6, u_position=5e-6, u_offset=5e-5, u_lag=2e-3)
DIPOLE = TanhMagnet(0.5, length=0.3, lam=0.03 / np.pi)
AXIS = Axis("z", (-0.4, 0.4), (-0.05, 0.05))
MAGNET = Magnet("dipole", "By", gap=0.03, iron_length=0.27)


def planned(*travels, probe=WIRE, integrator=MAIN, rate=50.0, speed=0.05, dwell=1.0, **more):
    """One planned pass for each (start, stop)."""
    return tuple(
        PlannedPass(
            f"plan_{i}", probe, integrator, start, stop, speed, rate=rate, dwell=dwell, **more
        )
        for i, (start, stop) in enumerate(travels)
    )


def plan(passes, references=(), *, stage=STAGE, axis=AXIS, magnet=MAGNET, limits=()):
    """A campaign that is only planned yet."""
    return Campaign(
        "shop",
        magnet,
        axis,
        stage,
        planned=tuple(passes),
        references=tuple(references),
        limits=tuple(limits),
    )


def measured(passes, references=(), *, seed=0, source=DIPOLE, errors=None, **more):
    """A campaign as measured on the simulated bench; an ideal bench apart from its noise."""
    rng = np.random.default_rng(seed)
    return record(plan(passes, references, **more), source, rng, errors or Errors())


def out_and_back(probe=WIRE, **more):
    """Passes over the whole line in both directions."""
    return planned((-0.4, 0.4), (0.4, -0.4), probe=probe, **more)


def truth(source, axis):
    """True integrated field, central field and magnetic length."""
    total = float(source.between(*axis.integrate))
    level = float(source.between(*axis.flat)) / (axis.flat[1] - axis.flat[0])
    return {"integrated_field": total, "central_field": level, "magnetic_length": total / level}


def remade(campaign, change):
    """The campaign with every pass changed by a function."""
    return replace(campaign, passes=tuple(change(one) for one in campaign.passes))
