"""A simulated bench: a known field and a planned campaign to readings, errors and noise included.

Nothing here shares code with the estimator, so that simulated campaigns can find its mistakes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.bench.bench_errors import Errors, draw_errors, noise_of
from fieldmap.bench.reading import (
    shown,
    true_gain,
    true_position,
    true_probe,
    warmed,
    whole_steps,
)
from fieldmap.bench.response import flux
from fieldmap.bench.slope import flux_slope
from fieldmap.bench.sources import Source
from fieldmap.bench.travel import direction, nominal_position, nominal_speed, reading_times
from fieldmap.errors import InputError
from fieldmap.readings.passes import (
    Campaign,
    FlipReference,
    Floats,
    Pass,
    PlannedPass,
    PointReference,
)
from fieldmap.readings.records import cumulative_flux

if TYPE_CHECKING:
    from fieldmap.bench.bench_errors import Noise
    from fieldmap.readings.probe import Coil

__all__ = ["History", "Recorded", "Sources", "read_flip", "read_point", "record"]

Sources = Source | Callable[[float, float], Source]
"""One field for every line, or a function of the line's x and y (m) that gives its field."""

History = Callable[[Floats], Floats]
"""A quantity against time (s) from the start of a pass."""

_DIGITS: Final = 9  # decimals of a metre in recorded positions
_TICK: Final = 1e-3  # s, for the difference quotient of the supply's current


@dataclass(frozen=True, eq=False)
class Recorded(Pass):
    """A simulated pass that keeps what its table holds.

    Parameters
    ----------
    samples : (n,) array
        Cumulative flux or its increments, V s, or voltage, V, as `record` says; ``flux`` is
        what :func:`fieldmap.readings.records.cumulative_flux` makes of it.
    """

    samples: Floats | None = None


@dataclass(frozen=True)
class _Bench:
    """What all passes of one campaign are recorded with."""

    plan: Campaign
    source: Sources
    errors: Errors
    current: History | None
    temperature: History | None
    per_count: float

    def source_of(self, planned: PlannedPass) -> Source:
        """Field of the line that a pass travels."""
        if isinstance(self.source, Source):
            return self.source
        return self.source(planned.x, planned.y)

    @property
    def low_end(self) -> float:
        """Lowest position of all passes, m."""
        return min(min(planned.start, planned.stop) for planned in self.plan.planned)


