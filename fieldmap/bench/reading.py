"""From where a probe is to what the bench shows: shared by planned and by replayed passes."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.readings.probe import Coil

if TYPE_CHECKING:
    from fieldmap.bench.bench_errors import Errors
    from fieldmap.readings.passes import Floats
    from fieldmap.readings.probe import Integrator, Probe

__all__ = ["shown", "true_gain", "true_position", "true_probe", "warmed", "whole_steps"]


def true_position(reached: Floats, sense: Floats | float, errors: Errors) -> Floats:
    """Where the probe is, m, when the stage believes to have reached some position.

    Parameters
    ----------
    reached : (n,) array
        By the stage's own scale, m.
    sense : (n,) array or float
        Direction of travel, +1 or -1: which side of the play the stage is on.
    errors : Errors
        True values of what is uncertain.

    Returns
    -------
    (n,) array

    Examples
    --------
    >>> from fieldmap.bench.bench_errors import Errors
    >>> true_position(np.array([0.0, 1.0]), 1.0, Errors(scale=1e-3, backlash=2e-4)).tolist()
    [0.0001, 1.0010999999999999]
    """
    return reached * (1.0 + errors.scale) + errors.offset + sense * errors.backlash / 2.0


def true_probe(probe: Probe, errors: Errors) -> Probe:
    """The probe with the window that it truly has; its stated area stays."""
    wrong = errors.window.get(probe.name, 0.0)
    return replace(probe, window=probe.window + wrong) if isinstance(probe, Coil) else probe


def true_gain(probe: Probe, errors: Errors) -> float:
    """How much a probe collects over what its stated size says.

    Parameters
    ----------
    probe : Wire or Coil
        The probe.
    errors : Errors
        Of its size, its angle to the field and its temperature.

    Returns
    -------
    float

    Examples
    --------
    >>> from fieldmap.bench.bench_errors import Errors
    >>> from fieldmap.readings.probe import Wire
    >>> round(true_gain(Wire("w", 1, 0.05), Errors(gain={"w": 1e-3}, tilt={"w": 0.02})), 6)
    1.0008
    """
    size = 1.0 + errors.gain.get(probe.name, 0.0)
    warmer = probe.temperature_coefficient * errors.warmth.get(probe.name, 0.0)
    return size * math.cos(errors.tilt.get(probe.name, 0.0)) * (1.0 + warmer)


def warmed(probe: Probe, temperature: Floats) -> Floats:
    """Gain of a probe at some temperatures (degC) over that at its reference temperature."""
    warmer = temperature - probe.reference_temperature
    return np.asarray(1.0 + probe.temperature_coefficient * warmer)


def shown(integral: Floats, time: Floats, integrator: Integrator, noise: Floats) -> Floats:
    """What an integrator shows of an integral: with droop and read noise, in steps, clipped.

    Parameters
    ----------
    integral : (n,) array
        Of the voltage at its input, drift and random walk included, V s.
    time : (n,) array
        s.
    integrator : Integrator
        The integrator.
    noise : (n,) array
        Read noise, V s.

    Returns
    -------
    (n,) array
        V s.

    Examples
    --------
    >>> from fieldmap.readings.probe import Integrator
    >>> coarse = Integrator("main", resolution=0.1, full_scale=0.35)
    >>> integral, time = np.array([0.0, 0.22, 0.44]), np.arange(3.0)
    >>> shown(integral, time, coarse, np.zeros(3)).tolist()
    [0.0, 0.2, 0.35]
    """
    held = _drooped(integral, time, integrator)
    steps = whole_steps(held + noise, integrator.resolution)
    full = integrator.full_scale
    return steps if full is None else np.clip(steps, -full, full)


def whole_steps(values: Floats, step: float) -> Floats:
    """Round to whole steps; through the inverse where that is whole, which keeps decimals short."""
    if step <= 0.0:
        return values
    inverse = round(1.0 / step)
    if inverse and abs(inverse * step - 1.0) < 1e-14:
        return np.asarray(np.round(values * inverse) / inverse + 0.0)  # no negative zero
    return np.asarray(np.round(values / step) * step + 0.0)


def _drooped(integral: Floats, time: Floats, integrator: Integrator) -> Floats:
    """What an analog integrator holds of an integral: dy/dt = v - y/tau, v even in each step."""
    if integrator.kind != "analog" or integrator.leak_time is None:
        return integral
    held = np.empty_like(integral)
    held[0] = integral[0]
    share = np.diff(time) / integrator.leak_time
    kept = np.exp(-share)
    passed = np.where(share > 0, -np.expm1(-share) / np.where(share > 0, share, 1.0), 1.0)
    gained = np.diff(integral) * passed
    for i in range(len(share)):
        held[i + 1] = held[i] * kept[i] + gained[i]
    return held
