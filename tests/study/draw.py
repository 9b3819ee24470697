"""Random campaigns for the calibration study: magnet, bench and scan layout from one seed.

Everything uncertain is drawn from the standard uncertainty that the campaign states, so that
a reduction whose uncertainties hold up errs by about one of them.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.bench_errors import Errors, Noise, draw_errors
from fieldmap.bench.twin import read_flip, read_point, record
from fieldmap.readings import (
    Campaign,
    Coil,
    Integrator,
    PlannedPass,
    Stage,
    Wire,
    ZeroReference,
)
from tests.study.magnets import Drawn, draw_magnet, log_uniform, tidy

if TYPE_CHECKING:
    from fieldmap.bench.sources import Source
    from fieldmap.readings import Probe, Record, Reference

KINDS: Final = (
    "wire+point",
    "wire+zero",
    "rectangular+point",
    "rectangular+flip",
    "rectangular+zero",
    "round+point",
    "round+flip",
    "round+zero",
    "mixed+point",
    "mixed",
)

RATES: Final = (20.0, 25.0, 50.0, 100.0, 200.0)  # Hz
LARGEST_FLUX: Final = 0.3  # V s
TYPICAL_DRIFT: Final = 1e-6  # V s/s, where the campaign file says nothing


@dataclass(frozen=True)
class _Chance:
    """The true noise, and whether the campaign file states it."""

    noise: Noise
    drift: float
    noise_stated: bool
    drift_stated: bool


def draw_campaign(kind: str, seed: int) -> tuple[Campaign, Source]:
    """Draw, plan and record one campaign.

    Parameters
    ----------
    kind : str
        One of KINDS: what moves, and what gives the level.
    seed : int
        The same seed gives the same campaign.

    Returns
    -------
    campaign : Campaign
        As an engineer would have it: stated uncertainties, not the true errors.
    source : Source
        The true field.
    """
    rng = np.random.default_rng([KINDS.index(kind), seed])
    moved, _, reference = kind.partition("+")
    drawn = draw_magnet(rng, small=moved == "wire")
    chance = _draw_chance(rng)
    how = _draw_record(rng)
    integrator = _integrator(rng, chance, how)
    probes = _draw_probes(rng, moved, drawn)
    plan = Campaign(
        name=f"study {kind} {seed}",
        magnet=drawn.magnet,
        axis=drawn.axis,
        stage=_draw_stage(rng, drawn.magnet.gap),
        planned=_draw_layout(rng, drawn, probes, integrator, how),
    )
    flipped = next((probe for probe in probes if isinstance(probe, Coil)), None)
    errors = _draw_true_errors(rng, plan, chance)
    references = _draw_references(rng, reference, drawn, plan, flipped, errors)
    plan = replace(plan, references=references)
    return record(plan, drawn.source, rng, errors), drawn.source


def _draw_chance(rng: np.random.Generator) -> _Chance:
    noise = Noise(walk=log_uniform(rng, 30e-9, 300e-9), read=log_uniform(rng, 20e-9, 150e-9))
    return _Chance(
        noise=noise,
        drift=log_uniform(rng, 3e-7, 3e-6),
        noise_stated=bool(rng.random() < 0.5),
        drift_stated=bool(rng.random() < 0.85),
    )


def _draw_record(rng: np.random.Generator) -> Record:
    kinds: tuple[Record, ...] = ("cumulative", "cumulative", "increments", "voltage")
    return kinds[rng.integers(len(kinds))]


def _integrator(rng: np.random.Generator, chance: _Chance, how: Record) -> Integrator:
    """State what the campaign file says; one in seven cumulative ones droops."""
    droops = rng.random() < 0.15 and how == "cumulative"
    stated = chance.noise_stated
    return Integrator(
        "main",
        kind="analog" if droops else "digital",
        read_noise=chance.noise.read if stated else None,
        walk_noise=chance.noise.walk if stated else None,
        u_drift=chance.drift if chance.drift_stated else None,
        resolution=1e-9,
        leak_time=tidy(log_uniform(rng, 1000.0, 5000.0)) if droops else None,
    )


def _draw_probes(rng: np.random.Generator, moved: str, drawn: Drawn) -> list[Probe]:
    """Draw a wire, a coil, or one of each."""
    if moved == "wire":
        return [_draw_wire(rng, drawn)]
    if moved == "mixed":
        return [_draw_wire(rng, drawn), _draw_coil(rng, "rectangular", drawn)]
    return [_draw_coil(rng, moved, drawn)]


def _draw_wire(rng: np.random.Generator, drawn: Drawn) -> Wire:
    """Draw a wire whose flux an integrator resolves well and holds."""
    start, stop = drawn.axis.integrate
    collected = abs(drawn.source.between(start, stop))
    length = tidy(rng.uniform(0.02, 0.08))
    wanted = log_uniform(rng, 3e-3, LARGEST_FLUX) / (collected * length)
    return Wire(
        "wire",
        turns=float(np.clip(round(wanted), 1, 200)),
        active_length=length,
        u_active_length=length * log_uniform(rng, 1e-4, 1e-3),
        width=drawn.magnet.gap * rng.uniform(0.0, 0.1),
    )


def _draw_coil(rng: np.random.Generator, shape: str, drawn: Drawn) -> Coil:
    """Draw a coil that fits in the gap."""
    area = min(log_uniform(rng, 5e-3, LARGEST_FLUX) / drawn.level, 2.0)
    return Coil(
        "coil",
        shape="round" if shape == "round" else "rectangular",
        effective_area=area,
        u_effective_area=area * log_uniform(rng, 5e-5, 5e-4),
        window=rng.uniform(*drawn.windows),
    )


def _draw_stage(rng: np.random.Generator, gap: float) -> Stage:
    """Draw a stage whose precision suits the gap."""
    fine = min(1.0, gap / 0.01)
    return Stage(
        u_scale=log_uniform(rng, 10e-6, 50e-6),
        u_position=fine * rng.uniform(1e-6, 5e-6),
        u_offset=fine * log_uniform(rng, 1e-5, 1e-4),
        u_lag=log_uniform(rng, 3e-4, 3e-3),
        u_backlash=fine * rng.uniform(2e-6, 1e-5) if rng.random() < 0.3 else 0.0,
    )


def _draw_layout(
    rng: np.random.Generator,
    drawn: Drawn,
    probes: list[Probe],
    integrator: Integrator,
    how: Record,
) -> tuple[PlannedPass, ...]:
    """Draw overlapping stretches and spread the passes over them; each probe travels all."""
    most = 3 if len(probes) == 1 else 2
    stations = int(rng.integers(1, most + 1))
    least = max(2, stations * len(probes))
    passes = int(rng.integers(least, 7))
    half = tidy(drawn.axis.integrate[1] * rng.uniform(1.01, 1.06), 4)
    overlap = rng.uniform(0.15, 0.4)
    travel = 2.0 * half / (stations - (stations - 1) * overlap)
    time = rng.uniform(10.0, 30.0)
    rate = _draw_rate(rng, drawn, travel / time, how)
    dwell = rng.uniform(1.0, 4.0)
    planned = []
    for number in range(passes):
        station = number // len(probes) % stations
        low = -half + station * travel * (1.0 - overlap)
        ends = (low, low + travel) if rng.random() < 0.5 else (low + travel, low)
        planned.append(
            PlannedPass(
                f"planned pass {number + 1}",
                probes[number % len(probes)],
                integrator,
                *ends,
                speed=travel / time,
                rate=rate,
                dwell=dwell,
                record=how,
            )
        )
    return tuple(planned)


def _draw_rate(rng: np.random.Generator, drawn: Drawn, speed: float, how: Record) -> float:
    """Draw a rate that samples the gap and, for voltages, the stage's ramps finely enough."""
    least = speed / (drawn.magnet.gap / (12.0 if how == "voltage" else 8.0))
    if how == "voltage":
        least = max(least, 50.0)
    fit = [rate for rate in RATES if rate >= least] or [RATES[-1]]
    return fit[rng.integers(len(fit[:2]))]


