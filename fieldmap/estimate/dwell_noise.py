"""Drift and noise of an integrator from one dwell, by restricted maximum likelihood.

The increments of evenly spaced readings have a tridiagonal Toeplitz covariance: the walk gives
σ_w²·Δt to each, the read noise 2σ_r² to each and -σ_r² to its neighbours. The sine transform
turns them into independent numbers with variances ``σ_w²·Δt + σ_r²·(2 - 2 cos ω)``, so the
likelihood is exact and costs no more than a transform. What stands out of it, such as the line
of the mains, is left out and told.

Sources: J. W. Demmel, *Applied Numerical Linear Algebra*, SIAM 1997, lemma 6.1 (the eigenvectors);
H. D. Patterson & R. Thompson, Biometrika 58, 545 (1971) (restricted likelihood).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, NamedTuple

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.response import response

if TYPE_CHECKING:
    from fieldmap.estimate.dwell import Dwell
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.probe import Probe

__all__ = ["DwellNoise", "Line", "dwell_noise", "jitter_seen"]

Floats = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]

ROUNDS: Final = 4  # of leaving out lines
RARE: Final = 12.0  # a power beyond 2 ln n + this, in its expectation, is no chance: p < 1e-2
SHARES: Final = np.linspace(-18.0, 18.0, 37)  # log odds of the read noise's share that are tried
NEIGHBOURS: Final = 3  # transform bins between the parts of one line
EXACT: Final = 1e-12  # of the increments: what is left of a straight line by rounding


class Line(NamedTuple):
    """A line in the spectrum: its frequency (Hz) and its rms voltage (V)."""

    frequency: float
    voltage: float


@dataclass(frozen=True)
class DwellNoise:
    """What a dwell tells of its integrator, each with its standard uncertainty.

    Parameters
    ----------
    drift, u_drift : float
        Drift rate, V s/s.
    walk, u_walk : float
        Random walk, V s per root second.
    read, u_read : float or None
        Independent noise of a reading, V s; None for a record of the voltage, whose samples have
        no noise beside the walk of their integral.
    lines : tuple of Line
        What was left out, strongest first.
    readings : int
        Readings it was taken from.
    """

    drift: float
    u_drift: float
    walk: float
    u_walk: float
    read: float | None
    u_read: float | None
    lines: tuple[Line, ...]
    readings: int


def dwell_noise(dwell: Dwell) -> DwellNoise:
    """Drift, walk noise and read noise from one dwell.

    Parameters
    ----------
    dwell : Dwell
        From `find_dwells`.

    Returns
    -------
    DwellNoise
        A noise that does not show is near zero with an uncertainty that says how large it may be.

    Raises
    ------
    InputError
        Readings that are not evenly spaced.

    Examples
    --------
    >>> from fieldmap.estimate.dwell import find_dwells
    >>> from fieldmap.readings import Wire, make_pass
    >>> rng = np.random.default_rng(1)
    >>> flux = 3e-7 * np.sqrt(0.01) * np.cumsum(rng.standard_normal(4000))  # a walk of 300 nV s/√s
    >>> (dwell,) = find_dwells(make_pass(np.zeros(4000), flux, rate=100.0, probe=Wire("w", 1, 1)))
    >>> found = dwell_noise(dwell)
    >>> abs(found.walk - 3e-7) < 3 * found.u_walk < 3e-8
    True
    """
    dwell.check_even()
    transform = _transform(dwell)
    if not transform.scale > 0:
        read = None if dwell.record == "voltage" else 0.0
        return DwellNoise(transform.mean, 0.0, 0.0, 0.0, read, read, (), len(dwell.time))
    keep = transform.told.copy()
    for _ in range(ROUNDS):
        model = _fit(transform, keep)
        power = model.excess(transform) ** 2 / model.variance
        loud = keep & (power > 2 * math.log(len(power)) + RARE)
        if not loud.any():
            break
        keep &= ~loud
    return _gathered(dwell, transform, model, keep)


@dataclass(frozen=True, eq=False)
class _Transform:
    """Sine transform of the increments, in units of their scale, and of a drift of 1 V s/s."""

    value: Floats
    drift: Floats
    walk_shape: Floats
    read_shape: Floats
    told: Mask  # frequencies that the fit takes in
    angle: Floats
    scale: float
    mean: float
    step: float


@dataclass(frozen=True, eq=False)
class _Model:
    """A fit: variance of each transformed increment, drift, and the two levels as variances."""

    variance: Floats
    drift: float
    u_drift: float
    walk: float
    read: float
    minus_log: float

    def excess(self, transform: _Transform) -> Floats:
        return np.asarray(transform.value - self.drift * transform.drift)


def _transform(dwell: Dwell) -> _Transform:
    from scipy.fft import dst

    steps = np.diff(dwell.flux)
    mean, size = float(steps.mean()), float(np.abs(dwell.flux).max(initial=0.0))
    scale = float(np.std(steps))
    if scale <= EXACT * size:
        scale = 0.0
    n = len(steps)
    angle = np.arange(1, n + 1) * np.pi / (n + 1)
    sampled = dwell.record == "voltage"
    return _Transform(
        value=dst((steps - mean) / (scale or 1.0), type=1, norm="ortho"),
        drift=dst(np.full(n, dwell.step / (scale or 1.0)), type=1, norm="ortho"),
        walk_shape=_sampled_shape(angle) if sampled else np.ones(n),
        read_shape=np.zeros(n) if sampled else 2 - 2 * np.cos(angle),
        told=angle <= np.pi / 2 if sampled else np.ones(n, dtype=np.bool_),
        angle=angle,
        scale=scale,
        mean=mean / dwell.step,
        step=dwell.step,
    )


def _sampled_shape(angle: Floats) -> Floats:
    """Power of the increments of a cubic spline through white samples of a voltage.

    The cardinal cubic spline has the samples' transform over (4 + 2 cos ω)/6; its integral over a
    step samples the quartic B-spline halfway between knots.
    """
    integral = (22 * np.cos(angle / 2) + 2 * np.cos(1.5 * angle)) / 24
    return np.asarray((integral / ((4 + 2 * np.cos(angle)) / 6)) ** 2)


def _fit(transform: _Transform, keep: Mask) -> _Model:
    """The most likely levels: the share of the read noise is searched, all else follows."""
    from scipy.optimize import minimize_scalar

    if not transform.read_shape.any():
        return _model(transform, keep, 0.0)
    tried = [_model(transform, keep, _share(odds)).minus_log for odds in SHARES.tolist()]
    best = int(np.argmin(tried))
    low, high = SHARES[max(best - 1, 0)], SHARES[min(best + 1, len(SHARES) - 1)]
    found = minimize_scalar(
        lambda odds: _model(transform, keep, _share(odds)).minus_log,
        bounds=(float(low), float(high)),
        method="bounded",
    )
    return _model(transform, keep, _share(float(found.x)))


def _share(odds: float) -> float:
    return 1 / (1 + math.exp(-odds))


def _model(transform: _Transform, keep: Mask, share: float) -> _Model:
    """Restricted likelihood for a share of the read noise; drift and size are the best for it."""
    shape = (1 - share) * transform.walk_shape + share / 2 * transform.read_shape
    value, drift = transform.value[keep], transform.drift[keep]
    weight = 1 / shape[keep]
    told = float(weight @ drift**2)
    rate = float((weight * drift) @ value) / told
    size = float(weight @ (value - rate * drift) ** 2) / (len(value) - 1)
    logs = (len(value) - 1) * math.log(size) - float(np.log(weight).sum()) + math.log(told)
    return _Model(
        variance=size * shape,
        drift=rate,
        u_drift=math.sqrt(size / told),
        walk=size * (1 - share),
        read=size * share / 2,
        minus_log=0.5 * logs,
    )


def _gathered(dwell: Dwell, transform: _Transform, model: _Model, keep: Mask) -> DwellNoise:
    """Levels in SI with the uncertainties of the expected information."""
    weight = transform.scale**2
    u_walk, u_read = _u_levels(transform, model, keep)
    walk, up_walk = _root(model.walk * weight / dwell.step, u_walk * weight / dwell.step)
    read, up_read = _root(model.read * weight, u_read * weight)
    sampled = dwell.record == "voltage"
    return DwellNoise(
        drift=transform.mean + model.drift,
        u_drift=model.u_drift,
        walk=walk,
        u_walk=up_walk,
        read=None if sampled else read,
        u_read=None if sampled else up_read,
        lines=_lines(transform, model, keep & transform.told),
        readings=len(dwell.time),
    )


def _u_levels(transform: _Transform, model: _Model, keep: Mask) -> tuple[float, float]:
    """Standard uncertainties of the two variances."""
    shapes = np.array([transform.walk_shape, transform.read_shape])[:, keep]
    weighed = shapes / model.variance[keep]
    information = 0.5 * weighed @ weighed.T
    if information[1, 1] == 0:
        return 1 / math.sqrt(information[0, 0]), 0.0
    spread = np.diagonal(np.linalg.inv(information))
    return math.sqrt(spread[0]), math.sqrt(spread[1])


def _root(variance: float, u: float) -> tuple[float, float]:
    """A level from its variance, with the step up to the level of one uncertainty more."""
    level = math.sqrt(max(variance, 0.0))
    return level, math.sqrt(max(variance, 0.0) + u) - level


def _lines(transform: _Transform, model: _Model, keep: Mask) -> tuple[Line, ...]:
    """Lines that were left out: neighbours in the transform are parts of one."""
    out = np.flatnonzero(transform.told & ~keep)
    if not len(out):
        return ()
    power = model.excess(transform) ** 2 - model.variance
    groups = np.split(out, np.flatnonzero(np.diff(out) > NEIGHBOURS) + 1)
    found = []
    for group in groups:
        share = float(power[group].sum()) / len(power)
        peak = group[int(np.argmax(power[group]))]
        frequency = float(transform.angle[peak]) / (2 * np.pi * transform.step)
        found.append(Line(frequency, math.sqrt(share) * transform.scale / transform.step))
    return tuple(sorted(found, key=lambda line: -line.voltage))


def jitter_seen(line: FieldLine, probe: Probe, at: float, u_position: float) -> float:
    """Noise that the jitter of a standing probe's position adds to each reading.

    Parameters
    ----------
    line : FieldLine
        The field.
    probe : Wire or Coil
        What stands there.
    at : float
        Position, m.
    u_position : float
        Jitter of a reading, m.

    Returns
    -------
    float
        V s: the jitter times the slope of the flux.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> from fieldmap.readings.probe import Wire
    >>> spline = UniformSpline.covering(-0.1, 0.1, 0.02)
    >>> line = FieldLine(0, 0, -0.1, 0.1, spline, np.full(13, 0.5), np.eye(13))
    >>> round(jitter_seen(line, Wire("w", 20, 0.05), 0.0, 4e-6), 12)  # a wire cuts 0.5 T
    2e-06
    """
    nodes = response(probe, line.spline.spacing)
    order = 0 if nodes.of_integral else 1
    slope = float(nodes.weights @ line.field(at + nodes.offsets, order))
    return abs(slope) * u_position
