"""How a stage carries a probe in a planned pass: dwell, ramp up, constant speed, ramp down, dwell.

The ramps are short and smooth. A speed that jumped would make the induced voltage jump, which
no bench shows and no integration of voltage samples follows.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from fieldmap.readings.passes import Floats, PlannedPass

__all__ = ["RAMP", "direction", "duration", "nominal_position", "nominal_speed", "reading_times"]

RAMP: Final = 0.4
"""Time from rest to full speed, s; shorter where the travel is too short for it."""


def direction(planned: PlannedPass) -> float:
    """Sense of the travel, +1 or -1."""
    return 1.0 if planned.stop > planned.start else -1.0


def duration(planned: PlannedPass) -> float:
    """Time that a pass takes, both dwells and ramps included, s."""
    return 2.0 * planned.dwell + _cruise(planned) + _ramp(planned)


def reading_times(planned: PlannedPass) -> Floats:
    """Times of the readings, from 0 at the planned rate, s."""
    count = int(duration(planned) * planned.rate * (1.0 + 1e-12)) + 1
    return np.arange(count) / planned.rate


def nominal_position(planned: PlannedPass, time: Floats) -> Floats:
    """Where the stage is meant to be, m, at times (s) from the start of the pass.

    Examples
    --------
    >>> from fieldmap.readings.passes import PlannedPass
    >>> from fieldmap.readings.probe import Integrator, Wire
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> planned = PlannedPass("out", wire, Integrator("main"), 0.0, 0.2, 0.1, 100.0, dwell=1.0)
    >>> nominal_position(planned, np.array([0.0, 2.2, duration(planned)])).round(12).tolist()
    [0.0, 0.1, 0.2]
    """
    ramp, whole = _ramp(planned), _cruise(planned)
    since = time - planned.dwell
    travelled = _ramp_area(since, ramp) - _ramp_area(since - whole, ramp)
    return planned.start + direction(planned) * planned.speed * travelled


def nominal_speed(planned: PlannedPass, time: Floats) -> Floats:
    """Signed speed of the stage, m/s, at times (s) from the start of the pass."""
    ramp, whole = _ramp(planned), _cruise(planned)
    since = time - planned.dwell
    share = _ramp_height(since, ramp) - _ramp_height(since - whole, ramp)
    return direction(planned) * planned.speed * share


def _cruise(planned: PlannedPass) -> float:
    """Time the travel would take at full speed throughout, s."""
    return abs(planned.stop - planned.start) / planned.speed


def _ramp(planned: PlannedPass) -> float:
    """Time from rest to full speed, s."""
    return min(RAMP, _cruise(planned))


def _ramp_height(since: Floats, ramp: float) -> Floats:
    """Rise from 0 to 1 within the ramp by the polynomial with two flat derivatives at each end."""
    x = np.clip(since / ramp, 0.0, 1.0)
    return np.asarray(x**3 * (10.0 + x * (6.0 * x - 15.0)))


def _ramp_area(since: Floats, ramp: float) -> Floats:
    """Integral of the rise over time, s."""
    x = np.clip(since / ramp, 0.0, 1.0)
    within = x**4 * (2.5 + x * (x - 3.0))
    return np.asarray(ramp * within + np.maximum(since - ramp, 0.0))
