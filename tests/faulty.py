"""Simulated passes whose rows, clock, positions or samples are spoilt, for tests of findings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldmap.bench.bench_errors import Errors, Noise
from fieldmap.bench.sources import TanhMagnet
from fieldmap.readings.records import make_pass
from tests.shop import WIRE, measured, planned

SHORT = TanhMagnet(0.5, length=0.1, lam=0.03 / np.pi)
NOISE = {"main": Noise(200e-9, 50e-9)}
RECORDS = ("cumulative", "increments", "voltage")
FAULTY = "pass_02.csv"


def bench(record="cumulative", probe=WIRE, rate=50.0, seed=0, travels=((-0.2, 0.2), (0.2, -0.2))):
    """Two clean passes over a short magnet."""
    passes = planned(*travels, probe=probe, rate=rate, record=record)
    return measured(passes, source=SHORT, seed=seed, errors=Errors(noise=NOISE)).passes


def made(one, samples=None, time=None, position=None, rows=None, **more):
    """The pass with other samples, time stamps or positions, or with some rows only."""
    samples = one.samples if samples is None else samples
    time = one.time if time is None else time
    position = one.position if position is None else position
    if rows is not None:
        samples, position = samples[rows], position[rows]
        time = time[rows] if len(time) != len(position) else time
    return make_pass(
        position,
        samples,
        time,
        probe=one.probe,
        integrator=one.integrator,
        name=one.name,
        record=one.record,
        **more,
    )


def second(passes, change):
    """The passes with the second one changed."""
    return [passes[0], change(passes[1]), *passes[2:]]


def even(one, count):
    """Time stamps of as many readings at the rate of a pass: what a table without time gets."""
    return np.arange(count) * float(np.median(np.diff(one.time)))


def coarse(one, step):
    """The pass with its flux recorded in steps."""
    return replace(one, flux=np.round(one.flux / step) * step)
