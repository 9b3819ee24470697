"""Recorded temperature and current that moved by more than the stated uncertainties cover."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.finding import Finding

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.passes import Pass

__all__ = ["surroundings_findings"]

Floats = npt.NDArray[np.float64]

COPPER_AREA: Final = 3.4e-5  # 1/K: twice copper's expansion of 1.7e-5 (common practice)
LEAST_EFFECT: Final = 2e-5  # of a result, where no uncertainty of the gain is stated
SATURATES: Final = 0.2  # of a change of current that proportion may miss in an iron magnet
PARTS: Final = 10  # of a pass, over which the sensor's own noise is averaged


def surroundings_findings(passes: Sequence[Pass], nominal: float | None = None) -> list[Finding]:
    """Name passes whose temperature or current moved too far.

    Parameters
    ----------
    passes : sequence of Pass
        Measured passes.
    nominal : float, optional
        Current of the magnet that readings are referred to, A; None if it is not stated.

    Returns
    -------
    list of Finding
    """
    found = []
    for name in dict.fromkeys(one.probe.name for one in passes):
        own = [one for one in passes if one.probe.name == name]
        found += _temperature([one for one in own if one.temperature is not None])
        found += _current([one for one in own if one.current is not None], nominal)
    return found


def _spread(passes: Sequence[Pass], recorded: Sequence[Floats]) -> tuple[float, Pass, Pass]:
    """Largest difference of means over tenths of the passes; where it was highest and lowest."""
    means = [
        (float(part.mean()), one)
        for one, values in zip(passes, recorded, strict=True)
        for part in np.array_split(values, min(PARTS, len(values)))
    ]
    high, low = max(means, key=lambda mean: mean[0]), min(means, key=lambda mean: mean[0])
    return high[0] - low[0], high[1], low[1]


def _where(high: Pass, low: Pass) -> str:
    return f"within {high.name}" if high.name == low.name else f"between {low.name} and {high.name}"


def _temperature(passes: Sequence[Pass]) -> list[Finding]:
    """Temperature without a coefficient: the size of the probe follows it all the same."""
    if not passes or passes[0].probe.temperature_coefficient:
        return []
    recorded = [one.temperature for one in passes if one.temperature is not None]
    moved, high, low = _spread(passes, recorded)
    effect, covered = COPPER_AREA * moved, max(passes[0].probe.u_gain, LEAST_EFFECT)
    if effect <= covered:
        return []
    text = (
        f"temperature moved by {moved:.3g} K {_where(high, low)}, which changes the area of a "
        f"copper winding by {effect:.1e}, where the stated uncertainty of "
        f"'{passes[0].probe.name}' covers {covered:.1e} (standard): state "
        "temperature_coefficient (3.4e-5/K for copper, common practice), or wait until the bench "
        "is steady."
    )
    return [Finding("temperature-moved", "warn", high.name, text)]


def _current(passes: Sequence[Pass], nominal: float | None) -> list[Finding]:
    """Current that moved: the field follows it, in proportion only as far as iron allows."""
    if not passes:
        return []
    recorded = [one.current for one in passes if one.current is not None]
    moved, high, low = _spread(passes, recorded)
    mean = abs(float(np.mean([values.mean() for values in recorded])))
    covered = max(passes[0].probe.u_gain, LEAST_EFFECT)
    if mean == 0:
        return []
    share = moved / mean
    if nominal is None:
        effect = share
        remedy = "state the current in [magnet], so that readings are referred to it"
    else:
        effect = SATURATES * share
        remedy = (
            "readings are referred to the nominal current in proportion, which saturated iron does "
            "not follow; steady the supply and record again"
        )
    if effect <= covered:
        return []
    text = (
        f"current moved by {moved:.3g} A, {share:.1e} of it, {_where(high, low)}, where the "
        f"stated uncertainty of '{passes[0].probe.name}' covers {covered:.1e} (standard): {remedy}."
    )
    return [Finding("current-moved", "warn", high.name, text)]