def record(
    plan: Campaign,
    source: Sources,
    rng: np.random.Generator,
    errors: Errors | None = None,
    *,
    current: History | None = None,
    temperature: History | None = None,
    per_count: float = 0.0,
) -> Campaign:
    """Measure every planned pass of a campaign on a simulated bench.

    Parameters
    ----------
    plan : Campaign
        The plan; passes measured already are kept.
    source : Source or callable
        The true field along the line, or a function of the line's x and y (m) giving it.
    rng : numpy.random.Generator
        Source of chance.
    errors : Errors, optional
        True values of what is uncertain; drawn from the stated uncertainties if left out.
        ``Errors()`` is a bench whose sizes and positions are as stated.
    current : callable, optional
        Current of the supply, A, against time from the start of a pass, s. It is recorded,
        and the field follows it in proportion to the nominal current of the magnet.
    temperature : callable, optional
        Temperature, degC, against time from the start of a pass, s. It is recorded, and the
        gain of a probe with a temperature coefficient follows it.
    per_count : float
        Travel per encoder count, m: recorded positions are whole counts. Zero for none.

    Returns
    -------
    Campaign
        With a measured pass for each planned one, named as the file it would be, and no
        planned ones.

    Raises
    ------
    InputError
        If nothing is planned, the noise of an integrator is neither stated nor given, or a
        current is recorded of a magnet whose nominal current is not stated.

    Notes
    -----
    A reading at time t with the stage meant to be at s(t) shows

    - flux: ``(1 + gain) * flux(position) + drift * t + random walk + read noise``, in steps of
      the integrator's resolution, from a reset at the start, with the droop of an analog
      integrator and clipped at its full scale; increments are differences of such readings;
    - voltage: the rate of change of the flux at that instant, plus drift, plus white noise
      whose integral is the random walk.

    The true position is ``s(t + lag) * (1 + scale) + offset +- backlash/2 + jitter``. The
    stage takes up its play before a pass, so the backlash's sign is that of the pass. An
    integrator is triggered at the nominal position and the jitter is in where it was read; a
    voltmeter runs freely, so there the jitter is in the position noted beside it. White
    voltage noise of density w integrates to a random walk of w per root second; noise models
    of this kind are described by D. W. Allan (Proc. IEEE 54, 221, 1966) for clocks.

    Examples
    --------
    >>> from fieldmap.bench.sources import TanhMagnet
    >>> from fieldmap.readings.passes import Axis, Magnet
    >>> from fieldmap.readings.probe import Integrator, Wire
    >>> main = Integrator("main", read_noise=5e-8, walk_noise=1e-7)
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> plan = Campaign(
    ...     "trial",
    ...     Magnet("dipole", "By", gap=0.03),
    ...     Axis("z", (-0.4, 0.4), (-0.05, 0.05)),
    ...     planned=(PlannedPass("out", wire, main, -0.4, 0.4, 0.05, 25.0, dwell=2.0),),
    ... )
    >>> magnet = TanhMagnet(0.5, length=0.3, lam=0.03)
    >>> measured = record(plan, magnet, np.random.default_rng(1), Errors())
    >>> one = measured.passes[0]
    >>> one.name, len(one.time), round(float(one.flux[-1]), 5)
    ('pass_01.csv', 511, 0.15)
    """
    if not plan.planned:
        raise InputError(plan.name, "no planned pass", "a plan to record", "plan the passes first")
    if current is not None and not plan.magnet.current:
        expected = "the nominal current of the magnet, which the field is proportional to"
        raise InputError(f"{plan.name}, magnet", "no current", expected, "state it")
    errors = draw_errors(plan, rng) if errors is None else errors
    if errors.drift and len(errors.drift) != len(plan.planned):
        found = f"{len(errors.drift)} drift rates"
        raise InputError("argument 'errors'", found, f"one for each of {len(plan.planned)} passes")
    bench = _Bench(plan, source, errors, current, temperature, per_count)
    drifts = errors.drift or tuple(planned.integrator.drift for planned in plan.planned)
    passes = list(plan.passes)
    for planned, drift in zip(plan.planned, drifts, strict=True):
        name = _free_name({one.name for one in passes}, len(passes) + 1)
        passes.append(_recorded(bench, planned, drift, rng, name))
    return replace(plan, passes=tuple(passes), planned=())


def read_point(source: Source, at: float, u: float, rng: np.random.Generator) -> PointReference:
    """Read the field at one point with another magnetometer.

    Parameters
    ----------
    source : Source
        The true field.
    at : float
        Where, m.
    u : float
        Standard uncertainty of the reading, T.
    rng : numpy.random.Generator
        Source of chance.

    Returns
    -------
    PointReference

    Examples
    --------
    >>> from fieldmap.bench.sources import Uniform
    >>> reference = read_point(Uniform(0.5), 0.0, 1e-5, np.random.default_rng(1))
    >>> reference.at, round(reference.field, 3), reference.u
    (0.0, 0.5, 1e-05)
    """
    return PointReference(at, float(source.field(at)) + u * float(rng.standard_normal()), u)


def read_flip(
    source: Source,
    probe: Coil,
    at: float,
    u: float,
    rng: np.random.Generator,
    errors: Errors | None = None,
) -> FlipReference:
    """Turn a coil over at one point of the stage.

    Parameters
    ----------
    source : Source
        The true field.
    probe : Coil
        What is turned.
    at : float
        Recorded position, m.
    u : float
        Standard uncertainty of the change of flux, V s.
    rng : numpy.random.Generator
        Source of chance.
    errors : Errors, optional
        Gain of the coil, offset and scale of the stage; an ideal bench if left out.

    Returns
    -------
    FlipReference

    Examples
    --------
    >>> from fieldmap.bench.sources import Uniform
    >>> from fieldmap.readings.probe import Coil
    >>> coil = Coil("coil", "round", effective_area=0.3, window=0.01)
    >>> flip = read_flip(Uniform(0.5), coil, 0.0, 1e-6, np.random.default_rng(1))
    >>> round(flip.flux_change, 4)
    0.3
    """
    errors = errors or Errors()
    place = at * (1.0 + errors.scale) + errors.offset
    linked = float(flux(source, true_probe(probe, errors), place))
    change = 2.0 * true_gain(probe, errors) * linked
    return FlipReference(probe, at, change + u * float(rng.standard_normal()), u)