def _draw_true_errors(rng: np.random.Generator, plan: Campaign, chance: _Chance) -> Errors:
    errors = draw_errors(plan, rng, {"main": chance.noise})
    # flips are read after this, by a coil that may not travel in a planned pass
    if chance.drift_stated:
        return errors
    drift = TYPICAL_DRIFT * rng.standard_normal(len(plan.planned))
    return replace(errors, drift=tuple(drift.tolist()))


def _draw_references(
    rng: np.random.Generator,
    reference: str,
    drawn: Drawn,
    plan: Campaign,
    coil: Coil | None,
    errors: Errors,
) -> tuple[Reference, ...]:
    """Take the reference that the kind names."""
    if reference == "point":
        at = tidy(drawn.axis.flat[1] * rng.uniform(-1.0, 1.0))
        u = drawn.level * log_uniform(rng, 1e-5, 2e-4)
        return (read_point(drawn.source, at, u, rng),)
    if reference == "flip" and coil is not None:
        u = 2.0 * coil.effective_area * drawn.level * log_uniform(rng, 1e-5, 1e-4)
        return (read_flip(drawn.source, coil, 0.0, max(u, 1e-7), rng, errors),)
    if reference == "zero":
        return _zero_references(rng, drawn, plan)
    return ()


def _zero_references(
    rng: np.random.Generator, drawn: Drawn, plan: Campaign
) -> tuple[ZeroReference, ...]:
    """Name one or both ends field-free, within an honest bound on the field there."""
    end = max(max(planned.start, planned.stop) for planned in plan.planned)
    span = end * rng.uniform(0.05, 0.1)
    both = rng.random() < 0.5
    sides = (-1.0, 1.0) if both else (float(rng.choice([-1.0, 1.0])),)
    references = []
    for side in sides:
        start, stop = sorted((side * end, side * (end - span)))
        mean = abs(drawn.source.between(start, stop)) / span
        u = max(mean * rng.uniform(1.5, 3.0), 1e-5 * drawn.level)
        references.append(ZeroReference(start, stop, u))
    return tuple(references)
