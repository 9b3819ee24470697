"""Campaigns with one fault in their last pass, and the correction that undoes it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.bench.bench_errors import draw_errors
from fieldmap.bench.twin import read_point, record
from fieldmap.readings import Campaign, Correction
from fieldmap.readings.records import integrate_voltage
from tests.shop import DIPOLE, WIRE, plan, planned

if TYPE_CHECKING:
    from collections.abc import Callable

SCANS = ((-0.4, 0.4), (0.4, -0.4), (-0.4, 0.4))
LAST = "pass_03.csv"
RATE = 20.0
FACTOR, U_FACTOR = 0.5, 0.02
LAG, U_LAG = 0.08, 2e-3
SHIFT, U_SHIFT = 2e-3, 2e-4
STEP_AT, STEP = 9.0, 7e-3  # inside the magnet at 50 mm/s
SPIKES = (8.9, 9.2)


@dataclass(frozen=True)
class Faulty:
    """A campaign as it should have been, as it was recorded, and what undoes the fault."""

    sound: Campaign
    faulty: Campaign
    correction: Correction


def faulty(kind: str, seed: int, *, how: str = "cumulative", probe=WIRE, scans=SCANS) -> Faulty:
    """Measure with drawn errors; the last pass has a fault of the kind."""
    rng = np.random.default_rng([seed, len(kind), len(how)])
    references = [read_point(DIPOLE, 0.0, 2e-5, rng)]
    bench = plan(planned(*scans, probe=probe, rate=RATE, record=how), references)
    errors = draw_errors(bench, rng)
    sound = record(bench, DIPOLE, rng, errors)
    make: Callable[..., tuple[Campaign, Correction]] = {
        "factor": _factor,
        "lag": _lag,
    }.get(kind, _spoilt)
    spoilt, correction = make(sound, kind, bench, errors, rng)
    return Faulty(sound, spoilt, replace(correction, where=sound.passes[-1].name))


def _spoilt(sound, kind, bench, errors, rng):
    """Faults that are put into the readings of the last pass."""
    del bench, errors
    *others, last = sound.passes
    if kind == "polarity":
        last, found = replace(last, flux=-last.flux), Correction(kind, "")
    elif kind == "shift":
        off = SHIFT + U_SHIFT * rng.standard_normal()
        last = replace(last, position=last.position - off)
        found = Correction(kind, "", SHIFT, U_SHIFT)
    elif kind == "step":
        last = replace(last, flux=last.flux + STEP * (last.time >= STEP_AT))
        found = Correction(kind, "", start=STEP_AT)
    else:
        last, found = _spiked(last, rng), Correction("spikes", "", start=SPIKES[0], stop=SPIKES[1])
    return replace(sound, passes=(*others, last)), found


def _spiked(last, rng):
    """Wild readings for a while; increments and voltages are displaced from there on."""
    wild = (last.time >= SPIKES[0]) & (last.time <= SPIKES[1])
    noise = 2e-3 * rng.standard_normal(len(last.time)) * wild
    if last.record == "increments":
        noise = np.cumsum(noise)
    if last.record == "voltage":
        noise = integrate_voltage(RATE * noise, last.time)
    return replace(last, flux=last.flux + noise)


def _factor(sound, kind, bench, errors, rng):
    """The last pass was made with a probe of another size, by the same integrator."""
    factor = FACTOR * (1 + U_FACTOR * rng.standard_normal())
    last = bench.planned[-1]
    other = replace(last.probe, turns=last.probe.turns / factor)
    again = replace(bench, planned=(*bench.planned[:-1], replace(last, probe=other)))
    made = replace(record(again, DIPOLE, rng, errors).passes[-1], probe=last.probe)
    return replace(sound, passes=(*sound.passes[:-1], made)), Correction(kind, "", FACTOR, U_FACTOR)


def _lag(sound, kind, bench, errors, rng):
    """The last pass was read later than the others."""
    late = replace(errors, lag=errors.lag + LAG + U_LAG * rng.standard_normal())
    last = record(bench, DIPOLE, rng, late).passes[-1]
    return replace(sound, passes=(*sound.passes[:-1], last)), Correction(kind, "", LAG, U_LAG)