def _free_name(taken: set[str], number: int) -> str:
    """Name of a pass table that no other pass has."""
    while (name := f"pass_{number:02d}.csv") in taken:
        number += 1
    return name


def _recorded(
    bench: _Bench, planned: PlannedPass, drift: float, rng: np.random.Generator, name: str
) -> Recorded:
    """Record one pass."""
    time = reading_times(planned)
    nominal = nominal_position(planned, time)
    jitter = bench.plan.stage.u_position * rng.standard_normal(time.size)
    noise = noise_of(planned, bench.errors)
    if planned.record == "voltage":
        samples = _voltage(bench, planned, time) + drift
        samples += noise.walk * np.sqrt(planned.rate) * rng.standard_normal(time.size)
        noted = nominal - jitter
    else:
        samples = _shown(bench, planned, time, jitter, drift, noise, rng)
        noted = nominal
    if planned.record == "increments":
        samples = whole_steps(np.diff(samples, prepend=samples[0]), planned.integrator.resolution)
    return Recorded(
        name=name,
        probe=planned.probe,
        integrator=planned.integrator,
        time=time,
        position=np.round(whole_steps(noted, bench.per_count), _DIGITS),
        flux=cumulative_flux(samples, time, planned.record, planned.integrator),
        x=planned.x,
        y=planned.y,
        record=planned.record,
        temperature=None if bench.temperature is None else bench.temperature(time),
        current=None if bench.current is None else bench.current(time),
        samples=samples,
    )


def _true_position(bench: _Bench, planned: PlannedPass, time: Floats) -> Floats:
    """Where the probe is, jitter left out, m."""
    reached = nominal_position(planned, time + bench.errors.lag)
    return true_position(reached, direction(planned), bench.errors)


def _linked(bench: _Bench, planned: PlannedPass, position: Floats, time: Floats) -> Floats:
    """Flux through the probe, V s; a wire's circuit closes at the low end of the scan."""
    source, probe = bench.source_of(planned), true_probe(planned.probe, bench.errors)
    linked = flux(source, probe, position)
    if probe.senses_level:
        linked = linked - flux(source, probe, bench.low_end)
    return np.asarray(true_gain(probe, bench.errors) * linked * _strength(bench, planned, time))


def _strength(bench: _Bench, planned: PlannedPass, time: Floats) -> Floats:
    """Reading over its nominal value, as the supply's current and the temperature have it."""
    strength = np.ones_like(time)
    if bench.current is not None and bench.plan.magnet.current:
        strength = np.asarray(bench.current(time) / bench.plan.magnet.current)
    if bench.temperature is not None and planned.probe.temperature_coefficient:
        strength = strength * warmed(planned.probe, bench.temperature(time))
    return strength


def _voltage(bench: _Bench, planned: PlannedPass, time: Floats) -> Floats:
    """Induced voltage at the instants of the readings, V."""
    errors = bench.errors
    position = _true_position(bench, planned, time)
    speed = nominal_speed(planned, time + errors.lag) * (1.0 + errors.scale)
    probe = true_probe(planned.probe, errors)
    slope = true_gain(probe, errors) * flux_slope(bench.source_of(planned), probe, position)
    moved = slope * speed * _strength(bench, planned, time)
    if bench.current is None and bench.temperature is None:
        return np.asarray(moved)
    change = _linked(bench, planned, position, time + _TICK)
    change -= _linked(bench, planned, position, time - _TICK)
    return np.asarray(moved + change / (2.0 * _TICK))


def _shown(
    bench: _Bench,
    planned: PlannedPass,
    time: Floats,
    jitter: Floats,
    drift: float,
    noise: Noise,
    rng: np.random.Generator,
) -> Floats:
    """What the integrator shows, V s."""
    position = _true_position(bench, planned, time) + jitter
    linked = _linked(bench, planned, position, time)
    start = _true_position(bench, planned, time[:1])
    linked -= _linked(bench, planned, start, time[:1])  # reset at the start
    steps = rng.standard_normal(time.size) / np.sqrt(planned.rate)
    walk = noise.walk * np.cumsum(np.append(0.0, steps[1:]))
    read = noise.read * rng.standard_normal(time.size)
    return shown(linked + drift * time + walk, time, planned.integrator, read)
