"""What the results of a campaign truly are, from the closed form of the field."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.readings.sections import RESULT_UNITS

if TYPE_CHECKING:
    from fieldmap.bench.sources import Source
    from fieldmap.readings.passes import Axis

__all__ = ["true_results", "truth_text"]

_FORMAT: Final = "fieldmap-truth/1"
_DIGITS: Final = 12  # significant; the last ones differ between machines
_POINTS: Final = 20_001  # first look for the peak


def true_results(source: Source, axis: Axis) -> dict[str, float]:
    """Give the true results along a line.

    Parameters
    ----------
    source : Source
        The true field.
    axis : Axis
        Limits of the integral and flat window.

    Returns
    -------
    dict of str to float
        By the names of a reduction's results, SI: integrated and central field, magnetic
        length, boundaries, magnetic centre, and the field of largest size within the limits.

    Examples
    --------
    >>> from fieldmap.bench.sources import TanhMagnet
    >>> from fieldmap.readings.passes import Axis
    >>> results = true_results(TanhMagnet(0.5, 0.4, 0.02), Axis("z", (-1, 1), (-0.05, 0.05)))
    >>> round(results["magnetic_length"], 6), round(results["boundary_out"], 6)
    (0.4, 0.2)
    """
    (start, stop), (left, right) = axis.integrate, axis.flat
    middle = (left + right) / 2
    central = source.between(left, right) / (right - left)
    boundary_in = middle - source.between(start, middle) / central
    boundary_out = middle + source.between(middle, stop) / central
    return {
        "integrated_field": source.between(start, stop),
        "central_field": central,
        "magnetic_length": source.between(start, stop) / central,
        "boundary_in": boundary_in,
        "boundary_out": boundary_out,
        "magnetic_centre": (boundary_in + boundary_out) / 2,
        "peak_field": _peak(source, start, stop),
    }


def truth_text(source: Source, axis: Axis, about: str) -> str:
    """Write the true results as the text of a ``truth.json``.

    Parameters
    ----------
    source : Source
        The true field.
    axis : Axis
        Limits of the integral and flat window.
    about : str
        What the numbers belong to.

    Returns
    -------
    str
        JSON, values in SI with 12 significant digits.

    Examples
    --------
    >>> from fieldmap.bench.sources import TanhMagnet
    >>> from fieldmap.readings.passes import Axis
    >>> text = truth_text(TanhMagnet(0.5, 0.4, 0.02), Axis("z", (-1, 1), (0, 0.1)), "a trial")
    >>> json.loads(text)["results"]["integrated_field"]
    {'value': 0.2, 'unit': 'T m'}
    """
    results = {
        name: {"value": float(f"{value:.{_DIGITS}g}"), "unit": RESULT_UNITS[name]}
        for name, value in true_results(source, axis).items()
    }
    content = {"format": _FORMAT, "about": about, "results": results}
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def _peak(source: Source, start: float, stop: float) -> float:
    """Field of largest size: a grid, then a finer one around its highest point."""
    for _ in range(2):
        s = np.linspace(start, stop, _POINTS)
        size = np.abs(source.field(s))
        highest = int(np.argmax(size))
        step = s[1] - s[0]
        start, stop = max(start, s[highest] - step), min(stop, s[highest] + step)
    return float(source.field(s[highest]))
